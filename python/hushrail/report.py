"""Results as text for a terminal: what a person wants to know first, in engineering units."""

from __future__ import annotations

import math
import statistics
import textwrap
from collections.abc import Iterable, Sequence

from hushrail.leakage import Comparison, Counts, LeakageRow, LeakageTable
from hushrail.results import Certainty, Corner, Domain, Estimate, Failure, LimitCheck, Note, Point, Uncovered
from hushrail.table import Column, render
from hushrail.units import engineering, factor, percent, span

__all__ = [
    "BROKEN",
    "NONE",
    "listed",
    "of_certainty",
    "of_comparison",
    "of_counts",
    "of_estimate",
    "of_failures",
    "of_notes",
    "of_table",
    "of_unmatched",
]

WORST = "*"
BROKEN = "!"
NONE = "–"

LIMITS = {"oxide_v": ("oxide voltage", "V"), "standby_a": ("standby current", "A")}


def of_estimate(result: Estimate, width: int = 100, *, failures: bool = True) -> str:
    """Write the tables of an estimate: for each domain one over schemes and one over schemes and corners.

    Parameters
    ----------
    result : Estimate
        What :func:`hushrail.estimate` found.
    width : int
        Columns of the terminal.
    failures : bool
        Say why points failed.
    """
    sizes = (len(result.domains), "domain"), (len(result.schemes), "scheme"), (len(result.corners), "corner")
    head = f"{', '.join(_many(n, word) for n, word in sizes)}: {_many(len(result.points), 'point')}"
    if result.failures:
        head += f" and {_many(len(result.failures), 'failure')}"
    parts = [f"{result.title}\n{head}" if result.title else head]
    corners = {corner.name: corner for corner in result.corners}
    several = len(corners) > 1
    for domain in result.domains:
        points = [p for p in result.points if p.domain == domain.name]
        parts.append(_domain_line(domain))
        if points:
            parts.append(_schemes(result, points, corners, width))
        if points and several:
            parts.append(_matrix(result, points, width))
    parts.append(_legend(result, several))
    parts += _broken(result, width)
    parts += _uncovered(result.domains, width)
    if failures:
        parts += listed("Failed", of_failures(result.failures), width)
    parts += _notes(result.notes, width)
    return "\n\n".join(part for part in parts if part)


def _many(n: int, word: str) -> str:
    return f"{n:,} {word}" if n == 1 else f"{n:,} {word}s"


def _domain_line(domain: Domain) -> str:
    text = f"Domain {domain.name}: {_many(domain.instances, 'instance')}"
    computed = "all" if domain.computed == domain.instances else f"{domain.computed:,}"
    text = f"{text}, {computed} computed from transistors"
    return text if domain.certainty is None else f"{text}\nStates: {of_certainty(domain.certainty)}"


def of_certainty(c: Certainty) -> str:
    """Write how many instances are in known, probable and assumed states."""
    total = max(c.known + c.probable + c.assumed + c.opaque, 1)
    parts = (("known", c.known), ("probable", c.probable), ("assumed", c.assumed), ("not told", c.opaque))
    return ", ".join(f"{percent(n / total)} {word}" for word, n in parts if n or word != "not told")


def _schemes(result: Estimate, points: Sequence[Point], corners: dict[str, Corner], width: int) -> str:
    several = len(corners) > 1
    columns = [Column("scheme", "left")]
    if several:
        columns += [Column("median current"), Column("median power"), Column("median saving")]
        columns += [Column("worst power"), Column("worst corner", "left"), Column("saving there")]
    else:
        columns += [Column("current"), Column("power"), Column("saving")]
    columns.append(Column("mostly there" if several else "mostly", "left"))
    headers = any(_has_header(p, corners) for p in points)
    footers = any(_has_footer(p) for p in points)
    columns += [Column("virtual supply")] * headers + [Column("virtual ground")] * footers
    columns += [Column("oxide voltage")] * (headers or footers)
    rows = []
    failed = _failed_schemes(result, points[0].domain)
    for scheme in result.schemes:
        own = [p for p in points if p.scheme == scheme]
        if not own:
            if scheme in failed:
                rows.append([scheme, "failed", *[""] * (len(columns) - 2)])
            continue
        worst = max(own, key=lambda p: p.power_w)
        current = statistics.median(p.current_a for p in own)
        power = statistics.median(p.power_w for p in own)
        whole = statistics.median(p.ungated_power_w for p in own)
        row = [scheme, engineering(current, "A"), engineering(power, "W"), factor(power, whole)]
        if several:
            there = factor(worst.power_w, worst.ungated_power_w)
            row += [f"{engineering(worst.power_w, 'W')} {WORST}", worst.corner, there]
        row.append(_mostly(worst))
        if headers:
            rails = [p.asleep.virtual_supply_v for p in own if _has_header(p, corners)]
            row.append(span(min(rails), max(rails), "V") if rails else NONE)
        if footers:
            rails = [p.asleep.virtual_ground_v for p in own if _has_footer(p)]
            row.append(span(min(rails), max(rails), "V") if rails else NONE)
        if headers or footers:
            stressed = max(own, key=lambda p: p.asleep.oxide_v)
            broken = any(not c.holds for p in own for c in p.limits if c.limit == "oxide_v")
            oxide = engineering(stressed.asleep.oxide_v, "V") if stressed.asleep.oxide_v > 0.0 else NONE
            row.append(f"{oxide} {BROKEN if broken else ' '}")
        rows.append(row)
    return render(columns, rows, width)


def _failed_schemes(result: Estimate, domain: str) -> set[str]:
    """Schemes that failed somewhere in a domain; an empty name in the list of failures means every one."""
    names = {f.scheme for f in result.failures if f.domain == domain}
    return set(result.schemes) if "" in names else names


def _has_header(p: Point, corners: dict[str, Corner]) -> bool:
    return p.asleep.virtual_supply_v != corners[p.corner].vdd_v


def _has_footer(p: Point) -> bool:
    return p.asleep.virtual_ground_v != 0.0


def _mostly(p: Point) -> str:
    """Name what takes most of the power, and its share."""
    shares = p.asleep.shares
    name = max(shares, key=lambda key: shares[key])
    total = sum(shares.values())
    return f"{name} {100.0 * shares[name] / total:.0f} %" if total > 0.0 else NONE


def _matrix(result: Estimate, points: Sequence[Point], width: int) -> str:
    columns = [Column("power", "left")] + [Column(corner.name) for corner in result.corners]
    rows = []
    failed = _failed_schemes(result, points[0].domain)
    for scheme in result.schemes:
        own = {p.corner: p for p in points if p.scheme == scheme}
        if not own and scheme not in failed:
            continue
        worst = max(own.values(), key=lambda p: p.power_w, default=None)
        row = [scheme]
        for corner in result.corners:
            p = own.get(corner.name)
            if p is None:
                row.append("failed  ")
                continue
            mark = (BROKEN if not p.holds else "") + (WORST if p is worst else "")
            row.append(f"{engineering(p.power_w, 'W')} {mark:<2}")
        rows.append(row)
    return render(columns, rows, width)


def _legend(result: Estimate, several: bool) -> str:
    words = []
    if several and result.points:
        words.append(f"{WORST} the worst corner of a scheme, by power")
    if result.broken:
        words.append(f"{BROKEN} a limit is broken there")
    return "; ".join(words)


def _broken(result: Estimate, width: int) -> list[str]:
    """For each limit: how often it is broken, and where by most."""
    names = dict.fromkeys(check.limit for p in result.points for check in p.limits)
    lines = []
    for name in names:
        title, unit = LIMITS.get(name, (name, ""))
        checks = [(p, check) for p in result.points for check in p.limits if check.limit == name]
        broken = [(p, check) for p, check in checks if not check.holds]
        p, check = max(broken or checks, key=lambda each: _over(each[1]))
        most = f"{engineering(check.value, unit)} ({p.domain}, {p.scheme}, {p.corner})"
        allowed = engineering(check.allowed, unit)
        if broken:
            lines.append(f"{title}: limit {allowed} broken at {_many(len(broken), 'point')}; most {most}")
        else:
            lines.append(f"{title}: limit {allowed} kept at every point; most {most}")
    return listed("Limits", lines, width)


def _over(check: LimitCheck) -> float:
    return check.value / check.allowed if check.allowed > 0.0 else check.value


def _policy(each: Uncovered) -> str:
    policy = each.policy
    if isinstance(policy, str):
        return "counted as drawing nothing" if policy == "zero" else policy
    if "current_a" in policy:
        return f"counted as drawing {engineering(float(policy['current_a']), 'A')} each at full supply"
    return f"computed as {policy.get('alias', '?')}"


def _uncovered(domains: Iterable[Domain], width: int) -> list[str]:
    lines = []
    for domain in domains:
        by: dict[str, list[Uncovered]] = {}
        for each in domain.uncovered:
            by.setdefault(_policy(each), []).append(each)
        for policy, masters in by.items():
            names = ", ".join(f"{each.master} ×{each.count:,}" for each in masters)
            total = sum(each.count for each in masters)
            lines.append(f"{domain.name}: {_many(total, 'instance')} {policy}: {names}")
    return listed("Not computed from transistors", lines, width)


def of_failures(failures: Iterable[Failure]) -> list[str]:
    """Write each reason once, with the points it struck.

    Parameters
    ----------
    failures : iterable of Failure
        As an estimate or a leakage table lists them.
    """
    by: dict[str, list[str]] = {}
    for f in failures:
        where = " / ".join(word for word in (f.domain, f.scheme, f.corner) if word)
        by.setdefault(f.reason, []).append(where)
    return [f"{reason} (at {_some(places)})" for reason, places in by.items()]


def of_notes(notes: Sequence[Note], width: int = 100) -> str:
    """Write remarks, each once; empty when there is none."""
    return "\n\n".join(_notes(notes, width))


def _notes(notes: Sequence[Note], width: int) -> list[str]:
    return listed("Notes", [f"{note.text} [{note.code}]" for note in dict.fromkeys(notes)], width)


def listed(title: str, lines: Sequence[str], width: int) -> list[str]:
    """Write lines under a title, wrapped; a list of one text, or of none."""
    if not lines:
        return []
    wrapped = [
        textwrap.fill(
            line,
            width,
            initial_indent="  - ",
            subsequent_indent="    ",
            break_long_words=False,
            break_on_hyphens=False,
        )
        for line in lines
    ]
    return ["\n".join([title, *wrapped])]


def of_table(result: LeakageTable, width: int = 100, *, states: bool = False, failures: bool = True) -> str:
    """Write a leakage table.

    Parameters
    ----------
    result : LeakageTable
        What :func:`hushrail.cells` found.
    width : int
        Columns of the terminal.
    states : bool
        Every state of every cell; otherwise one line for each cell with its mean and largest power.
    failures : bool
        Say why cells failed.
    """
    parts = []
    if states:
        for cell in result.cells:
            parts.append(
                _states(cell, [row for row in result.rows if row.cell == cell], result.corners, width)
            )
        parts.append(
            f"{WORST} the state that draws most; ~ not a state the cell stays in" if result.rows else ""
        )
    elif result.rows:
        parts.append(_cells(result, width))
    if failures:
        parts += listed("Failed", of_failures(result.failures), width)
    parts += _notes(result.notes, width)
    return "\n\n".join(part for part in parts if part)


def _states(cell: str, rows: Sequence[LeakageRow], corners: Sequence[str], width: int) -> str:
    here = [corner for corner in corners if any(row.corner == corner for row in rows)]
    most = {corner: max(row.power_w for row in rows if row.corner == corner) for corner in here}
    by: dict[str, dict[str, LeakageRow]] = {}
    for row in rows:
        by.setdefault(row.state, {})[row.corner] = row
    lines = []
    for state, own in by.items():
        line = [state or "(no pins)"]
        for corner in here:
            found = own.get(corner)
            if found is None:
                line.append(f"{NONE}  ")
                continue
            mark = ("" if found.stable else "~") + (WORST if found.power_w == most[corner] else "")
            line.append(f"{engineering(found.power_w, 'W')} {mark:<2}")
        lines.append(line)
    return render([Column(cell, "left")] + [Column(corner) for corner in here], lines, width)


def _cells(result: LeakageTable, width: int) -> str:
    columns = [Column("cell", "left"), Column("states")]
    for corner in result.corners:
        columns += [Column(f"{corner} mean"), Column(f"{corner} most")]
    by: dict[tuple[str, str], list[float]] = {}
    for row in result.rows:
        by.setdefault((row.cell, row.corner), []).append(row.power_w)
    lines = []
    for cell in result.cells:
        found = [by.get((cell, corner), []) for corner in result.corners]
        line = [cell, str(max(map(len, found)))]
        for powers in found:
            line.append(engineering(statistics.fmean(powers), "W") if powers else "failed")
            line.append(engineering(max(powers), "W") if powers else "failed")
        lines.append(line)
    return render(columns, lines, width, fixed=2)


def of_comparison(result: Comparison, width: int = 100, *, worst: int = 10, failures: bool = True) -> str:
    """Write a comparison: statistics, rows furthest off, rows under suspicion, and what was not compared.

    Parameters
    ----------
    result : Comparison
        What :func:`hushrail.compare` found.
    width : int
        Columns of the terminal.
    worst : int
        Rows of each kind to list.
    failures : bool
        Say why rows were not compared.
    """
    parts = [f"{_many(len(result.compared.rows), 'row')} compared, {len(result.compared.unmatched):,} not"]
    if result.statistics:
        titles = ["rows", "median ratio", "90 % within", "all within"]
        titles += ["within 0.3 %", "within 1 %", "within 2 %", "within 5 %"]
        lines = []
        for s in result.statistics:
            line = [
                s.corner,
                f"{s.states:,}",
                NONE if math.isnan(s.median_ratio) else f"{s.median_ratio:.4f}",
            ]
            line += [_times(s.p90_decades), _times(s.worst_decades)]
            shares = s.within_0p3_percent, s.within_1_percent, s.within_2_percent, s.within_5_percent
            lines.append([*line, *map(percent, shares)])
        parts.append(render([Column("corner", "left")] + [Column(title) for title in titles], lines, width))
    rows = result.worst(worst)
    if rows:
        columns = [Column("furthest off", "left"), Column("corner", "left"), Column("condition", "left")]
        columns += [Column("published"), Column("predicted"), Column("ratio")]
        lines = [
            [
                row.cell,
                row.corner,
                row.when or "any",
                engineering(row.published_nw * 1e-9, "W", 4),
                engineering(row.predicted_nw * 1e-9, "W", 4),
                f"{row.ratio:.4g}",
            ]
            for row in rows
        ]
        parts.append(render(columns, lines, width))
    if result.suspects and worst:
        doubts = []
        for each in result.suspects[:worst]:
            power = engineering(each.published_nw * 1e-9, "W", 4)
            where = f"{each.cell}, {each.corner}, {each.when or 'any'}"
            doubts.append(f"{where}: {power}: {'; '.join(each.reasons)}")
        more = len(result.suspects) - len(doubts)
        doubts += [f"and {_many(more, 'row')} more"] if more else []
        parts += listed("Rows of the table under suspicion", doubts, width)
    if failures:
        parts += listed("Not compared", of_unmatched(result), width)
    parts += _notes(result.compared.notes, width)
    return "\n\n".join(parts)


def of_unmatched(result: Comparison) -> list[str]:
    """Write why rows of a published table were not compared, each reason once.

    Parameters
    ----------
    result : Comparison
        What :func:`hushrail.compare` found.
    """
    reasons: dict[str, list[str]] = {}
    for row in result.compared.unmatched:
        if row.cell not in result.cells_lost:
            reasons.setdefault(row.reason, []).append(row.cell)
    lines = [f"{cell}: {reason}" for cell, reason in result.cells_lost.items()]
    return lines + [f"{each} ({_many(len(cells), 'row')}: {_some(cells)})" for each, cells in reasons.items()]


def _some(names: Sequence[str]) -> str:
    distinct = list(dict.fromkeys(names))
    more = len(distinct) - 6
    return ", ".join(distinct[:6]) + (f" and {more} more" if more > 0 else "")


def _times(decades: float) -> str:
    """Write a distance in decades as percent while that reads well, as a factor beyond."""
    if math.isnan(decades):
        return NONE
    ratio = 10.0**decades if decades < 300.0 else float("inf")
    return f"{100.0 * (ratio - 1.0):.2g} %" if ratio < 2.0 else f"×{ratio:.3g}"


def of_counts(result: Counts, width: int = 100) -> str:
    """Write instance counts, largest first.

    Parameters
    ----------
    result : Counts
        What :func:`hushrail.count` found.
    width : int
        Columns of the terminal.
    """
    total = result.instances
    under = f"{result.path} ({result.top})" if result.path else result.top
    ordered = sorted(result.counts.items(), key=lambda each: -each[1])
    rows = [[master, f"{n:,}", percent(n / total)] for master, n in ordered]
    head = f"{under}: {_many(total, 'instance')} of {_many(len(rows), 'master')}"
    columns = [Column("master", "left"), Column("instances"), Column("share")]
    return f"{head}\n\n{render(columns, rows, width)}"
