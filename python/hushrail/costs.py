"""What sleeping costs, as text for a terminal: awake, in between, at the optimum, while keeping state."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from typing import TypeVar

from hushrail.asked import Choices, Optima
from hushrail.awake import Kept, Report, SizePoint, SwitchAwake
from hushrail.awake import Point as AwakePoint
from hushrail.optimum import Binding, Choice, LimitCount, Optimum
from hushrail.parked import Parked
from hushrail.report import BROKEN, NONE, listed, of_certainty, of_failures, of_notes
from hushrail.results import Failure, Note
from hushrail.table import Column, render
from hushrail.transition import TransitionPoint, Transitions
from hushrail.units import engineering, factor, percent, span

__all__ = ["of_awake", "of_choices", "of_keep", "of_optima", "of_parked", "of_transitions"]

P = TypeVar("P", AwakePoint, TransitionPoint)

STRESS = (
    "oxide stress is held against the limits given; reliability limits are the foundry's, and so is sign-off"
)


def of_awake(result: Report, width: int = 100, *, failures: bool = True) -> str:
    """Write what switches cost while their domains work: one line for each domain and scheme, worst corner.

    Parameters
    ----------
    result : Report
        What :func:`hushrail.awake.domains` found.
    width : int
        Columns of the terminal.
    failures : bool
        Say why points failed.
    """
    parts = [f"{result.title}\nAwake, at the corner of the largest droop" if result.title else "Awake"]
    for domain, points in _by(result.points, lambda p: p.domain).items():
        parts.append(f"Domain {domain}")
        lines = [_awake_line(own, result.sizes) for own in _by(points, lambda p: p.scheme).values()]
        titles = ["worst droop", "of supply", "worst corner", "current", "on-resistance", "off current"]
        titles += ["R_on × I_off", "width for the budget", "at corner", "a neighbour's step adds"]
        columns = [Column("scheme", "left")] + [
            Column(t, "left" if "corner" in t else "right") for t in titles
        ]
        parts.append(render(*_filled(columns, lines), width))
        cells = _cells_awake(points)
        if cells:
            titles = ["smallest low margin", "high margin", "largest square", "at full rails", "delay"]
            columns = [Column("cell at its worst point", "left"), Column("point", "left")]
            parts.append(render(*_filled(columns + [Column(t) for t in titles], cells), width))
    parts += _failed(result.failures, width, failures)
    return "\n\n".join([*parts, *filter(None, [of_notes(result.notes, width)])])


def _awake_line(points: Sequence[AwakePoint], sizes: Iterable[SizePoint]) -> list[str]:
    worst = max(points, key=lambda p: p.droop.droop_v)
    switches = [s for s in (worst.header, worst.footer) if s is not None]
    vdd_v = worst.virtual_supply_v - worst.virtual_ground_v + worst.droop.droop_v
    own = [s.size for s in sizes if (s.domain, s.scheme) == (worst.domain, worst.scheme)]

    def each(of: Callable[[SwitchAwake], float], unit: str) -> str:
        return " + ".join(engineering(of(s), unit) for s in switches)

    return [
        worst.scheme,
        engineering(worst.droop.droop_v, "V"),
        percent(worst.droop.droop_v / vdd_v),
        worst.corner,
        engineering(worst.droop.current_a, "A"),
        each(lambda s: s.on.chord_ohm, "Ω"),
        each(lambda s: s.off_a, "A"),
        each(lambda s: s.merit_v, "V"),
        " + ".join(engineering(s.width_m, "m") for s in own) or NONE,
        " + ".join(dict.fromkeys(s.corner for s in own)) or NONE,
        NONE if worst.neighbour is None else engineering(worst.neighbour.noise_v, "V"),
    ]


def _cells_awake(points: Sequence[AwakePoint]) -> list[list[str]]:
    lines = []
    for cell in dict.fromkeys(c.cell for p in points for c in p.cells):
        found = [(p, c) for p in points for c in p.cells if c.cell == cell]

        def least(p: AwakePoint, square: float | None) -> float:
            return -p.droop.droop_v if square is None else square

        p, c = min(found, key=lambda each: least(each[0], each[1].square_v))
        margins = [c.nml_v, c.nmh_v, c.square_v, c.full_square_v]
        delay = max((d.penalty for d in c.delays), default=None)
        lines.append(
            [cell, f"{p.scheme}, {p.corner}"]
            + [NONE if m is None else engineering(m, "V") for m in margins]
            + [NONE if delay is None else f"+{100.0 * delay:.1f} %"]
        )
    return lines


def of_keep(result: Kept, width: int = 100, *, failures: bool = True) -> str:
    """Write the lowest rails that keep state: cells by corner, and the clamp level of each corner.

    Parameters
    ----------
    result : Kept
        What :func:`hushrail.awake.keep` found.
    width : int
        Columns of the terminal.
    failures : bool
        Say why cells failed.
    """
    parts = []
    corners = list(dict.fromkeys(r.corner for r in result.retentions))
    cells = list(dict.fromkeys(r.cell for r in result.retentions))
    if cells:
        rows = []
        for cell in cells:
            own = {r.corner: r for r in result.retentions if r.cell == cell}
            z = next((r.z_score for r in own.values() if r.z_score is not None), None)
            cell_row = [engineering(own[c].retention_v, "V") if c in own else "failed" for c in corners]
            rows.append([cell, *cell_row, NONE if z is None else f"{z:.2f}"])
        columns = [
            Column("lowest span that keeps state", "left"),
            *map(Column, corners),
            Column("sigmas kept"),
        ]
        parts.append(render(*_filled(columns, rows), width))
    if result.levels:
        rows = [
            [
                level.corner,
                engineering(level.span_v, "V"),
                engineering(level.rail_v, "V"),
                level.cell,
                NONE if level.leak_a is None else engineering(level.leak_a, "A"),
                NONE
                if level.leak_a is None or level.full_leak_a is None
                else factor(level.leak_a, level.full_leak_a),
            ]
            for level in result.levels
        ]
        columns = [Column("clamp level", "left"), Column("span left"), Column("rail at")]
        columns += [Column("decided by", "left"), Column("leaks there"), Column("of full rails")]
        parts.append(render(*_filled(columns, rows), width))
    parts += _failed(result.failures, width, failures)
    return "\n\n".join(parts)


def of_transitions(result: Transitions, width: int = 100, *, failures: bool = True) -> str:
    """Write falling asleep and waking: for each domain one line a scheme, over all corners.

    Parameters
    ----------
    result : Transitions
        What :func:`hushrail.transition.transitions` found.
    width : int
        Columns of the terminal.
    failures : bool
        Say why points failed.
    """
    parts = ["Falling asleep and waking, over the corners"]
    for domain, points in _by(result.points, lambda p: p.domain).items():
        parts.append(f"Domain {domain}")
        lines = [_transition_line(own) for own in _by(points, lambda p: p.scheme).values()]
        titles = ["rail falls in", "rests at", "ready in", "slowest corner", "largest in-rush", "corner"]
        titles += ["bounce", "pays from", "full-collapse formula", "average power", "battery"]
        titles += ["highest oxide voltage"]
        columns = [Column("scheme", "left")] + [
            Column(t, "left" if "corner" in t else "right") for t in titles
        ]
        parts.append(render(*_filled(columns, lines), width))
    if any(not p.stress.holds for p in result.points):
        parts.append(f"{BROKEN} a limit of stress is broken there")
    if result.points:
        parts.append(STRESS)
    parts += _failed(result.failures, width, failures)
    return "\n\n".join([*parts, *filter(None, [of_notes(result.notes, width)])])


def _transition_line(points: Sequence[TransitionPoint]) -> list[str]:
    slow = max(points, key=lambda p: p.wake.ready_s)
    rush = max(points, key=lambda p: p.wake.peak_a)
    stressed = max(points, key=lambda p: p.stress.oxide_v)
    broken = any(not p.stress.holds for p in points)
    times = [p.break_even.time_s for p in points]
    pays = [t for t in times if t is not None]
    formula = [p.break_even.full_collapse_s for p in points if p.break_even.full_collapse_s is not None]
    duties = [p.duty for p in points if p.duty is not None]
    lives = [d.battery_life_s for d in duties if d.battery_life_s is not None]

    def spread(values: Sequence[float], unit: str) -> str:
        return span(min(values), max(values), unit) if values else NONE

    never = "" if len(pays) == len(times) else f", never at {len(times) - len(pays)}" if pays else "never"
    return [
        slow.scheme,
        spread([p.collapse.time_constant_s for p in points], "s"),
        spread([p.collapse.rest_span_v for p in points], "V"),
        engineering(slow.wake.ready_s, "s"),
        slow.corner,
        engineering(rush.wake.peak_a, "A"),
        rush.corner,
        NONE
        if max(p.wake.bounce_v for p in points) == 0.0
        else engineering(max(p.wake.bounce_v for p in points), "V"),
        (spread(pays, "s") if pays else "") + never,
        spread(formula, "s"),
        spread([d.power_w for d in duties], "W"),
        NONE if not lives else f"{min(lives) / 86400.0:,.0f} d",
        f"{engineering(stressed.stress.oxide_v, 'V')} {BROKEN if broken else ' '}",
    ]


def of_optima(result: Optima, width: int = 100) -> str:
    """Write optima: each corner's own, what it gains, what takes over, and what one setting for all costs.

    Parameters
    ----------
    result : Optima
        What :func:`hushrail.asked.optima` found.
    width : int
        Columns of the terminal.
    """
    parts = [_optimum(each, width) for each in result.answers]
    notes = [n for each in result.answers for n in each.notes]
    return "\n\n".join([*parts, *filter(None, [of_notes(notes, width)])])


STANDING = {
    "low_end": "at the low end",
    "high_end": "at the high end",
    "no_gidl": "none: the card has no GIDL",
}


def _optimum(each: Optimum, width: int) -> str:
    c = each.compromise
    unit = "m" if c.knob.endswith(("width", "length")) else "V"
    paid = {p.corner: p for p in c.corners}
    lines = []
    for o in c.optima:
        here = NONE if o.value is None else engineering(o.value, unit)
        one = paid.get(o.corner)
        lines.append(
            [
                o.corner,
                f"{here} {STANDING.get(o.standing, '')}".strip(),
                engineering(o.power_w, "W"),
                NONE if o.without_w is None else factor(o.power_w, o.without_w),
                o.gives_way or NONE,
                o.takes_over or NONE,
                NONE if one is None else engineering(one.power_w, "W"),
                NONE if one is None else factor(one.power_w, one.own_w),
            ]
        )
    columns = [Column("corner", "left"), Column("optimum"), Column("power there"), Column("against none")]
    columns += [Column("gives way", "left"), Column("takes over", "left")]
    columns += [Column("power at the compromise"), Column("of its own optimum")]
    knob = c.knob.replace("_", " ")
    head = f"Optimum of {knob}: domain {each.domain}, scheme {each.scheme}"
    table = render(*_filled(columns, lines), width)
    decide = f"; {' and '.join(c.deciding)} decide" if c.deciding else ""
    return f"{head}\n\n{table}\n\nOne setting for all corners: {engineering(c.value, unit)}{decide}"


LIMIT_UNITS = {
    "droop": "V",
    "wake": "s",
    "in_rush": "A",
    "oxide": "V",
    "field": "V/m",
    "area": "m²",
    "span": "V",
    "retention": "V",
    "drain_bulk": "V",
    "standby": "W",
}


def of_choices(result: Choices, width: int = 100) -> str:
    """Write choices: the front by rising power, and for each point the limit that binds it.

    Parameters
    ----------
    result : Choices
        What :func:`hushrail.asked.choices` found.
    width : int
        Columns of the terminal.
    """
    parts = [_choice(each, width) for each in result.answers]
    notes: list[Note] = [n for each in result.answers for n in each.notes]
    return "\n\n".join([*parts, *filter(None, [of_notes(notes, width)])])


def _choice(each: Choice, width: int) -> str:
    c = each.chosen
    met = len(c.feasible)
    head = (
        f"Choice: domain {each.domain}, scheme {each.scheme}: {c.candidates:,} candidates at "
        f"{len(c.corners)} corners, {met:,} meet the limits, {len(c.front):,} on the front"
    )
    parts = [head]
    if c.infeasible is not None:
        parts.append(c.infeasible.reason)
    if c.front:
        columns = [Column(k.replace("_", " ")) for k in c.knobs]
        columns += [Column("power"), Column("corner", "left"), Column("area"), Column("ready in")]
        columns += [Column("nearest limit", "left"), Column("left of it")]
        lines = []
        for point in c.front:
            p = point.candidate
            settings = [
                engineering(v, "m" if k.endswith(("width", "length")) else "V")
                for k, v in zip(c.knobs, p.values, strict=True)
            ]
            area = NONE if p.area_m2 is None else _area(p.area_m2)
            wake = NONE if p.wake_s is None else engineering(p.wake_s, "s")
            lines.append([*settings, engineering(p.power_w, "W"), p.corner, area, wake, *_binding(p.binding)])
        parts.append(render(*_filled(columns, lines), width))
    if c.limits:
        broken = [_counted(each) for each in c.limits]
        parts += listed("Limits", broken, width)
    return "\n\n".join(parts)


def _counted(each: LimitCount) -> str:
    untested = f", {each.untested:,} not tested" if each.untested else ""
    return f"{each.limit.replace('_', ' ')}: {each.broken_by:,} break it{untested}"


def _binding(b: Binding | None) -> list[str]:
    if b is None:
        return [NONE, NONE]
    unit = LIMIT_UNITS.get(b.limit, "")
    where = "" if b.limit == "area" else f" ({b.corner})"
    allowed = _area(b.allowed) if b.limit == "area" else engineering(b.allowed, unit)
    return [f"{b.limit.replace('_', ' ')} {allowed}{where}", percent(b.margin)]


def _area(m2: float) -> str:
    return f"{m2 * 1e12:,.0f} µm²"


def of_parked(result: Parked, width: int = 100) -> str:
    """Write a parked vector: what it draws against random ones and the bound, and its values.

    Parameters
    ----------
    result : Parked
        What :func:`hushrail.parked.search` found.
    width : int
        Columns of the terminal.
    """
    head = f"Parked vector of domain {result.domain} at {result.corner}"
    rows = [
        ["found", engineering(result.power_w, "W"), factor(result.power_w, result.random_mean_w)],
        ["random, least of 64", engineering(result.random_least_w, "W"), NONE],
        ["random, mean", engineering(result.random_mean_w, "W"), NONE],
        ["every cell at its least", engineering(result.bound_w, "W"), NONE],
    ]
    columns = [Column("vector", "left"), Column("power"), Column("of the mean")]
    table = render(*_filled(columns, rows), width)
    gap = f"{percent(result.gap)} above what no vector can beat; states: {of_certainty(result.certainty)}"
    return "\n\n".join([head, table, gap, result.to_toml().rstrip()])


def _by(points: Iterable[P], key: Callable[[P], str]) -> dict[str, list[P]]:
    found: dict[str, list[P]] = {}
    for p in points:
        found.setdefault(key(p), []).append(p)
    return found


def _filled(columns: Sequence[Column], rows: Sequence[Sequence[str]]) -> tuple[list[Column], list[list[str]]]:
    """Leave out columns in which nothing stands."""
    keep = [i for i in range(len(columns)) if i == 0 or any(row[i] != NONE for row in rows)]
    return [columns[i] for i in keep], [[row[i] for i in keep] for row in rows]


def _failed(failures: Iterable[Failure], width: int, wanted: bool) -> list[str]:
    return listed("Failed", of_failures(failures), width) if wanted else []
