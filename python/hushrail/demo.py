"""The demonstration: an invented chip goes to sleep. ``python -m hushrail.demo [--out DIR]``.

Cards, cells and netlist are made up and stand in ``demo_data``; the numbers mean nothing about any real
technology.
"""

from __future__ import annotations

import argparse
import statistics
import sys
import textwrap
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np

from hushrail import command, demo_costs, report, study
from hushrail.device import Process
from hushrail.errors import HushrailError
from hushrail.results import Estimate, Point
from hushrail.table import Column, render
from hushrail.units import engineering, factor

__all__ = ["CARDS", "CATALOGUE", "STUDY", "catalogue", "main", "picture", "story"]

DATA = Path(__file__).parent / "demo_data"
STUDY = DATA / "study.toml"
"""The study that is run."""
CATALOGUE = DATA / "catalogue.toml"
"""Every part of a scheme, each in a scheme of its own."""
CARDS = DATA / "cards" / "kelp40.lib"
"""Cards of the invented process, with the sections tt, ss, ff, sf and fs."""
PICTURE = "hushrail-demo.png"
COSTS_PICTURE = "hushrail-demo-costs.png"

VDD_V = 1.1
TEMPS_C = (-40.0, 25.0, 125.0)
OVERDRIVE_V = np.linspace(0.0, 0.6, 121)
# the header of the study: 400 fingers of 2 µm, each diffusion shared by two
MODEL = "psw"
FINGER: dict[str, float] = {
    "w": 2e-6,
    "l": 8e-8,
    "m": 400.0,
    "ad": 1.2e-13,
    "as_": 1.2e-13,
    "pd": 2.12e-6,
    "ps": 2.12e-6,
}


def main(argv: Sequence[str] | None = None) -> int:
    """Run the studies, print their tables and what they tell, write the pictures."""
    parser = argparse.ArgumentParser(
        prog="python -m hushrail.demo", description=(__doc__ or "").split("\n")[0]
    )
    parser.add_argument("--out", metavar="DIR", default=".", help="folder for the pictures (the current one)")
    args = parser.parse_args(argv)
    folder = Path(args.out)
    if not folder.is_dir():
        print(f"error: {folder}: no such folder; want one for {PICTURE} and {COSTS_PICTURE}", file=sys.stderr)
        return 2
    try:
        return _run(folder)
    except KeyboardInterrupt:
        command.interrupted()
    except HushrailError as e:
        print(f"error: {e}", file=sys.stderr)
        return 2


def _run(folder: Path) -> int:
    result = command.watched("points", lambda progress: study.estimate(STUDY, progress))
    process = Process.read(CARDS, section="tt")
    width = command.terminal_width()
    print(report.of_estimate(result, width))
    print("\nWhat it tells")
    for line in story(result, process):
        print(
            textwrap.fill(
                line, width, initial_indent="  - ", subsequent_indent="    ", break_on_hyphens=False
            )
        )
    print("\n" + catalogue(study.estimate(CATALOGUE), width))
    answers = demo_costs.answers(process, lambda what, work: command.watched(what, work))
    print("\n" + demo_costs.tables(answers, width))
    drawn = {PICTURE: picture(result, process), COSTS_PICTURE: demo_costs.picture(answers)}
    for name, figure in drawn.items():
        figure.savefig(folder / name, dpi=150 if name == PICTURE else 110)
        print(f"\npicture: {folder / name}")
    return 2 if result.failures or answers.failed else 0


def catalogue(result: Estimate, width: int) -> str:
    """Write one line for each part that a scheme may be made of, with its power at each corner."""
    columns = [Column("every part of a scheme, alone", "left")]
    columns += [Column(c.name) for c in result.corners] + [Column("to")]
    lines = []
    for scheme in result.schemes:
        points = [p for p in result.points if p.scheme == scheme]
        worst = max(points, key=lambda p: p.power_w)
        powers = [engineering(p.power_w, "W") for p in points]
        lines.append([scheme, *powers, factor(worst.power_w, worst.ungated_power_w)])
    return f"{result.title}\n\n{render(columns, lines, width)}"


def story(result: Estimate, process: Process) -> list[str]:
    """Say in a few sentences what the numbers show; every number comes from the results."""
    domain = result.domains[0].name
    points = [p for p in result.points if p.domain == domain]
    by: dict[str, list[Point]] = {}
    for p in points:
        by.setdefault(p.scheme, []).append(p)
    worst = {scheme: max(own, key=lambda p: p.power_w) for scheme, own in by.items()}
    kept = {scheme: p for scheme, p in worst.items() if all(each.holds for each in by[scheme])}
    lines = []
    first = next(iter(worst.values()))
    typical_w = statistics.median(p.ungated_power_w for p in by[first.scheme])
    lines.append(
        f"Left powered, {domain} draws {engineering(first.ungated_power_w, 'W')} at its worst corner "
        f"({first.corner}) and {engineering(typical_w, 'W')} at the median one."
    )
    if kept:
        scheme, p = min(kept.items(), key=lambda each: each[1].power_w)
        shares = p.asleep.shares
        left = max(shares, key=lambda name: shares[name])
        lines.append(
            f"Of the schemes that keep the limits, `{scheme}` is the best where it hurts most: "
            f"{engineering(p.power_w, 'W')}, {factor(p.power_w, p.ungated_power_w)} of the powered block; "
            f"what is left is {100.0 * shares[left] / sum(shares.values()):.0f} % {left}."
        )
        median = {s: statistics.median(p.power_w for p in by[s]) for s in kept}
        typical = min(median, key=lambda s: median[s])
        if typical != scheme:
            less, more = engineering(median[typical], "W"), engineering(median[scheme], "W")
            lines.append(
                f"At the median corner `{typical}` is better, with {less} against {more}: one setting cannot "
                "be best at every corner."
            )
    where: list[str] = []
    for temp_c in TEMPS_C:
        over, total, _ = _off(process, temp_c)
        i = int(total.argmin())
        part = factor(float(total[i]), float(total[0]))
        more = " of the current without overdrive" if not where else ""
        where.append(f"{over[i]:.2f} V at {temp_c:g} °C (to {part}{more})")
    lines.append(
        f"The header `{MODEL}` alone leaks least with its gate driven past the rail by {', '.join(where)}. "
        "Less leaves channel current; more and the drain itself leaks, most of all by gidl. The optimum "
        "moves with temperature because channel current does and gidl hardly does."
    )
    broken = {p.scheme for p, _ in result.broken}
    if broken:
        named = ", ".join(f"`{scheme}`" for scheme in result.schemes if scheme in broken)
        lines.append(f"Limits forbid {named}, whatever it would save.")
    return lines + _whole(result)


def _whole(result: Estimate) -> list[str]:
    """Say how the domains share what the chip draws, each under the best scheme for its worst corner."""
    best: dict[str, Point] = {}
    for domain in result.domains:
        own = [p for p in result.points if p.domain == domain.name]
        broken = {p.scheme for p in own if not p.holds}
        worst = {p.scheme: p for p in sorted(own, key=lambda p: p.power_w) if p.scheme not in broken}
        if worst:
            best[domain.name] = min(worst.values(), key=lambda p: p.power_w)
    total = sum(p.power_w for p in best.values())
    if len(best) < 2 or total <= 0.0:
        return []
    shares = ", ".join(
        f"{name} {100.0 * p.power_w / total:.0f} % with `{p.scheme}`" for name, p in best.items()
    )
    return [
        f"Every domain at its best, the chip draws {engineering(total, 'W')} at the worst corner: {shares}."
    ]


def _off(process: Process, temp_c: float) -> tuple[Any, Any, Any]:
    from hushrail import plot

    return plot.off_currents(process, MODEL, OVERDRIVE_V, vdd_v=VDD_V, temp_c=temp_c, **FINGER)


def picture(result: Estimate, process: Process) -> Any:  # noqa: ANN401
    """Draw the demonstration's picture; gives a matplotlib figure, bound to no window."""
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    from hushrail import plot

    figure = Figure(figsize=(14.0, 10.0), layout="constrained")
    FigureCanvasAgg(figure)
    upper, lower = np.asarray(figure.subfigures(2, 1, height_ratios=(1.25, 1.0)))
    power, rest = upper.subplots(1, 2, sharey=True)
    plot.standby_power(result, ax=power)
    plot.rest_points(result, ax=rest)
    panels = lower.subplots(1, len(TEMPS_C), sharey=True)
    spans = []
    for temp_c, ax in zip(TEMPS_C, panels, strict=True):
        plot.overdrive_curve(
            process, MODEL, vdd_v=VDD_V, temp_c=temp_c, overdrive_v=OVERDRIVE_V, ax=ax, **FINGER
        )
        spans.append(ax.get_ylim())
    panels[0].set_ylim(min(low for low, _ in spans), max(high for _, high in spans))
    panels[0].set_ylabel("off current of the header")
    for ax in panels[:-1]:
        ax.get_legend().remove()  # the hottest has every mechanism
    figure.suptitle(result.title, fontweight="bold")
    return figure


if __name__ == "__main__":
    sys.exit(main())
