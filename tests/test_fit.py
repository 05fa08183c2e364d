"""Fits of compact models: truths found again, errors that mean what they say, honest words where data end."""

from __future__ import annotations

import csv
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import hushrail
import numpy as np
import pytest
import small_process
from hushrail import CompactModel, Process, RangeError, ReadError
from hushrail.fit import CellPoints, Fit, IVPoints, fit
from hushrail.fit import _Problem as Problem
from hushrail.fit import _problem as problem_of
from hushrail.fit import _Space as Space
from numpy.typing import NDArray
from test_open_data import CARDS, FLOOR_S, STUDY

Array = NDArray[np.float64]
Columns = dict[str, Array]

DATA = Path(__file__).parents[2] / "shared" / "data" / "sky130" / "measured_iv"
measured = pytest.mark.skipif(not DATA.is_dir(), reason="skipped: no open data at ../shared/data/sky130")

START = CompactModel.generic("generic 65 nm n")
TRUTH = START.replace(
    vt0_v=0.47,
    slope_n=1.6,
    dibl_v_v=0.07,
    body_sqrt_v=0.4,
    mobility_m2_vs=0.02,
    vt_temp_v_k=-7e-4,
    gidl_a_s=5e-5,
)
FREE = ["vt0_v", "slope_n", "dibl_v_v", "body_sqrt_v", "mobility_m2_vs", "vt_temp_v_k", "gidl_a_s"]
SIZE: dict[str, Any] = {"w_m": 1e-6, "l_m": 65e-9}


def grid(gates: Array, drains: Sequence[float], bodies: Sequence[float], temps_c: Sequence[float]) -> Columns:
    """All combinations, as columns."""
    axes = np.meshgrid(gates, np.array(drains), np.array(bodies), np.array(temps_c))
    return {name: a.ravel() for name, a in zip(("vg_v", "vd_v", "vb_v", "temp_c"), axes, strict=True)}


def drain_currents(device_at: Any, at: Columns) -> Array:  # noqa: ANN401
    """Drain currents of a device that a temperature gives."""
    out = np.empty(len(at["vg_v"]))
    for t in np.unique(at["temp_c"]):
        here = at["temp_c"] == t
        biases = {short: at[long][here] for short, long in (("vg", "vg_v"), ("vd", "vd_v"), ("vb", "vb_v"))}
        out[here] = device_at(float(t)).currents(**biases)[:, 0]
    return out


def compact_points(model: CompactModel = TRUTH) -> Columns:
    at = grid(np.linspace(-0.4, 0.9, 14), (0.05, 0.5, 1.1), (0.0, -0.5), (25.0, 110.0))
    return at | {"id_a": drain_currents(lambda t: model.device(**SIZE, temp_c=t), at)}


def test_known_parameters_are_found_again() -> None:
    found = fit(START, compact_points(), free=FREE, **SIZE)
    assert found.converged
    assert found.rms_decades < 1e-12
    for name, value in found.parameters.items():
        assert value == pytest.approx(TRUTH.parameters[name], rel=1e-9), name
    assert not found.warnings
    assert not found.undetermined
    assert (found.used, found.dropped) == (168, {})
    # what is not free is not touched
    assert {n: v for n, v in found.model.parameters.items() if n not in FREE} == {
        n: v for n, v in START.parameters.items() if n not in FREE
    }


def noisy(rng: np.random.Generator, sigma: float) -> Columns:
    points = compact_points()
    return points | {"id_a": points["id_a"] * 10.0 ** rng.normal(0.0, sigma, len(points["id_a"]))}


@pytest.mark.parametrize("stated", [False, True])
def test_standard_errors_are_the_scatter_of_repeated_fits(stated: bool) -> None:
    rng, runs, sigma = np.random.default_rng(20261201), 120, 0.05
    free = [*FREE, "phi_v"]  # the excess of the slope factor is what varies inside
    given: dict[str, Any] = {"sigma_decades": sigma} if stated else {}
    fits = [fit(TRUTH, noisy(rng, sigma), free=free, **SIZE, **given) for _ in range(runs)]
    # independent scatter is no wave
    assert not any("waves" in w for f in fits for w in f.warnings)
    truth = np.array([TRUTH.parameters[name] for name in free])
    z = np.array([(f.values - truth) / f.standard_errors for f in fits])
    keep = [free.index(n) for n in FREE if n != "body_sqrt_v"]  # phi and body are correlated and bounded
    # the mean of z² has the standard deviation √(2/runs); four of them leave one false alarm in 1e4
    assert np.all(np.abs((z[:, keep] ** 2).mean(axis=0) - 1.0) < 4.0 * np.sqrt(2.0 / runs)), (z**2).mean(
        axis=0
    )
    scale = np.array([f.sigma_decades for f in fits])
    wanted = 1.0 if stated else sigma
    freedom = fits[0].degrees_of_freedom
    assert freedom == 168 - len(free)
    assert scale.mean() == pytest.approx(wanted, abs=4.0 * wanted / np.sqrt(2.0 * freedom * runs))


def test_covariance_is_that_of_an_independent_fitter() -> None:
    """`scipy.optimize.curve_fit` (MINPACK's Levenberg-Marquardt, slopes by its own differences)."""
    from scipy.optimize import curve_fit

    points = noisy(np.random.default_rng(7), 0.05)
    free = ["vt0_v", "slope_n", "dibl_v_v", "mobility_m2_vs", "gidl_a_s"]
    ours = fit(TRUTH, points, free=free, **SIZE)

    def predicted(_: Array, *p: float) -> Array:
        vt0, slope, dibl, mobility, gidl = p
        model = TRUTH.replace(
            vt0_v=vt0,
            slope_n=slope,
            dibl_v_v=dibl,
            mobility_m2_vs=float(np.exp(mobility)),
            gidl_a_s=float(np.exp(gidl)),
        )
        return np.log10(drain_currents(lambda t: model.device(**SIZE, temp_c=t), points))

    start = [0.47, 1.6, 0.07, np.log(0.02), np.log(5e-5)]
    best, covariance = curve_fit(
        predicted, np.arange(168.0), np.log10(points["id_a"]), start, xtol=1e-12, ftol=1e-12
    )
    step = np.array([1.0, 1.0, 1.0, ours.values[3], ours.values[4]])
    best[3:] = np.exp(best[3:])
    # its forward differences are good to some 1e-7, its minimum to their square root of a standard error
    assert np.all(np.abs(ours.values - best) < 1e-3 * ours.standard_errors)
    errors = np.sqrt(np.diag(covariance)) * step
    assert ours.standard_errors == pytest.approx(errors, rel=1e-4)
    assert ours.covariance == pytest.approx(
        covariance * np.outer(step, step), rel=1e-3, abs=1e-5 * errors.min() ** 2
    )
    correlation = covariance / np.sqrt(np.outer(np.diag(covariance), np.diag(covariance)))
    assert ours.correlation == pytest.approx(correlation, abs=1e-4)


def test_inner_slopes_equal_differences() -> None:
    """The slope factor is varied as its excess over what body coefficient and surface potential cost."""
    space = Space({"": TRUTH}, [*FREE, "phi_v"], {})
    problem: Problem = problem_of(compact_points(), {"": TRUTH}, ("id_a",), SIZE)
    x = space.start
    exact = space.internal(problem.slopes(space, x), x)
    for k in range(len(x)):
        h = 1e-4 * np.eye(len(x))[k]
        up, down = (np.log10(np.abs(problem.predict(space.models(x + s * h)))) for s in (1.0, -1.0))
        assert exact[:, k] == pytest.approx((up - down) / 2e-4, rel=1e-5, abs=1e-7), space.names[k]


CHANNEL = ["vt0_v", "slope_n", "dibl_v_v", "mobility_m2_vs", "body_sqrt_v", "vt_temp_v_k"]


@pytest.mark.parametrize("model", ["nch", "pch"])
def test_points_of_a_foundry_model_and_points_kept_out(process: Process, model: str) -> None:
    """BSIM4 currents at two drain voltages and temperatures; others are predicted.

    Measured: rms 0.048 to 0.053 decades fitted; kept out, 0.040 to 0.045 at another drain voltage,
    0.042 to 0.044 and 0.063 to 0.066 at 55 and 125 °C, 0.11 to 0.13 at -40 °C. Limits stand a tenth above.
    """
    sign = 1.0 if model == "nch" else -1.0
    size: dict[str, Any] = {"w_m": 4e-7, "l_m": 6e-8}

    def points(drains: Sequence[float], temps_c: Sequence[float]) -> Columns:
        at = grid(sign * np.linspace(-0.3, 0.8, 23), [sign * v for v in drains], (0.0, -0.4 * sign), temps_c)
        return at | {
            "id_a": drain_currents(lambda t: process.transistor(model, w=4e-7, l=6e-8, temp_c=t), at)
        }

    start = CompactModel.generic(f"generic 65 nm {model[0]}").replace(oxide_m=2.1e-9, length_m=6e-8)
    found = fit(start, points((0.05, 1.0), (25.0, 85.0)), free=[*CHANNEL, "tunnel_oxide_m"], **size)
    assert found.converged
    assert not found.undetermined
    # two models differ in form, not by chance
    assert [w.partition(" of ")[0] for w in found.warnings] == ["residuals go in waves"]
    assert found.used == 184
    assert 1e-3 < found.rms_decades < 0.058
    for drains, temps_c, limit in [
        ((0.5,), (25.0, 85.0), 0.050),
        ((1.0,), (55.0,), 0.049),
        ((1.0,), (125.0,), 0.073),
        ((0.5,), (-40.0,), 0.137),
    ]:
        kept_out = found.hold_against(points(drains, temps_c), **size)
        assert kept_out.used.all()
        assert 1e-3 < kept_out.rms_decades < limit, (drains, temps_c)
    # the card says 0.42 V
    assert found.model.parameters["vt0_v"] == pytest.approx(0.44, abs=0.02)


def silicon(device: str, sites: Sequence[str], sweep: str | None = None) -> Columns:
    """Points of arrays as the data's README says.

    Not above 1e-4 A, where series resistance and a jump of the instrument rule. Without drain voltage no
    channel current flows and the reading is the instrument's offset.
    """
    with (DATA / f"{device}.csv").open(encoding="utf-8", newline="") as file:
        rows = [
            r
            for r in csv.DictReader(file)
            if r["site"] in sites
            and abs(float(r["id_a"])) <= 1e-4
            and abs(float(r["vd_v"])) >= 0.05
            and sweep in (None, r["sweep"])
        ]
    names = ("vd_v", "vg_v", "vs_v", "vb_v", "id_a", "w_um", "l_um", "m")
    return {name: np.array([float(r[name]) for r in rows]) for name in names}


# sites 4, 5, 6 of the n-channel arrays leak, 9 of either may be mislabelled: discarded. 11 is longer
ARRAYS = {"nfet_01v8": "5290_{}_D3", "pfet_01v8_hvt": "5291_{}_D3"}
FLOOR_A = 3e-9  # ten times the noise of the arrays


def silicon_fit(device: str) -> Fit:
    start = CompactModel.generic(f"generic 130 nm {device[0]}")
    # oxide of the open card of the same device (toxe 4.148 nm, rounded), gate length of the arrays
    start = start.replace(oxide_m=4.1e-9, tunnel_oxide_m=4.1e-9, length_m=150e-9, vt0_v=0.6)
    sites = [ARRAYS[device].format(k) for k in (3, 7, 12)]
    free = ["vt0_v", "slope_n", "dibl_v_v", "mobility_m2_vs"]
    return fit(start, silicon(device, sites), free=free, floor=FLOOR_A, temp_c=25.0)


@measured
@pytest.mark.parametrize(
    ("device", "limit", "kept_out"),
    [
        # measured: 0.158 fitted; 0.020, 0.096, 0.076 on widths of 0.60 and 0.84 µm and a length of 0.18 µm
        ("nfet_01v8", 0.175, {10: 0.022, 8: 0.106, 11: 0.085}),
        # measured: 0.127; 0.103, 0.115, 0.158
        ("pfet_01v8_hvt", 0.140, {10: 0.114, 8: 0.127, 11: 0.174}),
    ],
)
def test_arrays_of_real_silicon_and_arrays_kept_out(
    device: str, limit: float, kept_out: dict[int, float]
) -> None:
    """Three widths are fitted, two others and another length predicted, in A over five decades.

    What is left is mostly the width: current per width changes by 1.7 to 2.5 between 0.36 and 0.94 µm, which
    the model does not know.
    """
    found = silicon_fit(device)
    assert found.converged
    assert [w.partition(" of ")[0] for w in found.warnings] == ["residuals go in waves"]
    assert found.used > 100
    assert found.dropped["below the floor"] > 100
    assert 0.01 < found.rms_decades < limit
    for site, most in kept_out.items():
        held = found.hold_against(silicon(device, [ARRAYS[device].format(site)]), floor=FLOOR_A, temp_c=25.0)
        assert held.used.sum() >= 50
        assert held.rms_decades < most, site
    # the mislabelled site is off by more than anything else: the reason to discard it shows
    nine = found.hold_against(silicon(device, [ARRAYS[device].format(9)]), floor=FLOOR_A, temp_c=25.0)
    assert nine.rms_decades > 3.0 * found.rms_decades


@measured
@pytest.mark.parametrize(
    ("device", "limit", "held"), [("nfet_01v8", 0.04, 0.06), ("pfet_01v8_hvt", 0.04, 0.06)]
)
def test_drain_sweeps_of_an_array_follow_from_its_gate_sweeps(device: str, limit: float, held: float) -> None:
    """One array: gate sweeps at 0.1 and 1.8 V are fitted, drain sweeps predicted."""
    site = [ARRAYS[device].format(10)]
    start = silicon_fit(device).model
    free = ["vt0_v", "slope_n", "dibl_v_v", "mobility_m2_vs"]
    found = fit(start, silicon(device, site, "IDVG"), free=free, floor=FLOOR_A, temp_c=25.0)
    assert found.rms_decades < limit
    kept_out = found.hold_against(silicon(device, site, "IDVD"), floor=FLOOR_A, temp_c=25.0)
    assert kept_out.used.sum() > 30
    assert kept_out.rms_decades < held


def write_table(
    path: Path, table: hushrail.LeakageTable, cells: Sequence[str], temps_c: Sequence[int]
) -> Path:
    """Part of a table in the form of published ones."""
    with path.open("w", encoding="utf-8", newline="") as file:
        writer = csv.writer(file)
        writer.writerow(["cell", "corner", "when", "leakage_nw"])
        for row in table.rows:
            if row.cell in cells and any(f"V {t} °C" in row.corner for t in temps_c):
                pins = [p for p in row.state.split() if p[0] in "ABC"]
                when = "&".join(p[0] if p.endswith("1") else f"!{p[0]}" for p in pins)
                writer.writerow([row.cell, row.corner, when, repr(row.power_w * 1e9)])
    return path


CELL_START = {
    "nch": CompactModel.generic("generic 65 nm n").replace(oxide_m=2.1e-9, length_m=6e-8),
    "pch": CompactModel.generic("generic 65 nm p").replace(oxide_m=2.1e-9, length_m=6e-8),
}


def test_parameters_come_back_from_a_leakage_table_through_the_cell_solve(tmp_path: Path) -> None:
    truth = {
        "nch": CELL_START["nch"].replace(vt0_v=0.46, dibl_v_v=0.07),
        "pch": CELL_START["pch"].replace(vt0_v=0.43, vt_temp_v_k=-7e-4),
    }
    cards = 'files = ["cards.lib"]\n'
    devices = "".join(model.to_toml(name) for name, model in truth.items())
    study = small_process.write(tmp_path, study=small_process.STUDY.replace(cards, "") + devices)
    # the text that a fit writes is one a study reads
    table = write_table(tmp_path / "table.csv", hushrail.cells(study), ["inv", "nand2"], [25, 125])
    bare = small_process.write(tmp_path, study=small_process.STUDY.replace(cards, ""))
    free = ["nch.vt0_v", "nch.dibl_v_v", "pch.vt0_v", "pch.vt_temp_v_k"]
    points = CellPoints(bare, table)
    found = fit(CELL_START, points, free=free)
    assert found.converged
    assert (found.used, found.dropped) == (12, {})
    for name, value in found.parameters.items():
        owner, _, parameter = name.partition(".")
        # cells balance to 1e-9 of a current
        assert value == pytest.approx(truth[owner].parameters[parameter], rel=1e-6), name
    assert found.residuals.unit == "W"
    assert found.predict(points) == pytest.approx(found.residuals.measured, rel=1e-6)
    assert {CompactModel.from_toml(found.to_toml(), name) for name in truth} == set(found.models.values())
    assert not found.undetermined
    with pytest.raises(RangeError, match="there are 2 models"):
        _ = found.model
    # at full supply this GIDL is far below everything else
    more = fit(CELL_START, points, free=[*free, "pch.gidl_a_s"])
    assert more.undetermined == ("pch.gidl_a_s",)
    assert "pch.gidl_a_s" in more.warnings[0]


def test_a_leakage_table_of_foundry_cards_and_a_cell_kept_out(small: Path) -> None:
    """Inverter and two-input gate at 25 and 125 °C are fitted; the three-input gate is predicted.

    Measured: rms 0.010 decades on 12 fitted rows, 0.024 on 16 rows kept out.
    """
    table = hushrail.cells(small)
    fitted = write_table(small.parent / "fitted.csv", table, ["inv", "nand2"], [25, 125])
    other = write_table(small.parent / "other.csv", table, ["nand3"], [25, 125])
    free = [
        "nch.vt0_v",
        "nch.slope_n",
        "nch.vt_temp_v_k",
        "nch.tunnel_oxide_m",
        "pch.vt0_v",
        "pch.vt_temp_v_k",
    ]
    found = fit(CELL_START, CellPoints(small, fitted), free=free)
    assert found.converged
    assert found.rms_decades < 0.011
    kept_out = found.hold_against(CellPoints(small, other))
    assert len(kept_out.decades) == 16
    assert kept_out.rms_decades < 0.027


@measured
def test_a_published_leakage_table_and_cells_kept_out(tmp_path: Path) -> None:
    """Four cells of the open kit's table at 100 °C are fitted, others predicted.

    The compact devices stand for the kit's transistors; wells keep their cards. Measured: rms 0.095 decades
    on 18 rows; 0.140 on 32 rows of other gates, 0.128 on 16 rows of a multiplexer and a flip-flop. Layout
    stress, which the data's README says is worth up to 15x per finger, is not in the compact model.
    """
    data = DATA.parent
    cards = ", ".join(f'"{data.as_posix()}/{path}"' for path in CARDS)
    study = tmp_path / "study.toml"
    study.write_text(STUDY.format(cards=cards, data=data.as_posix()), encoding="utf-8")
    with (data / "leakage_by_state.csv").open(encoding="utf-8", newline="") as file:
        rows = [r for r in csv.DictReader(file) if r["corner"] == "tt_100C_1v80"]

    def part(name: str, cells: Sequence[str]) -> CellPoints:
        with (tmp_path / name).open("w", encoding="utf-8", newline="") as out:
            writer = csv.DictWriter(out, list(rows[0]))
            writer.writeheader()
            writer.writerows(r for r in rows if r["cell"] in cells)
        corners, prefix = data / "corners.csv", "sky130_fd_sc_hd__"
        return CellPoints(study, tmp_path / name, corners=corners, prefix=prefix, floor_s=FLOOR_S)

    models = {
        name: CompactModel.generic(f"generic 130 nm {name[0]}").replace(
            oxide_m=oxide, tunnel_oxide_m=oxide, length_m=150e-9, vt0_v=vt0
        )
        # oxides of the kit's cards (toxe 4.148 and 4.23 nm, rounded)
        for name, oxide, vt0 in (("nfet_01v8", 4.1e-9, 0.6), ("pfet_01v8_hvt", 4.2e-9, 0.7))
    }
    free = [f"{name}.{number}" for name in models for number in ("vt0_v", "dibl_v_v")]
    found = fit(models, part("fitted.csv", ["inv_1", "nand2_1", "nor2_1", "a21oi_1"]), free=free)
    assert found.converged
    assert not found.undetermined
    assert (found.used, found.dropped) == (18, {})
    assert 0.01 < found.rms_decades < 0.105
    for name, cells, count, limit in [
        ("gates.csv", ["nand3_1", "a22oi_1", "o21ai_1"], 32, 0.155),
        ("more.csv", ["mux2_1", "dfxtp_1"], 16, 0.141),
    ]:
        kept_out = found.hold_against(part(name, cells))
        assert int(kept_out.used.sum()) == count
        assert kept_out.rms_decades < limit, name


def test_rows_of_cells_that_cannot_be_predicted_are_counted(small: Path) -> None:
    table = write_table(small.parent / "table.csv", hushrail.cells(small), ["inv", "nand2"], [25, 125])
    with table.open("a", encoding="utf-8") as file:
        file.write("nor9,tt 1.00 V 25 °C,!A,1.0\ninv,tt 1.00 V 25 °C,!Q,1.0\n")
    found = fit(CELL_START, CellPoints(small, table), free=["nch.vt0_v"])
    assert found.used == 12
    assert sorted(found.dropped.values()) == [1, 1]
    assert any("nor9" in reason for reason in found.dropped)
    assert "the cell has no pin `Q`" in found.dropped


def test_parameters_that_the_data_do_not_determine_are_named() -> None:
    """One temperature tells no coefficient; below threshold, threshold and mobility are one number."""
    points = {k: x for k, x in compact_points().items() if k != "temp_c"}
    at = (compact_points()["temp_c"] == 25.0) & (points["vg_v"] > 0.0) & (points["vg_v"] < 0.25)
    points = {
        k: x[at] * (1.0 if k != "id_a" else 1.02 ** (-1.0) ** np.arange(at.sum())) for k, x in points.items()
    }
    found = fit(
        START.replace(nominal_c=25.0),
        points,
        free=["vt0_v", "vt_temp_v_k", "mobility_m2_vs"],
        temp_c=25.0,
        **SIZE,
    )
    assert "vt_temp_v_k" in found.undetermined
    assert np.isinf(found.standard_errors[1])
    assert any("+1.00·vt_temp_v_k" in w and "nothing changes along it" in w for w in found.warnings)
    assert abs(found.correlation[0, 2]) > 0.98
    assert np.isfinite(found.correlation).all()
    assert np.isfinite(found.covariance).all()
    # the same data do determine the threshold once the mobility is known
    alone = fit(TRUTH, points, free=["vt0_v"], temp_c=25.0, **SIZE)
    assert not alone.undetermined
    assert found.standard_errors[0] > 5.0 * alone.standard_errors[0]


def test_two_parameters_in_one_product_are_both_undetermined() -> None:
    """Generation over area and over edge cannot be told apart at one size."""
    size = SIZE | {"ad_m2": 1e-12, "pd_m": 4e-6}
    model = START.replace(gidl_a_s=0.0, halo_m3=0.0, junction_depth_m=0.0)
    device = model.device(**size, temp_c=125.0)
    vd = np.linspace(0.1, 1.2, 23)
    points = {"vd_v": vd, "vg_v": 0.0 * vd, **{"id_a": device.currents(vd=vd, vg=0.0)[:, 0]}}
    points["ib_a"] = device.currents(vd=vd, vg=0.0)[:, 3]
    free = ["generation_a_m2", "generation_a_m"]
    found = fit(model, points, free=free, observed=["ib_a"], temp_c=125.0, **size)
    assert found.undetermined == tuple(free)
    assert len(found.directions) == 1
    assert set(found.directions[0].parts) == set(free)
    assert all(name in found.warnings[0] for name in free)


def floor_case() -> tuple[Columns, float]:
    points = {k: x[compact_points()["temp_c"] == 25.0] for k, x in compact_points().items()}
    return points, 1e-9


def test_points_below_the_floor_are_dropped_and_counted() -> None:
    points, floor = floor_case()
    low = int((points["id_a"] < floor).sum())
    # what stands there does not matter at all
    spoilt = points | {"id_a": np.where(points["id_a"] < floor, 1e-12, points["id_a"])}
    free = ["vt0_v", "slope_n", "dibl_v_v", "mobility_m2_vs"]
    start = TRUTH.replace(vt0_v=0.4, slope_n=1.5)
    found = fit(start, spoilt, free=free, floor=floor, **SIZE)
    assert found.dropped == {"below the floor": low}
    assert found.used == len(points["id_a"]) - low
    assert found.model.parameters["vt0_v"] == pytest.approx(0.47, rel=1e-9)
    assert found.residuals.flat().__next__()["status"] == "below the floor"


def test_upper_bounds_hold_what_no_point_holds() -> None:
    points, floor = floor_case()
    start = TRUTH.replace(gidl_a_s=0.5)
    dropped = fit(start, points, free=["vt0_v", "gidl_a_s"], floor=floor, **SIZE)
    bounded = fit(start, points, free=["vt0_v", "gidl_a_s"], floor=floor, below="bound", **SIZE)
    below = points["id_a"] < floor
    assert set(np.array(bounded.residuals.status)[below]) == {"upper bound"}
    assert (bounded.residuals.predicted[below] <= floor * (1.0 + 1e-6)).all()
    assert bounded.used == dropped.used
    assert bounded.parameters["vt0_v"] == pytest.approx(0.47, rel=1e-6)
    with pytest.raises(RangeError, match="below is 'keep'"):
        fit(start, points, free=["vt0_v"], below="keep", **SIZE)


def test_points_come_from_arrays_frames_and_files(tmp_path: Path) -> None:
    import pandas as pd

    points = compact_points()
    frame = pd.DataFrame(points).assign(w_um=1.0, l_um=0.065, site="a", ig_a=np.nan)
    frame.to_csv(tmp_path / "points.csv", index=False)
    text = (tmp_path / "points.csv").read_text(encoding="utf-8")
    assert ",," not in text.splitlines()[0]
    values = [
        fit(START, source, free=["vt0_v"], **constants).values[0]
        for source, constants in [
            (points, SIZE),
            (frame, {}),
            (tmp_path / "points.csv", {}),
            (IVPoints.read(frame), {}),
        ]
    ]
    assert values == pytest.approx([values[0]] * 4, rel=1e-9)
    # a structure of many in parallel
    many = points | {"id_a": points["id_a"] * 2000.0}
    assert fit(START, many, free=["vt0_v"], m=2000.0, **SIZE).values[0] == pytest.approx(values[0], rel=1e-9)


def test_the_report_of_a_fit(tmp_path: Path) -> None:
    found = fit(START, noisy(np.random.default_rng(3), 0.05), free=FREE, **SIZE)
    assert not found.warnings
    frame = found.to_pandas()
    assert list(frame["parameter"]) == FREE
    assert frame["determined"].all()
    assert (frame["standard_error"] > 0.0).all()
    points = found.residuals.to_pandas()
    assert np.sqrt((points["decades"] ** 2).mean()) == pytest.approx(found.rms_decades)
    assert found.rms_decades == pytest.approx(0.05, rel=0.2)
    assert CompactModel.from_toml(found.to_toml("nx"), "nx") == found.model
    with pytest.raises(RangeError, match="the model has no name"):
        found.to_toml()
    assert found.predict(compact_points(), **SIZE) == pytest.approx(found.residuals.predicted)
    ax = found.plot_residuals()
    assert ax.get_xscale() == "log"
    assert "decades" in ax.get_ylabel()
    assert ax.get_legend_handles_labels()[1] == ["25 °C", "110 °C"]
    assert len(found.plot_residuals(by="vg_v").figure.axes) == 2
    with pytest.raises(RangeError, match="no label `vds`"):
        found.plot_residuals(by="vds")
    import matplotlib.pyplot as plt

    plt.close("all")


def test_a_parameter_that_ends_at_its_bound_is_said() -> None:
    found = fit(START, compact_points(), free=["vt0_v"], bounds={"vt0_v": (0.3, 0.45)}, **SIZE)
    assert found.values[0] == pytest.approx(0.45, abs=1e-4)
    assert any("`vt0_v` is at its upper bound" in w for w in found.warnings)


def test_a_search_cut_short_is_said() -> None:
    calls: list[tuple[int, int]] = []
    found = fit(
        START,
        compact_points(),
        free=FREE,
        max_evaluations=2,
        progress=lambda i, n: calls.append((i, n)),
        **SIZE,
    )
    assert not found.converged
    assert "before it converged" in found.warnings[0]
    assert calls[-1] == (2, 2)


def spoil(column: str, i: int, value: float) -> Columns:
    points = compact_points()
    x = points[column].copy()
    x[i] = value
    return points | {column: x}


@pytest.mark.parametrize(
    ("change", "wanted"),
    [
        (
            {"points": {k: x[:7] for k, x in compact_points().items()}},
            "7 points are left of 7; want at least 8 for 7",
        ),
        ({"points": spoil("id_a", 4, float("nan"))}, "`id_a` holds nan at point 5; want finite"),
        ({"points": spoil("vg_v", 0, float("inf"))}, "`vg_v` holds inf at point 1"),
        ({"floor": 1.0}, "no point is left of 168 (168 below the floor); want at least 8"),
        ({"max_evaluations": 0}, "max_evaluations is 0; want at least 1"),
        ({"floor": -1.0}, "floor is -1.0; want a size above zero"),
        ({"free": ["vt0"]}, "`vt0` is no parameter; did you mean `vt0_v`"),
        ({"free": ["nominal_c"]}, "`nominal_c` cannot be free"),
        ({"free": []}, "no parameter is free"),
        ({"free": "vt0_v"}, "want a list of names"),
        ({"free": ["vt0_v", "vt0_v"]}, "`vt0_v` is free twice"),
        ({"free": ["nch.vt0_v"]}, "`nch.vt0_v` belongs to no model"),
        ({"bounds": {"vt0_v": (0.6, 0.3)}}, "bounds of `vt0_v` are 0.6 to 0.3 V; want the lower first"),
        ({"bounds": {"vt0_v": (0.3, 30.0)}}, "want them within -2.0 to 3.0 V"),
        ({"bounds": {"vt0_v": (0.5, 0.6)}}, "`vt0_v` starts at 0.43; want it within its bounds 0.5 to 0.6"),
        ({"bounds": {"phi_v": (0.6, 0.9)}}, "bounds are given for `phi_v`, which is not free"),
        ({"bounds": {"slope_n": (1.3, 1.7)}}, "`slope_n` has no bounds of its own"),
        ({"bounds": {"vt0_v": (float("nan"), 0.5)}}, "want the lower first"),
        ({"model": START.replace(gidl_a_s=0.0)}, "`gidl_a_s` starts at 0.0, where its effect is off"),
        ({"observed": ["is_a"]}, "observed is is_a; want some of id_a, ig_a, ib_a"),
        ({"observed": ["ib_a"]}, "no column `ib_a`"),
        ({"sigma_decades": 0.0}, "sigma_decades holds a value that is not above zero"),
        ({"w_m": -1e-6}, "`w_m` holds -1e-06; want values above zero"),
        ({"temp_k": 300.0}, "no column is called `temp_k`"),
        ({"points": {"vg_v": [0.1, 0.2], "vd_v": [1.0]}}, "`vd_v` has 1 points where others have 2"),
        ({"points": {"vg_v": np.array([0.1]), "vd_v": np.array([1.0])}}, "no column `temp_c`"),
        ({"points": {}}, "no points"),
        ({"points": None}, "points are a NoneType"),
        ({"points": {"vg_v": ["high"], "vd_v": [1.0]}}, "`vg_v` does not hold numbers"),
        ({"points": {"vg_v": np.zeros((2, 2))}}, "`vg_v` has the shape (2, 2)"),
        ({"points": IVPoints.read(compact_points(), **SIZE)}, "want `w_m` as a keyword of IVPoints.read"),
        ({"temp_c": 500.0}, "temperature 500 °C is out of range"),
        ({"model": {"a": START, "b": START}, "free": ["a.vt0_v"]}, "I-V points belong to one model"),
        ({"model": {}}, "no model was given"),
        ({"model": {"a": START}}, "`vt0_v` names no model; want MODEL.vt0_v"),
    ],
)
def test_impossible_fits_are_refused(change: dict[str, Any], wanted: str) -> None:
    given: dict[str, Any] = {"model": START, "points": compact_points(), "free": FREE} | SIZE | change
    model, points = given.pop("model"), given.pop("points")
    with pytest.raises(RangeError) as caught:
        fit(model, points, **given)
    assert wanted in str(caught.value)


def test_files_that_are_no_points_are_refused(tmp_path: Path) -> None:
    with pytest.raises(FileNotFoundError):
        fit(START, tmp_path / "none.csv", free=["vt0_v"])
    bad = tmp_path / "bad.csv"
    bad.write_text("vg_v,vd_v,id_a\n0.1,1.0,1e-9\n0.2,one,1e-8\n", encoding="utf-8")
    with pytest.raises(ReadError, match=r"bad\.csv:3:1: column `vd_v` holds `one`") as caught:
        fit(START, bad, free=["vt0_v"])
    assert caught.value.line == 3
    bad.write_bytes(b"\xff\xfe\x00")
    with pytest.raises(ReadError, match="not a CSV table"):
        fit(START, bad, free=["vt0_v"])


def test_cells_need_names_and_no_columns(small: Path) -> None:
    points = CellPoints(small, small.parent / "counts.csv")
    with pytest.raises(RangeError, match="cells need the name of each model"):
        fit(START, points, free=["vt0_v"])
    with pytest.raises(RangeError, match="cells do not take it"):
        fit({"nch": START}, points, free=["nch.vt0_v"], temp_c=25.0)
    with pytest.raises(ReadError, match="corner"):
        fit({"nch": START}, points, free=["nch.vt0_v"])


def test_currents_of_the_wrong_sign_or_none_are_counted() -> None:
    points = spoil("id_a", 100, -1e-9)
    points["id_a"][101] = 0.0
    found = fit(START, points, free=["vt0_v"], **SIZE)
    assert found.dropped == {"of the other sign than the model": 1, "zero, which has no logarithm": 1}
