"""Waking and falling asleep: in-rush, bounce, costs of a round trip, break-even, duty, stress.

Nothing is guessed: without capacitances there is no transition, and the numbers of lifetime laws are the
caller's. Stress is computed from the card's electrical oxide thickness; the limits are the foundry's.

Sources. The rail obeys ``C dV/dt = I_switch - I_block`` with the devices' own currents (Kirchhoff); energy is
booked by what the supplies deliver and by what the block takes, which agree; the gate costs
``C (Vdd + overdrive + boost)**2 / efficiency`` (derived). Lifetime laws: E model after McPherson, 1/E after
Chen
and Hu, power law after Wu et al. 2002 (from memory).
"""

from __future__ import annotations

import os
from collections.abc import Iterator
from dataclasses import asdict, dataclass
from typing import TYPE_CHECKING, Any, Literal

from hushrail import _core, records
from hushrail.errors import RangeError
from hushrail.results import Failure, Note, remarks

if TYPE_CHECKING:
    import pandas as pd

    from hushrail.study import Progress, StrPath

__all__ = [
    "Area",
    "Battery",
    "BreakEven",
    "Collapse",
    "Costs",
    "Duty",
    "DutyProfile",
    "Gate",
    "Idle",
    "Ladder",
    "LadderSpec",
    "Lifetime",
    "Package",
    "PairStress",
    "Rail",
    "RailCurve",
    "RoundTrip",
    "Segment",
    "StressCheck",
    "StressLimits",
    "SwitchStress",
    "TransitionPoint",
    "Transitions",
    "Wake",
    "WakeSpec",
    "oxide_lifetime",
    "transitions",
]


# ------------------------------------------------------------------------------------------ what is asked for
@dataclass(frozen=True)
class Rail:
    """Capacitance of the virtual rail, counted across the block; what is given is added up.

    ``total_f`` in all, F; ``per_instance_f`` of one instance, F; ``per_area_f_m2`` with ``area_m2``, F/m²
    and m².
    """

    total_f: float | None = None
    per_instance_f: float | None = None
    per_area_f_m2: float | None = None
    area_m2: float | None = None


@dataclass(frozen=True)
class Gate:
    """Capacitance of the switch's gate, given in one of three ways.

    ``total_f`` in all, F; ``per_width_f_m`` of a metre of width, F/m; ``overlap_f_m`` of both edges, F/m, on
    top of
    the card's oxide over the channel.
    """

    total_f: float | None = None
    per_width_f_m: float | None = None
    overlap_f_m: float | None = None


@dataclass(frozen=True)
class Costs:
    """Costs of a round trip besides the rail; energies in J that are left out count as zero and are said to.

    ``nwell_f`` and ``pwell_f``, F, must be given when the block's wells are at another bias asleep than
    awake, ``switch_well_f``, F, when the switch's is. The pump's efficiency is that of the scheme.
    """

    gate: Gate = Gate()
    switch_well_f: float | None = None
    nwell_f: float | None = None
    pwell_f: float | None = None
    retention_save_j: float | None = None
    retention_restore_j: float | None = None
    control_j: float | None = None


@dataclass(frozen=True)
class Segment:
    """Part of a switch turned on at once: width in m, and when.

    Either at a time, s, or when the rail has reached a share of the supply.
    """

    width_m: float
    at_s: float | None = None
    at_share: float | None = None


@dataclass(frozen=True)
class Package:
    """Loop between the ideal supply and the real rail: H, ohm, and decoupling at the real rail, F."""

    inductance_h: float
    resistance_ohm: float
    decoupling_f: float


@dataclass(frozen=True)
class WakeSpec:
    """How a domain is woken.

    The whole switch at zero without ``segments``; gates take ``gate_slew_s`` from off to on; ready within
    the share
    ``ready_within`` of the supply; from the rest point unless ``from_span_v``, V, is given.
    """

    segments: tuple[Segment, ...] | None = None
    gate_slew_s: float = 0.0
    ready_within: float = 0.05
    package: Package | None = None
    from_span_v: float | None = None
    give_up_s: float | None = None


@dataclass(frozen=True)
class LadderSpec:
    """A ladder to design: largest current of the switch, A, and segments at most."""

    peak_a: float
    segments: int = 8


@dataclass(frozen=True)
class Idle:
    """One kind of idle time, s, and how often it comes against the others."""

    duration_s: float
    weight: float = 1.0


@dataclass(frozen=True)
class DutyProfile:
    """What a domain does over time.

    Idle times (one, or a histogram), mean work between two, s, and power at work, W. It sleeps through every
    idle
    time (``always``) or none (``never``), through those longer than ``threshold_s`` (``if_longer``), or from
    ``threshold_s`` on (``after``).
    """

    idle: tuple[Idle, ...]
    busy_s: float
    busy_power_w: float
    policy: Literal["always", "never", "if_longer", "after"] = "always"
    threshold_s: float | None = None


@dataclass(frozen=True)
class Battery:
    """A battery: Ah, share lost by itself in a year; V and efficiency of a converter, or neither."""

    capacity_ah: float
    self_discharge_per_year: float = 0.0
    voltage_v: float | None = None
    efficiency: float | None = None


@dataclass(frozen=True)
class StressLimits:
    """Limits from the foundry: voltage across the oxide, V, field, V/m, drain against bulk, V."""

    oxide_v: float | None = None
    field_v_m: float | None = None
    drain_bulk_v: float | None = None


@dataclass(frozen=True)
class Area:
    """Scaling of a lifetime to another area: gate areas in m² and the Weibull slope."""

    area_m2: float
    reference_area_m2: float
    weibull_slope: float


# ---------------------------------------------------------------------------------------- what is found


@dataclass(frozen=True)
class RailCurve:
    """The block over its rail: span left, V; what it takes and what the sleeping switch gives, A."""

    span_v: tuple[float, ...]
    block_a: tuple[float, ...]
    switch_a: tuple[float, ...]
    accuracy: float
    jumps_v: tuple[float, ...]
    evaluations: int


@dataclass(frozen=True)
class Collapse:
    """Falling asleep: rows over ``times_s``, s.

    Span, V; currents, A; energy saved by the block's ledger and by the supply's, J. ``time_constant_s`` is
    when the
    rail has gone 1 - 1/e of its way to rest; ``ohmic_time_constant_s`` is C Vdd / I awake.
    """

    times_s: tuple[float, ...]
    span_v: tuple[float, ...]
    switch_a: tuple[float, ...]
    block_a: tuple[float, ...]
    saved_j: tuple[float, ...]
    saved_supply_j: tuple[float, ...]
    from_span_v: float
    rest_span_v: float
    time_constant_s: float
    ohmic_time_constant_s: float
    half_way_s: float
    settled_s: float
    ungated_power_w: float
    rest_power_w: float
    ledger_mismatch: float
    notes: tuple[Note, ...]


@dataclass(frozen=True)
class Wake:
    """Waking: rows over ``times_s``, s.

    Span and loss at the real rail, V; currents of switch, block and supply, A; the gates furthest on and
    off, V.
    Peaks in A and A/s (none without a slew time), times in s, bounce and overshoot in V, charge in C, energy
    in J.
    """

    times_s: tuple[float, ...]
    span_v: tuple[float, ...]
    loss_v: tuple[float, ...]
    switch_a: tuple[float, ...]
    block_a: tuple[float, ...]
    supply_a: tuple[float, ...]
    gate_first_v: tuple[float, ...]
    gate_last_v: tuple[float, ...]
    peak_a: float
    peak_s: float
    peak_rate_a_s: float | None
    rail_ready_s: float
    ready_s: float
    starts_s: tuple[float, ...]
    bounce_v: float
    overshoot_v: float
    charge_c: float
    energy_j: float
    charge_mismatch: float
    notes: tuple[Note, ...]


@dataclass(frozen=True)
class Ladder:
    """Segments that keep a limit: fingers, widths (m), starts (s), span over supply; limit, peak (A)."""

    fingers: tuple[float, ...]
    width_m: tuple[float, ...]
    starts_s: tuple[float, ...]
    shares: tuple[float, ...]
    limit_a: float
    peak_a: float


@dataclass(frozen=True)
class RoundTrip:
    """Energies of one sleep and wake-up, J; ``fixed_j`` is all but the rail's recharge."""

    asleep_s: float
    rail_j: float
    gate_j: float
    gate_swing_v: float
    gate_f: float
    wells_j: float
    retention_j: float
    control_j: float
    fixed_j: float
    notes: tuple[Note, ...]


@dataclass(frozen=True)
class BreakEven:
    """Sleep from which it pays, s (none when it never does), and the formula of a collapsed rail, s."""

    time_s: float | None
    span_v: float | None
    full_collapse_s: float | None
    ratio: float | None
    costs: RoundTrip
    notes: tuple[Note, ...]


@dataclass(frozen=True)
class Duty:
    """Averages of a profile: A, W, W if it never slept, share asleep, sleeps a second, battery life in s."""

    current_a: float
    power_w: float
    never_asleep_w: float
    share_asleep: float
    sleeps_per_s: float
    battery_life_s: float | None
    notes: tuple[Note, ...]


@dataclass(frozen=True)
class StressCheck:
    """A limit and how the stress stands to it, V or V/m."""

    limit: str
    value: float
    allowed: float
    holds: bool


@dataclass(frozen=True)
class PairStress:
    """The worst of a pair of terminals in a phase: V with sign, s since waking began, field in V/m."""

    pair: str
    phase: str
    voltage_v: float
    time_s: float
    field_v_m: float | None
    limits: tuple[StressCheck, ...]


@dataclass(frozen=True)
class SwitchStress:
    """Stress of a switch asleep, awake and waking: V, V/m, m. The caution in ``notes`` is part of it."""

    pairs: tuple[PairStress, ...]
    oxide_v: float
    field_v_m: float
    oxide_m: float
    holds: bool
    notes: tuple[Note, ...]


@dataclass(frozen=True)
class TransitionPoint:
    """Transitions of one domain under one scheme at one corner; supply in V, rail capacitance in F."""

    domain: str
    scheme: str
    corner: str
    vdd_v: float
    rail_f: float
    curve: RailCurve
    collapse: Collapse
    wake: Wake
    ladder: Ladder | None
    break_even: BreakEven
    duty: Duty | None
    stress: SwitchStress


@dataclass(frozen=True)
class Transitions:
    """Points by domain, scheme and corner; what failed, remarks, and whether the run was stopped."""

    points: tuple[TransitionPoint, ...]
    failures: tuple[Failure, ...]
    notes: tuple[Note, ...]
    stopped: bool

    @classmethod
    def from_json(cls, text: str, name: str = "transitions") -> Transitions:
        """Read what :meth:`to_json` wrote; ``name`` stands for it in messages."""
        return records.from_text(cls, text, name)

    def to_json(self, indent: int | None = None) -> str:
        """Write as JSON text; :meth:`from_json` gives an equal object back."""
        return records.to_text(self, indent)

    def point(self, domain: str, scheme: str, corner: str) -> TransitionPoint:
        """Give one point.

        Raises
        ------
        RangeError
            There is none.
        """
        for p in self.points:
            if (p.domain, p.scheme, p.corner) == (domain, scheme, corner):
                return p
        raise RangeError(f"no transition of domain `{domain}` under scheme `{scheme}` at corner `{corner}`")

    def flat(self) -> Iterator[dict[str, Any]]:
        """Give one flat row for each point, SI."""
        for p in self.points:
            yield {
                "domain": p.domain,
                "scheme": p.scheme,
                "corner": p.corner,
                "rest_span_v": p.collapse.rest_span_v,
                "time_constant_s": p.collapse.time_constant_s,
                "ready_s": p.wake.ready_s,
                "peak_a": p.wake.peak_a,
                "peak_rate_a_s": p.wake.peak_rate_a_s,
                "bounce_v": p.wake.bounce_v,
                "break_even_s": p.break_even.time_s,
                "full_collapse_s": p.break_even.full_collapse_s,
                "fixed_j": p.break_even.costs.fixed_j,
                "average_a": None if p.duty is None else p.duty.current_a,
                "battery_life_s": None if p.duty is None else p.duty.battery_life_s,
                "oxide_v": p.stress.oxide_v,
                "oxide_field_v_m": p.stress.field_v_m,
                "stress_holds": p.stress.holds,
            }

    def to_pandas(self) -> pd.DataFrame:
        """Make a data frame of :meth:`flat`; remarks, the caution on stress among them, in its ``attrs``."""
        import pandas as pd

        frame = pd.DataFrame(list(self.flat()))
        frame.attrs["remarks"] = remarks(self.notes)
        return frame


@dataclass(frozen=True)
class Lifetime:
    """Lifetime of an oxide under uninterrupted stress, s; the caution in ``notes`` is part of it."""

    lifetime_s: float
    notes: tuple[Note, ...]


def transitions(
    path: StrPath,
    *,
    rail: Rail,
    costs: Costs,
    wake: WakeSpec | None = None,
    ladder: LadderSpec | None = None,
    sleep_slew_s: float = 0.0,
    duty: DutyProfile | None = None,
    battery: Battery | None = None,
    limits: StressLimits | None = None,
    tolerance: float = 1e-3,
    domains: tuple[str, ...] = (),
    schemes: tuple[str, ...] = (),
    corners: tuple[str, ...] = (),
    progress: Progress | None = None,
) -> Transitions:
    """Work out the transitions of a study: domains under schemes with one switch, at corners.

    Parameters
    ----------
    path : path
        The study, a TOML file.
    rail, costs : Rail, Costs
        Capacitances and energies.
    wake : WakeSpec, optional
        The wake-up; the whole switch at once when left out.
    ladder : LadderSpec, optional
        A ladder to design in the place of the wake-up's segments.
    sleep_slew_s : float
        Time the gate takes from on to off, s.
    duty, battery : DutyProfile, Battery, optional
        What the domain does over time, and what it lives on.
    limits : StressLimits, optional
        Limits of stress.
    tolerance : float
        Relative accuracy of the block's curve.
    domains, schemes, corners : tuple of str
        Which; all when empty.
    progress : callable, optional
        Called with points done and points in all.

    Raises
    ------
    FileNotFoundError, ReadError
        The study or a file it names.
    RangeError
        A request that contradicts itself. What single points cannot do is in ``failures``.
    """
    spec = {
        "rail": asdict(rail),
        "costs": asdict(costs),
        "wake": wake_request(wake or WakeSpec()),
        "ladder": None if ladder is None else asdict(ladder),
        "sleep": {"gate_slew_s": sleep_slew_s},
        "duty": None if duty is None else _duty(duty),
        "battery": None if battery is None else asdict(battery),
        "limits": asdict(limits or StressLimits()),
        "tolerance": tolerance,
        "domains": list(domains),
        "schemes": list(schemes),
        "corners": list(corners),
    }
    return Transitions.from_json(
        _core.transitions(os.fspath(path), records.to_request(spec), progress=progress)
    )


def oxide_lifetime(
    law: Literal["field", "inverse_field", "power"],
    numbers: dict[str, float],
    *,
    voltage_v: float,
    oxide_m: float,
    temp_c: float,
    area: Area | None = None,
) -> Lifetime:
    """Lifetime of an oxide under a law whose every number is the caller's, from the foundry.

    Parameters
    ----------
    law : str
        ``field``: reference_s, reference_field_v_m, gamma_m_v, activation_ev, reference_temp_c.
        ``inverse_field``:
        reference_s, reference_field_v_m, g_v_m. ``power``: reference_s, reference_v, exponent.
    numbers : dict
        The numbers of the law, units in their names.
    voltage_v, oxide_m, temp_c : float
        Voltage across the oxide, V; its thickness, m; temperature, °C.
    area : Area, optional
        Scaling to another area.

    Raises
    ------
    RangeError
        A number that is missing or cannot be.
    """
    scaled = None if area is None else records.to_request(asdict(area))
    life_s, notes = _core.oxide_lifetime(
        records.to_request({"law": law, **numbers}), voltage_v, oxide_m, temp_c, area=scaled
    )
    return Lifetime(life_s, tuple(Note(code, text) for code, text in notes))


def wake_request(wake: WakeSpec) -> dict[str, Any]:
    """Give the core's form of a wake-up."""
    plain = asdict(wake)
    if wake.segments is not None:
        plain["segments"] = [_segment(s) for s in wake.segments]
    return plain


def _segment(s: Segment) -> dict[str, Any]:
    given = {name: at for name, at in (("at_s", s.at_s), ("at_share", s.at_share)) if at is not None}
    if len(given) != 1:
        raise RangeError(f"a segment of {s.width_m} m has {len(given)} starts; want at_s or at_share")
    return {"width_m": s.width_m, "start": given}


def _duty(duty: DutyProfile) -> dict[str, Any]:
    named = {"if_longer": "if_longer_than_s", "after": "after_s"}
    policy: object = duty.policy
    if duty.policy in named:
        if duty.threshold_s is None:
            raise RangeError(f"policy `{duty.policy}` needs threshold_s, in s")
        policy = {named[duty.policy]: duty.threshold_s}
    elif duty.threshold_s is not None:
        raise RangeError(f"policy `{duty.policy}` takes no threshold_s")
    return {
        "idle": [asdict(i) for i in duty.idle],
        "busy_s": duty.busy_s,
        "busy_power_w": duty.busy_power_w,
        "policy": policy,
    }
