"""The demonstration's second half: what the sleep of one domain costs, from ``demo_data/costs.toml``."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any, TypeVar

from hushrail import asked, costs
from hushrail.awake import Kept, Load, Report, RowDroop, Switch, row
from hushrail.device import Process
from hushrail.study import Progress
from hushrail.transition import Transitions

__all__ = ["COSTS", "Answers", "answers", "picture", "rail", "tables"]

DATA = Path(__file__).parent / "demo_data"
COSTS = DATA / "costs.toml"
"""The study that is asked."""

# a row of the domain: 24 nodes, a part of the header's fingers at every fourth
NODES = 24
SWITCHES = tuple(range(2, NODES, 4))
SEGMENT_OHM = 0.6
ROW_A = 1.2e-3
VDD_V = 1.1

T = TypeVar("T")


@dataclass(frozen=True)
class Answers:
    """Everything that was asked."""

    awake: Report
    keep: Kept
    transitions: Transitions
    optima: asked.Optima
    choices: asked.Choices
    row: RowDroop

    @property
    def failed(self) -> bool:
        """Whether something has no answer."""
        return bool(self.awake.failures or self.keep.failures or self.transitions.failures)


def answers(process: Process, watch: Callable[[str, Callable[[Progress], Any]], Any]) -> Answers:
    """Ask everything; ``watch`` runs work of a name and shows its progress."""

    def ask(what: str, question: Callable[[Path, Progress], T]) -> T:
        found: T = watch(what, lambda progress: question(COSTS, progress))
        return found

    return Answers(
        awake=ask("points", asked.awake),
        keep=ask("cells", asked.keep),
        transitions=ask("points", asked.transitions),
        optima=ask("corners", asked.optima),
        choices=ask("candidates", asked.choices),
        row=rail(process),
    )


def rail(process: Process) -> RowDroop:
    """Solve the droop along one row: the load sits at its far third, the switches all along."""
    weights = [1.0 if k < 2 * NODES // 3 else 4.0 for k in range(NODES)]
    loads = [Load.constant(ROW_A * w / sum(weights)) for w in weights]
    part = Switch("psw", width_m=1.6e-5, length_m=8e-8, finger_width_m=2e-6, diffusion_m=1.2e-7)
    return row(
        loads, SWITCHES, vdd_v=VDD_V, segment_ohm=SEGMENT_OHM, switch=part, process=process, temp_c=125.0
    )


def tables(found: Answers, width: int) -> str:
    """Write all tables."""
    parts = [
        costs.of_awake(found.awake, width),
        costs.of_keep(found.keep, width),
        costs.of_transitions(found.transitions, width),
        costs.of_optima(found.optima, width),
        costs.of_choices(found.choices, width),
    ]
    return "\n\n".join(parts)


def picture(found: Answers) -> Any:  # noqa: ANN401
    """Draw what was found; gives a matplotlib figure, bound to no window."""
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    from hushrail import plot

    figure = Figure(figsize=(16.0, 13.0), layout="constrained")
    FigureCanvasAgg(figure)
    panels = figure.subplots(3, 3)
    hot = [p for p in found.transitions.points if p.corner == "ff 125"]
    plain = next(p for p in hot if p.scheme == "header +0 V")
    plot.rail_collapse(plain, ax=panels[0, 0])
    plot.wake_up(plain, ax=panels[0, 1])
    plot.energy_saved(hot, ax=panels[0, 2])
    optimum = found.optima.answers[0]
    for ax, corner in zip(panels[1], ("ss -40", "tt 25", "ff 125"), strict=True):
        plot.leakage_by_setting(optimum, corner, ax=ax)
    for ax in panels[1, :-1]:
        ax.get_legend().remove()  # the last has every mechanism
    plot.pareto_front(found.choices.answers[0], ax=panels[2, 0])
    kept = next(r for r in found.keep.retentions if r.corner == "tt 25")
    plot.butterfly(kept.decides.butterfly, f"{kept.cell} at its lowest rail, {kept.corner}", ax=panels[2, 1])
    plot.row_droop(found.row, SWITCHES, ax=panels[2, 2])
    figure.suptitle(found.awake.title, fontweight="bold")
    return figure
