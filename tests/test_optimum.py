"""Optima and choices: against scans of studies, brute force, refusals, pictures."""

from __future__ import annotations

from pathlib import Path

import hushrail
import matplotlib as mpl
import pytest
import small_process
from hushrail import plot
from hushrail.awake import Load
from hushrail.optimum import Candidate, Choice, Density, Knob, Limits, Optimum, choose, optimum
from hushrail.transition import Rail, WakeSpec

mpl.use("Agg")

DENSITY = Density(m2_per_m=0.4e-6, row_overhead_m2=2e-12, width_per_row_m=5e-5)
KNOBS: dict[Knob, list[float]] = {
    "header_overdrive": [0.0, 0.05, 0.1, 0.2, 0.3],
    "header_width": [1e-5, 2e-5, 4e-5],
}


@pytest.fixture(scope="module")
def study(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return small_process.write(tmp_path_factory.mktemp("optimum"))


@pytest.fixture(scope="module")
def scheme(study: Path) -> str:
    return "header"


@pytest.fixture(scope="module")
def found(study: Path, scheme: str) -> Optimum:
    return optimum(study, "header_overdrive", 0.0, 0.5, scheme=scheme)


@pytest.fixture(scope="module")
def choice(study: Path, scheme: str) -> Choice:
    limits = Limits(droop_v=0.2, oxide_v=1.25)
    load = Load.constant(1e-4)
    return choose(
        study, KNOBS, scheme=scheme, limits=limits, load=load, density=DENSITY, rail=Rail(total_f=1e-13)
    )


def test_optimum_is_least_of_its_sweep(found: Optimum) -> None:
    assert found.compromise.optima
    for o in found.compromise.optima:
        assert o.value is not None
        assert o.power_w <= min(s.power_w for s in o.sweep) * 1.002
        assert sum(s.power_w for s in o.shares) == pytest.approx(o.power_w, rel=1e-6)
        if o.standing == "inside":
            assert abs(o.slope) < 1e-3
            assert o.gives_way == "channel"
    worst = max(c.power_w for c in found.compromise.corners)
    assert found.compromise.objective == pytest.approx(worst, rel=1e-9)


def test_front_against_brute_force(choice: Choice) -> None:
    def key(c: Candidate) -> tuple[float, float, float]:
        return c.power_w, c.area_m2 or 0.0, c.wake_s or 0.0

    front = [key(p.candidate) for p in choice.chosen.front]
    assert choice.chosen.candidates == 15
    assert front
    for c in choice.chosen.feasible:
        assert any(all(x <= y for x, y in zip(f, key(c), strict=True)) for f in front)
    for f in front:
        better = [g for g in front if g != f and all(x <= y for x, y in zip(g, f, strict=True))]
        assert not better


def test_limits_nobody_meets(study: Path, scheme: str) -> None:
    c = choose(study, KNOBS, scheme=scheme, limits=Limits(oxide_v=0.1))
    assert c.chosen.front == ()
    assert c.chosen.infeasible is not None
    assert "oxide is broken at corner" in c.chosen.infeasible.reason
    with pytest.raises(hushrail.RangeError, match="oxide is broken"):
        plot.pareto_front(c)


def test_wake_up_and_stress_on_the_way(study: Path, scheme: str) -> None:
    limits = Limits(wake_s=1e-6, in_rush_a=1.0, drain_bulk_v=0.5)
    rail = Rail(total_f=1e-13)
    quick = choose(study, KNOBS, scheme=scheme, limits=limits, rail=rail).chosen
    count = {c.limit: c for c in quick.limits}
    assert count["drain_bulk"].broken_by == quick.candidates - quick.failed
    assert [c.untested for c in quick.limits] == [0, 0, 0]
    assert count["in_rush"].best is not None
    assert count["in_rush"].best.value > 0.0
    # with a slew the wake-up is integrated where the other limits hold
    slew = WakeSpec(gate_slew_s=1e-11)
    slow = choose(study, KNOBS, scheme=scheme, limits=Limits(wake_s=1e-6), rail=rail, wake=slew).chosen
    assert len(slow.feasible) == slow.candidates - slow.failed
    tight = Limits(wake_s=1e-6, standby_w=sorted(c.power_w for c in slow.feasible)[3])
    some = choose(study, KNOBS, scheme=scheme, limits=tight, rail=rail, wake=slew).chosen
    assert len(some.feasible) == 4
    assert {c.limit: c.untested for c in some.limits}["wake"] == len(slow.feasible) - 4
    assert all(c.wake_s is not None for c in some.feasible)


def test_retention_of_every_corner(study: Path, scheme: str) -> None:
    limits = Limits(retention_margin_v=0.01)
    corners = [c.name for c in choose(study, KNOBS, scheme=scheme).corners]
    table = dict.fromkeys(corners, 0.02)
    c = choose(study, KNOBS, scheme=scheme, limits=limits, retention_v=table)
    count = c.chosen.limits[0]
    assert count.limit == "retention"
    assert count.best is not None
    assert count.best.allowed == pytest.approx(0.03)
    assert c.kept == ()
    del table[corners[0]]
    with pytest.raises(hushrail.RangeError, match="not given; want one for every corner"):
        choose(study, KNOBS, scheme=scheme, limits=limits, retention_v=table)
    with pytest.raises(hushrail.RangeError, match="given without a margin"):
        choose(study, KNOBS, scheme=scheme, retention_v=table)


def test_refusals(study: Path, scheme: str) -> None:
    with pytest.raises(hushrail.RangeError, match="want a lower and a higher"):
        optimum(study, "header_overdrive", 0.3, 0.1, scheme=scheme)
    with pytest.raises(hushrail.RangeError, match="not finite"):
        optimum(study, "header_overdrive", 0.0, float("nan"), scheme=scheme)
    with pytest.raises(hushrail.RangeError, match="no scheme `x`"):
        optimum(study, "header_overdrive", 0.0, 0.1, scheme="x")
    with pytest.raises(hushrail.RangeError, match="given without load"):
        choose(study, KNOBS, scheme=scheme, limits=Limits(droop_v=0.1))
    with pytest.raises(hushrail.RangeError, match="takes no weights"):
        optimum(study, "header_overdrive", 0.0, 0.1, scheme=scheme, weights=[1.0])
    with pytest.raises(FileNotFoundError):
        optimum(study.parent / "none.toml", "header_overdrive", 0.0, 0.1)


def test_pictures(found: Optimum, choice: Choice, tmp_path: Path) -> None:
    for name, ax in [
        ("setting", plot.leakage_by_setting(found, found.corners[0].name)),
        ("front", plot.pareto_front(choice)),
    ]:
        file = tmp_path / f"{name}.png"
        figure = ax.get_figure(root=True)
        assert figure is not None
        figure.savefig(file)
        assert file.stat().st_size > 5000
        assert ax.get_title()
