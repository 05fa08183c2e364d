"""Awake domains and kept state, through the package."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import hushrail
import matplotlib as mpl
import numpy as np
import pytest
from hushrail import awake, plot
from scipy.optimize import brentq

DEMO = Path(hushrail.__file__).parent / "demo_data" / "study.toml"


@pytest.fixture(autouse=True)
def no_window() -> Iterator[None]:
    mpl.use("Agg")
    import matplotlib.pyplot as plt

    yield
    plt.close("all")


@pytest.fixture(scope="module")
def kelp() -> hushrail.Process:
    return hushrail.Process.read(DEMO.parent / "cards" / "kelp40.lib", section="tt")


@pytest.mark.parametrize(("ohm", "want"), [(0.25, 23.8963e-3), (0.5, 45.7904e-3), (1.0, 84.5846e-3)])
def test_droop_is_scipys_root_and_the_sheets_value(ohm: float, want: float) -> None:
    # reference sheet B9.4, 1e-5
    found = awake.droop(awake.Load.alpha_power(0.1, 0.3, 1.3), vdd_v=1.0, ohm=ohm).droop_v
    root = brentq(lambda d: d - ohm * 0.1 * ((0.7 - d) / 0.7) ** 1.3, 0.0, 0.7, xtol=1e-15)
    assert found == pytest.approx(root, rel=1e-12)
    assert found == pytest.approx(want, rel=1e-5)


def test_droop_of_a_device_is_scipys_root_on_its_own_currents(kelp: hushrail.Process) -> None:
    switch = awake.Switch("psw", 8e-6, 8e-8, finger_width_m=2e-6)
    load = 2e-4
    solved = awake.row(
        [awake.Load.constant(load)], [0], vdd_v=1.1, segment_ohm=1.0, switch=switch, process=kelp
    )
    device = kelp.transistor("psw", w=2e-6, l=8e-8, temp_c=25.0)

    def balance(d: float) -> float:
        return float(-4.0 * device.currents(vd=1.1 - d, vg=0.0, vs=1.1, vb=1.1)[..., 0]) - load

    assert solved.worst_v == pytest.approx(brentq(balance, 0.0, 1.0, xtol=1e-15), rel=1e-9)


def test_row_is_the_dense_solution() -> None:
    rng = np.random.default_rng(3)
    loads = rng.uniform(0.0, 1e-3, 12)
    found = awake.row(
        [awake.Load.constant(i) for i in loads],
        [0, 7],
        vdd_v=10.0,
        segment_ohm=0.7,
        across_ohm=2.0,
        rows=3,
        ohm=1.5,
    )
    g = np.zeros((12, 12))

    def join(a: int, b: int, ohm: float) -> None:
        g[[a, b], [a, b]] += 1.0 / ohm
        g[[a, b], [b, a]] -= 1.0 / ohm

    for r in range(3):
        for c in range(4):
            if c < 3:
                join(4 * r + c, 4 * r + c + 1, 0.7)
            if r < 2:
                join(4 * r + c, 4 * r + c + 4, 2.0)
    g[[0, 7], [0, 7]] += 1.0 / 1.5
    np.testing.assert_allclose(found.droop_v, np.linalg.solve(g, loads), rtol=1e-10)


def test_study_awake(small: Path) -> None:
    name = "core"
    asked = {"neighbour_a": 1e-5, "budget_v": 0.03}
    density = awake.Density(1e-6, 1e-12, 50e-6)
    report = awake.domains(small, {name: awake.Load.constant(1e-4)}, density=density, cells="inv*", **asked)  # type: ignore[arg-type]
    assert not report.failures, report.failures
    worst = report.worst(name, "header")
    assert worst.header is not None
    assert worst.header.on.chord_ohm == pytest.approx(worst.droop.droop_v / 1e-4, rel=1e-9)
    assert worst.neighbour is not None
    # a step is felt through the slope, a little more than the chord
    assert worst.neighbour.noise_v >= 1e-5 * worst.header.on.chord_ohm
    (cell,) = worst.cells
    assert cell.square_v is not None
    assert cell.full_square_v is not None
    assert cell.square_v < cell.full_square_v
    assert all(d.penalty > 0.0 for d in cell.delays)
    (size,) = [s.size for s in report.sizes if s.scheme == "header"]
    assert size.corner == worst.corner
    assert max(c.droop_v for c in size.corners) <= 0.03
    assert size.area_m2 is not None
    assert len(report.to_pandas()) == len(report.points)
    too_much = awake.domains(small, {name: awake.Load.constant(1.0)})
    assert any("no operating point" in f.reason for f in too_much.failures)
    tight = awake.domains(small, {name: awake.Load.constant(1e-4)}, budget_v=0.001, widest=1.0)
    assert any("no width" in f.reason and "corner" in f.reason for f in tight.failures)
    with pytest.raises(hushrail.ReadError, match="domain `nowhere`"):
        awake.domains(small, {"nowhere": awake.Load.constant(1.0)})


def test_demo_cells_keep_their_state_and_lose_it_where_they_must() -> None:
    seen: list[tuple[int, int]] = []
    kept = awake.keep(
        DEMO,
        "lat_1",
        inputs={"G": False},
        mismatch=awake.Mismatch(2e-9, 2e-9),
        bits=1e4,
        domain="link",
        progress=lambda done, whole: seen.append((done, whole)),
    )
    assert not kept.failures, kept.failures
    assert len(kept.retentions) == len(kept.levels) == 9
    assert all(0.036 < r.retention_v < 0.6 for r in kept.retentions)
    assert all(r.z_score is not None and r.z_score > 5.1 for r in kept.retentions)
    for level in kept.levels:
        assert level.leak_a is not None
        assert level.full_leak_a is not None
        assert level.leak_a < level.full_leak_a
    assert len(kept.to_pandas()) == 9
    ax = plot.butterfly(kept.retentions[0].decides.butterfly)
    assert ax.get_title().startswith("margin")
    nothing = awake.keep(DEMO, "inv_1")
    assert all("stores nothing" in f.reason for f in nothing.failures)
    never = awake.keep(DEMO, "lat_1", inputs={"G": False}, margin_v=0.6)
    assert all("never holds" in f.reason for f in never.failures)
    assert never.failures


def test_margins_and_their_picture() -> None:
    corner = "tt 1.10 V 25 °C"
    (full,) = awake.margins(DEMO, "nand2_1", corners=corner)
    (mixed,) = awake.margins(DEMO, "nand2_1", "inv_1", driver_droop_v=(0.05, 0.0), corners=corner)
    assert full.margins.square is not None
    assert mixed.margins.square is not None
    assert full.margins.nml_v is not None
    assert 0.0 < full.margins.square.margin_v < 0.55
    assert {p.cell for p in mixed.margins.paths} == {"nand2_1", "inv_1"}
    ax = plot.butterfly(full.margins.square.butterfly)
    assert len(ax.patches) == 2
    with pytest.raises(hushrail.ReadError, match="corner"):
        awake.margins(DEMO, "inv_1", corners="nowhere")
    with pytest.raises(hushrail.RangeError, match="droop of the rails"):
        awake.margins(DEMO, "inv_1", driver_droop_v=(2.0, 0.0))


def test_figure_and_its_picture(kelp: hushrail.Process) -> None:
    switches = [awake.Switch("psw", 1e-5, 8e-8), awake.Switch("nsw", 1e-5, 8e-8)]
    over = np.linspace(0.0, 0.5, 11)
    points = awake.figure(kelp, switches, overdrive_v=over, boost_v=[0.0, 0.3], vdd_v=1.1)
    assert len(points) == 44
    first = points[0]
    assert first.merit_v == pytest.approx(first.on_ohm * first.off_a, rel=1e-14)
    # the same device through the other door
    device = kelp.transistor("psw", w=1e-5, l=8e-8, temp_c=25.0)
    on = -float(device.currents(vd=1.09, vg=0.0, vs=1.1, vb=1.1)[..., 0])
    off = -float(device.currents(vd=0.0, vg=1.1, vs=1.1, vb=1.1)[..., 0])
    assert first.on_ohm == pytest.approx(0.01 / on, rel=1e-9)
    assert first.off_a == pytest.approx(off, rel=1e-12)
    ax = plot.switch_merit(points, ["psw", "nsw"])
    assert len(ax.get_legend_handles_labels()[1]) == 4
    with pytest.raises(hushrail.RangeError, match="names"):
        plot.switch_merit(points, ["psw"])
    with pytest.raises(hushrail.RangeError, match="overdrives"):
        awake.figure(kelp, switches, overdrive_v=[], vdd_v=1.1)


def test_row_picture_and_bad_rows() -> None:
    loads = [awake.Load.constant(1e-3)] * 20
    found = awake.row(loads, [0, 10], vdd_v=1.0, segment_ohm=0.5, ohm=2.0)
    ax = plot.row_droop(found, [0, 10])
    assert "worst" in ax.texts[0].get_text()
    with pytest.raises(hushrail.RangeError, match="rows"):
        awake.row(loads, [0], vdd_v=1.0, segment_ohm=0.5, ohm=1.0, rows=3)
    with pytest.raises(hushrail.RangeError, match="either a resistance"):
        awake.row(loads, [0], vdd_v=1.0, segment_ohm=0.5)
    with pytest.raises(hushrail.SolveError, match="no switch reaches"):
        awake.row(loads, [], vdd_v=1.0, segment_ohm=0.5, ohm=1.0)
    with pytest.raises(hushrail.RangeError, match="not finite"):
        awake.droop(awake.Load.constant(float("nan")), vdd_v=1.0, ohm=1.0)
    with pytest.raises(hushrail.SolveError, match="short by"):
        awake.droop(awake.Load.constant(2.0), vdd_v=1.0, ohm=1.0)
