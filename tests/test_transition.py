"""Transitions: against SciPy's solver with the same devices, trends, refusals, pictures."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from pathlib import Path

import hushrail
import matplotlib as mpl
import numpy as np
import pytest
import small_process
from hushrail import plot
from hushrail.transition import (
    Area,
    Battery,
    Costs,
    DutyProfile,
    Gate,
    Idle,
    LadderSpec,
    Package,
    Rail,
    Segment,
    StressLimits,
    TransitionPoint,
    Transitions,
    WakeSpec,
    oxide_lifetime,
    transitions,
)
from scipy.integrate import solve_ivp

RAIL = Rail(per_instance_f=2e-15)
COSTS = Costs(gate=Gate(overlap_f_m=3e-10), control_j=1e-15)
SLEW_S = 1e-10
WIDTH_M, FINGER_M = 1e-5, 2e-6
START_S = 2e-10
SEGMENTS = (Segment(FINGER_M, at_s=0.0), Segment(WIDTH_M - FINGER_M, at_s=START_S))


@pytest.fixture(scope="module")
def study(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return small_process.write(tmp_path_factory.mktemp("transition"))


@pytest.fixture(scope="module")
def found(study: Path) -> Transitions:
    return transitions(
        study,
        rail=RAIL,
        costs=COSTS,
        wake=WakeSpec(gate_slew_s=SLEW_S, package=Package(1e-9, 1.0, 1e-11)),
        ladder=LadderSpec(1e-3, 3),
        duty=DutyProfile((Idle(1e-3, 10), Idle(1.0)), 1e-4, 1e-5),
        battery=Battery(0.1, 0.02),
        limits=StressLimits(oxide_v=1.05),
    )


def motion(device: hushrail.Device, p: TransitionPoint) -> Callable[[float, np.ndarray], list[float]]:
    """C dV/dt = I_switch - I_block of a footer in segments, with device currents asked for in Python."""
    span, block = np.asarray(p.curve.span_v), np.asarray(p.curve.block_a)
    fingers = np.array([s.width_m / FINGER_M for s in SEGMENTS])
    starts = np.array([s.at_s for s in SEGMENTS])

    def rate(t: float, y: np.ndarray) -> list[float]:
        gates = small_process.VDD_V * np.clip((t - starts) / SLEW_S, 0.0, 1.0)
        amperes = device.currents(vd=small_process.VDD_V - y[0], vg=gates)[..., 0]
        return [(float(amperes @ fingers) - float(np.interp(y[0], span, block))) / p.rail_f]

    return rate


def test_waking_agrees_with_scipy(study: Path, process: hushrail.Process) -> None:
    """A footer in two segments, its gates slewing; the block's current is read off the same curve."""
    wake = WakeSpec(segments=SEGMENTS, gate_slew_s=SLEW_S)
    run = transitions(study, rail=RAIL, costs=COSTS, wake=wake, schemes=("footer",), tolerance=1e-4)
    assert not run.failures, run.failures
    assert len(run.points) == 3
    area, edge = FINGER_M * 1e-7 / 2, 1e-7 + FINGER_M
    for p in run.points:
        temp_c = float(p.corner.split()[-2])
        device = process.transistor(
            "nch", w=FINGER_M, l=1e-7, ad=area, as_=area, pd=edge, ps=edge, temp_c=temp_c
        )
        times, spans = np.asarray(p.wake.times_s), np.asarray(p.wake.span_v)
        t0, y0, seen = 0.0, [spans[0]], 0
        # pieces between the corners of the gates, which an integrator must not step over
        for t1 in (SLEW_S, START_S, START_S + SLEW_S, times[-1]):
            inside = (times >= t0) & (times <= t1)
            if t1 <= t0 or not inside.any():
                continue
            ours = solve_ivp(
                motion(device, p), (t0, t1), y0, method="Radau", rtol=1e-8, atol=1e-10, dense_output=True
            )
            assert ours.success
            np.testing.assert_allclose(spans[inside], ours.sol(times[inside])[0], rtol=0, atol=2e-6)
            t0, y0, seen = t1, [float(ours.y[0, -1])], seen + int(inside.sum())
        assert seen > 50
        assert y0[0] > 0.9


def test_hot_sleeps_pay_sooner(found: Transitions) -> None:
    """Usami et al. 2010: break-even falls exponentially with temperature."""
    for scheme in {p.scheme for p in found.points}:
        own = [p for p in found.points if p.scheme == scheme]
        times = [p.break_even.time_s for p in own]
        assert len(times) == 3
        cold, mild, hot = (t for t in times if t is not None)
        assert cold > 3 * mild > 9 * hot
        assert all(p.break_even.ratio is not None and p.break_even.ratio > 1.0 for p in own)


def test_books_limits_and_caution(found: Transitions) -> None:
    assert not found.failures, found.failures
    for p in found.points:
        assert p.collapse.ledger_mismatch < 1e-6
        assert p.wake.charge_mismatch < 1e-6
        assert p.ladder is not None
        assert p.wake.peak_a == p.ladder.peak_a <= p.ladder.limit_a
        assert p.curve.accuracy <= 1e-3
        assert any(n.code == "oxide-caution" for n in p.stress.notes)
        phases = {s.phase for s in p.stress.pairs}
        assert phases == {"asleep", "awake", "waking"}
        assert p.duty is not None
        assert p.duty.power_w < p.duty.never_asleep_w
    assert any(not p.stress.holds for p in found.points), "overdriven gates break 1.05 V"
    assert Transitions.from_json(found.to_json()) == found
    assert len(found.to_pandas()) == len(found.points)


def test_nothing_is_guessed(study: Path) -> None:
    none = transitions(study, rail=Rail(), costs=COSTS)
    assert not none.points
    assert (
        "no capacitance given for the virtual rail: transitions are not computed" in none.failures[0].reason
    )
    none = transitions(study, rail=RAIL, costs=Costs(), schemes=("footer",))
    assert "no capacitance given for the switch's gate" in none.failures[0].reason
    strange = transitions(study, rail=RAIL, costs=COSTS, schemes=("nowhere",))
    assert "the study has no scheme `nowhere`" in strange.failures[0].reason
    limit = transitions(study, rail=RAIL, costs=COSTS, ladder=LadderSpec(1e-9, 4), schemes=("footer",))
    assert "times the limit" in limit.failures[0].reason
    with pytest.raises(hushrail.RangeError, match="at_s or at_share"):
        transitions(study, rail=RAIL, costs=COSTS, wake=WakeSpec(segments=(Segment(1e-5),)))
    with pytest.raises(hushrail.RangeError, match="not finite"):
        transitions(study, rail=Rail(total_f=float("nan")), costs=COSTS)
    duty = DutyProfile((Idle(1.0),), 1.0, 1.0, policy="after")
    with pytest.raises(hushrail.RangeError, match="threshold_s"):
        transitions(study, rail=RAIL, costs=COSTS, duty=duty)


def test_lifetimes_take_every_number_from_the_caller() -> None:
    power = {"reference_s": 1e8, "reference_v": 1.0, "exponent": 45.0}
    life = oxide_lifetime("power", power, voltage_v=1.1, oxide_m=2e-9, temp_c=125.0)
    assert life.lifetime_s == pytest.approx(1e8 * 1.1**-45)
    assert life.notes[0].code == "oxide-caution"
    area = Area(4e-12, 1e-12, 2.0)
    half = oxide_lifetime("power", power, voltage_v=1.1, oxide_m=2e-9, temp_c=125.0, area=area)
    assert half.lifetime_s == pytest.approx(life.lifetime_s / 2)
    del power["exponent"]
    with pytest.raises(hushrail.RangeError, match="missing field `exponent`"):
        oxide_lifetime("power", power, voltage_v=1.1, oxide_m=2e-9, temp_c=125.0)


@pytest.fixture
def no_window() -> Iterator[None]:
    mpl.use("Agg")
    import matplotlib.pyplot as plt

    yield
    plt.close("all")


@pytest.mark.usefixtures("no_window")
def test_pictures_show_what_was_computed(found: Transitions) -> None:
    p = found.points[0]
    ax = plot.rail_collapse(p)
    assert ax.get_xscale() == "log"
    assert np.asarray(ax.get_lines()[0].get_ydata())[-1] == p.collapse.span_v[-1]
    ax = plot.wake_up(p)
    assert len(ax.get_lines()) == 4
    ax = plot.energy_saved(found.points[:3])
    dots = [line for line in ax.get_lines() if line.get_marker() == "o"]
    assert [float(np.asarray(d.get_xdata())[0]) for d in dots] == [
        q.break_even.time_s for q in found.points[:3]
    ]
    with pytest.raises(hushrail.RangeError):
        plot.energy_saved([])
