"""Optima of overdrive, well bias, width and held levels, and the choice among whole schemes under limits.

The objective is the power of all supplies asleep; what makes a voltage (quiescent current and efficiency of
the pump, level shifter, bias generator) is in it, as the scheme of the study states it.

Sources. At the optimum overdrive the slopes of subthreshold current and of GIDL cancel, not the currents
(derived; the scheme after Kawaguchi, Nose and Sakurai, JSSC 35 (2000) 1498, from memory). Well bias after
Keshavarzi et al., ISLPED 1999 (from memory).
"""

from __future__ import annotations

import os
from collections.abc import Mapping, Sequence
from dataclasses import asdict, dataclass
from typing import TYPE_CHECKING, Literal

from hushrail import _core, records
from hushrail.awake import Density
from hushrail.errors import RangeError
from hushrail.results import Corner, Note
from hushrail.transition import Rail, WakeSpec, wake_request

if TYPE_CHECKING:
    from hushrail.awake import Load
    from hushrail.study import Progress, StrPath

__all__ = [
    "Binding",
    "Candidate",
    "Choice",
    "Chosen",
    "Compromise",
    "CornerOptimum",
    "Density",
    "FrontPoint",
    "Infeasible",
    "Kept",
    "Knob",
    "LimitCount",
    "Limits",
    "Optimum",
    "Paid",
    "Share",
    "Swept",
    "choose",
    "optimum",
]

Knob = Literal[
    "header_overdrive",
    "footer_overdrive",
    "header_boost",
    "footer_boost",
    "header_well_bias",
    "footer_well_bias",
    "header_width",
    "footer_width",
    "header_length",
    "footer_length",
    "nwell_bias",
    "pwell_bias",
    "held_supply",
    "held_ground",
    "header_clamp_gate",
    "footer_clamp_gate",
]
"""A number of a scheme that may be turned; widths and lengths in m, everything else in V."""


@dataclass(frozen=True)
class Limits:
    """Limits of a choice; those left out do not bind. V, s, A, V/m, m², W.

    ``span_v`` is the smallest span left to the block asleep: what its cells need to keep state, with the
    margin wanted. ``retention_margin_v`` is the same above each corner's own retention voltage, zero or more.
    All others are upper limits. ``oxide_v`` and ``field_v_m`` (gate to drain or source) and ``drain_bulk_v``
    are those of the switches asleep, awake and, where the ``rail`` is given, on the way up.
    """

    droop_v: float | None = None
    wake_s: float | None = None
    in_rush_a: float | None = None
    oxide_v: float | None = None
    field_v_m: float | None = None
    drain_bulk_v: float | None = None
    area_m2: float | None = None
    span_v: float | None = None
    retention_margin_v: float | None = None
    standby_w: float | None = None


@dataclass(frozen=True)
class Share:
    """Power of one mechanism at an optimum, W, and its slope: W per V, or W per factor e of a size."""

    name: str
    power_w: float
    slope_w: float


@dataclass(frozen=True)
class Swept:
    """A point of the scan: setting, power of all supplies, and by mechanism with the overhead last, W."""

    value: float
    power_w: float
    by_w: tuple[float, ...]


@dataclass(frozen=True)
class CornerOptimum:
    """The optimum of one knob at one corner.

    ``standing`` is ``inside``, ``low_end``, ``high_end`` or ``no_gidl``; only the last has no ``value``: the
    card lacks what sets the optimum. ``slope`` and ``curvature`` are those of ln(power), per V (per factor e
    of a size). ``takes_over`` rises fastest beyond the optimum, ``gives_way`` falls fastest before it.
    """

    corner: str
    standing: str
    value: float | None
    power_w: float
    slope: float
    curvature: float
    shares: tuple[Share, ...]
    takes_over: str | None
    gives_way: str | None
    without_w: float | None
    span_v: float
    oxide_v: float
    curve_miss: float
    sweep: tuple[Swept, ...]
    notes: tuple[Note, ...]


@dataclass(frozen=True)
class Paid:
    """What a corner pays for the compromise: power with it and at its own optimum, W, and the loss."""

    corner: str
    power_w: float
    own_w: float
    own_value: float | None
    loss: float


@dataclass(frozen=True)
class Compromise:
    """One setting for all corners.

    ``objective`` is in W, or a factor when judged by loss. ``smooth`` is false where two corners hold each
    other (``deciding`` names them) or an end of the range was met.
    """

    knob: str
    value: float
    objective: float
    smooth: bool
    slope: float | None
    deciding: tuple[str, ...]
    corners: tuple[Paid, ...]
    optima: tuple[CornerOptimum, ...]


@dataclass(frozen=True)
class Optimum:
    """The optimum of a knob at every corner and over all of them."""

    domain: str
    scheme: str
    corners: tuple[Corner, ...]
    compromise: Compromise
    notes: tuple[Note, ...]

    def at(self, corner: str) -> CornerOptimum:
        """Give the optimum of one corner.

        Raises
        ------
        RangeError
            There is none.
        """
        for o in self.compromise.optima:
            if o.corner == corner:
                return o
        names = ", ".join(o.corner for o in self.compromise.optima)
        raise RangeError(f"no optimum at corner `{corner}`; want one of {names}")


@dataclass(frozen=True)
class Binding:
    """The limit nearest to a candidate; ``margin`` is relative to it and below zero when it is broken."""

    limit: str
    corner: str
    value: float
    allowed: float
    margin: float


@dataclass(frozen=True)
class Candidate:
    """Settings, power (W), area (m²), wake-up time (s), the corner that decides and the binding limit.

    ``wake_s`` is None without a ``rail``, and for candidates whose wake-up was not integrated.
    """

    values: tuple[float, ...]
    power_w: float
    area_m2: float | None
    wake_s: float | None
    corner: str
    binding: Binding | None


@dataclass(frozen=True)
class FrontPoint:
    """A point of the front; ``checked_w`` is the device solver's power at the deciding corner, W."""

    candidate: Candidate
    checked_w: float
    curve_miss: float


@dataclass(frozen=True)
class LimitCount:
    """How many candidates break a limit, and where the one that meets it best stands.

    Of ``untested`` candidates it is not known: they break another limit, and their wake-up (with a gate that
    slews or a package) was not integrated. ``best`` is the best of the others.
    """

    limit: str
    broken_by: int
    best: Binding | None
    untested: int = 0


@dataclass(frozen=True)
class Infeasible:
    """The candidate nearest to the limits, and in words which limit binds it and by how much."""

    nearest: Candidate
    reason: str


@dataclass(frozen=True)
class Chosen:
    """Front, feasible candidates in the order they were given, and the limits over all of them."""

    knobs: tuple[str, ...]
    corners: tuple[str, ...]
    objectives: tuple[str, ...]
    front: tuple[FrontPoint, ...]
    feasible: tuple[Candidate, ...]
    candidates: int
    failed: int
    limits: tuple[LimitCount, ...]
    infeasible: Infeasible | None
    notes: tuple[Note, ...]


@dataclass(frozen=True)
class Kept:
    """Lowest span between the rails that keeps every cell's state, V, and the cell that needs it."""

    corner: str
    cell: str
    retention_v: float


@dataclass(frozen=True)
class Choice:
    """A choice over the corners of a study; ``kept`` where retention voltages were computed."""

    domain: str
    scheme: str
    corners: tuple[Corner, ...]
    chosen: Chosen
    notes: tuple[Note, ...]
    kept: tuple[Kept, ...] = ()


def optimum(
    path: StrPath,
    knob: Knob,
    low: float,
    high: float,
    *,
    domain: str | None = None,
    scheme: str | None = None,
    corners: Sequence[str] = (),
    goal: Literal["worst", "mean", "loss"] = "worst",
    weights: Sequence[float] = (),
    progress: Progress | None = None,
) -> Optimum:
    """Find the optimum of a knob at every corner, and one setting for all of them.

    Parameters
    ----------
    path : path
        The study, a TOML file.
    knob : str
        What is turned.
    low, high : float
        Its range, V or m.
    domain, scheme : str, optional
        Which; the only one when left out.
    corners : sequence of str
        Which; all when empty.
    goal : str
        What the one setting is judged by: power of the ``worst`` corner, ``mean`` power, or the largest
        ``loss`` of any corner against its own optimum.
    weights : sequence of float
        Weights of the mean; all corners alike when empty.
    progress : callable, optional
        Called with corners done and corners in all.

    Raises
    ------
    FileNotFoundError, ReadError
        The study or a file it names.
    RangeError
        A range, name or weight that cannot be.
    SolveError
        A corner where the domain does not come to rest.
    """
    spec = {
        "at": {"domain": domain, "scheme": scheme, "corners": list(corners)},
        "range": {"knob": knob, "low": low, "high": high},
        "goal": _goal(goal, weights),
    }
    text = _core.optimum(os.fspath(path), records.to_request(spec), progress=progress)
    return records.from_text(Optimum, text, "optimum")


def choose(
    path: StrPath,
    knobs: Mapping[Knob, Sequence[float]],
    *,
    limits: Limits | None = None,
    candidates: Sequence[Sequence[float]] | None = None,
    load: Load | None = None,
    density: Density | None = None,
    rail: Rail | None = None,
    wake: WakeSpec | None = None,
    retention_v: Mapping[str, float] | None = None,
    keep_margin_v: float = 0.0,
    keep_inputs: Mapping[str, bool] | None = None,
    domain: str | None = None,
    scheme: str | None = None,
    corners: Sequence[str] = (),
    goal: Literal["worst", "mean"] = "worst",
    weights: Sequence[float] = (),
    tolerance: float = 1e-3,
    progress: Progress | None = None,
) -> Choice:
    """Hold every combination of settings against limits at every corner, and give the Pareto front.

    The front is that of standby power, of area where a ``density`` is given and of wake-up time where the
    ``rail`` is given. Limits that no candidate meets leave it empty and ``infeasible`` says why.

    Parameters
    ----------
    path : path
        The study, a TOML file.
    knobs : mapping of str to sequence of float
        Free knobs and the settings to try, V or m.
    limits : Limits, optional
        What must be met at every corner.
    candidates : sequence of sequence of float, optional
        Candidates one by one, a setting for each knob, instead of all combinations.
    load : Load, optional
        The load awake; needed for a limit of droop.
    density : Density, optional
        Layout of the switches; needed for a limit of area.
    rail : Rail, optional
        Capacitance of the virtual rail; needed for limits of wake-up and in-rush.
    wake : WakeSpec, optional
        The wake-up; widths of its segments are scaled to each candidate's switch. With gates that jump and
        no package it is cheap and every candidate has one; otherwise it is integrated in time for the
        candidates that hold every other limit.
    retention_v : mapping of str to float, optional
        Retention voltage at every corner, V, for a limit of ``retention_margin_v``. Computed from the
        domain's cells that store, under the scheme's rails and wells, when left out.
    keep_margin_v : float
        Side of the square that must be left in the hold butterfly of those cells, V.
    keep_inputs : mapping of str to bool, optional
        Inputs that are known asleep, such as a clock that stands low; all vectors are tried for the others.
    domain, scheme, corners, goal, weights, progress
        As for :func:`optimum`; progress counts candidates times corners.
    tolerance : float
        Relative accuracy of the block's curves.

    Raises
    ------
    FileNotFoundError, ReadError
        The study or a file it names.
    RangeError
        A request that contradicts itself.
    SolveError
        A block without operating point.
    """
    spec = {
        "at": {"domain": domain, "scheme": scheme, "corners": list(corners)},
        "rail": None if rail is None else asdict(rail),
        "keep": {"need": {"margin_v": keep_margin_v}, "inputs": dict(keep_inputs or {})},
        "among": {
            "knobs": [{"knob": k, "values": [float(x) for x in v]} for k, v in knobs.items()],
            "candidates": None if candidates is None else [[float(x) for x in c] for c in candidates],
            "limits": asdict(limits or Limits()),
            "goal": _goal(goal, weights),
            "load": None if load is None else dict(load.form),
            "density": None if density is None else asdict(density),
            "wake": wake_request(wake or WakeSpec()),
            "retention_v": None if retention_v is None else {c: float(v) for c, v in retention_v.items()},
            "tolerance": tolerance,
        },
    }
    return records.from_text(
        Choice, _core.choose(os.fspath(path), records.to_request(spec), progress=progress), "choice"
    )


def _goal(goal: str, weights: Sequence[float]) -> object:
    if goal == "mean":
        return {"mean": [float(w) for w in weights]}
    if len(weights) > 0:
        raise RangeError(f"goal `{goal}` takes no weights; want `mean` with them")
    return goal
