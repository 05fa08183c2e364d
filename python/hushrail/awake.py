"""Awake: what a switch costs while its domain works, and the lowest rail on which cells keep their state.

:func:`domains` answers for a study: droop where switch and load agree, on-resistance, smallest switch, noise
margins and delay penalty on the drooped rails. :func:`keep` finds the span between the rails that stored
values survive, :func:`margins` the noise margins between two cells. :func:`figure`, :func:`droop` and
:func:`row` ask the same of single switches and rails. Pictures are in :mod:`hushrail.plot`.

Currents are A, voltages V, lengths m; temperatures are °C. The switch's well bias holds awake as the scheme
states it.
"""

from __future__ import annotations

import os
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import asdict, dataclass
from typing import TYPE_CHECKING, Any, Literal

import numpy as np
from numpy.typing import ArrayLike

from hushrail import _core, records
from hushrail.errors import RangeError
from hushrail.results import Corner, Failure, Note

if TYPE_CHECKING:
    import pandas as pd

    from hushrail.device import Process
    from hushrail.study import Progress, StrPath

__all__ = [
    "CellAwake",
    "ClampLevel",
    "CornerMargins",
    "DelayPenalty",
    "Density",
    "Droop",
    "Hold",
    "Kept",
    "Load",
    "Margins",
    "MeritPoint",
    "Mismatch",
    "Point",
    "Report",
    "Retention",
    "RowDroop",
    "Switch",
    "domains",
    "droop",
    "figure",
    "keep",
    "margins",
    "row",
]


@dataclass(frozen=True)
class Load:
    """How a load answers to its rail. Made by the class methods; currents are at full rail, A."""

    form: Mapping[str, Any]

    @classmethod
    def constant(cls, current_a: float) -> Load:
        """Draw the same current at every rail."""
        return cls({"law": "constant", "current_a": float(current_a)})

    @classmethod
    def proportional(cls, current_a: float) -> Load:
        """Draw in proportion to the rail: a fixed charge per volt and cycle, ``I = C V f``."""
        return cls({"law": "proportional", "current_a": float(current_a)})

    @classmethod
    def alpha_power(cls, current_a: float, threshold_v: float, alpha: float) -> Load:
        """Draw ``I0 ((V - Vt)/(VDD - Vt))**alpha``: clocked as fast as the gates go.

        Alpha-power law: Sakurai and Newton, JSSC 25(2) (1990) 584 (from memory).
        """
        numbers = {"current_a": current_a, "threshold_v": threshold_v, "alpha": alpha}
        return cls({"law": "alpha_power"} | {k: float(v) for k, v in numbers.items()})

    @classmethod
    def table(cls, rail_v: ArrayLike, current_a: ArrayLike) -> Load:
        """Draw what a table says: straight lines between points, rail voltages rising."""
        return cls({"law": "table", "rail_v": _list(rail_v), "current_a": _list(current_a)})

    @classmethod
    def profile(cls, time_s: ArrayLike, current_a: ArrayLike) -> Load:
        """Draw a measured current over time, each sample held until the next, s and A."""
        return cls({"law": "profile", "time_s": _list(time_s), "current_a": _list(current_a)})


@dataclass(frozen=True)
class Switch:
    """A switch, as schemes of a study state it."""

    model: str
    width_m: float
    length_m: float
    finger_width_m: float | None = None
    overdrive_v: float = 0.0
    boost_v: float = 0.0
    well_bias_v: float = 0.0
    awake_well_bias_v: float | None = None
    diffusion_m: float | None = None
    edge_m: float | None = None


@dataclass(frozen=True)
class Density:
    """Layout density of switch cells; every number is the caller's."""

    m2_per_m: float
    """Area of each metre of width, m²."""
    row_overhead_m2: float
    """Fixed area of each cell row that holds switches, m²."""
    width_per_row_m: float
    """Width that fits into a row, m."""


@dataclass(frozen=True)
class Droop:
    """Where switch and load agree."""

    droop_v: float
    current_a: float
    unanswered_v: float | None
    """Droop were the load to draw its full-rail current; None where the switch cannot carry it."""
    average_v: float | None
    """Time average over a profile."""


@dataclass(frozen=True)
class OnPoint:
    """A switch awake: voltage across it, current, chord and slope resistance."""

    droop_v: float
    current_a: float
    chord_ohm: float
    slope_ohm: float | None


@dataclass(frozen=True)
class SwitchAwake:
    """One switch of a domain awake."""

    on: OnPoint
    off_a: float
    merit_v: float
    """Chord resistance times off current, V."""
    body_v: float


@dataclass(frozen=True)
class Coupled:
    """What a neighbour's current step couples in, V."""

    before_v: float
    after_v: float
    noise_v: float


@dataclass(frozen=True)
class DelayPenalty:
    """Delay over delay at full rails, less one, of one edge."""

    cell: str
    edge: str
    inputs: str
    penalty: float
    full_a: float
    drooped_a: float


@dataclass(frozen=True)
class CellAwake:
    """One cell on the drooped rails; margins are None where it stores or restores nothing."""

    cell: str
    nml_v: float | None
    nmh_v: float | None
    square_v: float | None
    full_square_v: float | None
    delays: tuple[DelayPenalty, ...]


@dataclass(frozen=True)
class Point:
    """A domain awake behind a scheme's switches at a corner."""

    domain: str
    scheme: str
    corner: str
    droop: Droop
    virtual_supply_v: float
    virtual_ground_v: float
    header: SwitchAwake | None
    footer: SwitchAwake | None
    neighbour: Coupled | None
    cells: tuple[CellAwake, ...]


@dataclass(frozen=True)
class CornerNeed:
    """Fingers that one corner needs, and its droop with the width chosen."""

    corner: str
    fingers: float
    droop_v: float


@dataclass(frozen=True)
class Sized:
    """The smallest switch for the budget."""

    width_m: float
    fingers: float
    corner: str
    """The corner that decides."""
    corners: tuple[CornerNeed, ...]
    area_m2: float | None
    rows: float | None


@dataclass(frozen=True)
class SizePoint:
    """The smallest switch of a domain and scheme over all corners."""

    domain: str
    scheme: str
    side: str
    """``header`` or ``footer``."""
    size: Sized


@dataclass(frozen=True)
class Report:
    """What :func:`domains` found."""

    title: str
    corners: tuple[Corner, ...]
    points: tuple[Point, ...]
    sizes: tuple[SizePoint, ...]
    failures: tuple[Failure, ...]
    notes: tuple[Note, ...]
    stopped: bool

    def __iter__(self) -> Iterator[Point]:
        """Points in order."""
        return iter(self.points)

    def worst(self, domain: str, scheme: str) -> Point:
        """Give the point of the largest droop of a domain under a scheme."""
        own = [p for p in self.points if (p.domain, p.scheme) == (domain, scheme)]
        if not own:
            raise RangeError(f"no point of domain `{domain}` under scheme `{scheme}`; see `failures`")
        return max(own, key=lambda p: p.droop.droop_v)

    def to_json(self, indent: int | None = None) -> str:
        """Write as JSON text."""
        return records.to_text(self, indent)

    def flat(self) -> Iterator[dict[str, Any]]:
        """Give one flat row for each point, SI."""
        return map(_flat, self.points)

    def to_pandas(self) -> pd.DataFrame:
        """One row for each point, SI units in the column names."""
        import pandas as pd

        return pd.DataFrame(list(self.flat()))


def _flat(p: Point) -> dict[str, Any]:
    row: dict[str, Any] = {"domain": p.domain, "scheme": p.scheme, "corner": p.corner}
    row |= {"droop_v": p.droop.droop_v, "current_a": p.droop.current_a}
    row |= {"virtual_supply_v": p.virtual_supply_v, "virtual_ground_v": p.virtual_ground_v}
    for name, each in (("header", p.header), ("footer", p.footer)):
        row[f"{name}_chord_ohm"] = None if each is None else each.on.chord_ohm
        row[f"{name}_off_a"] = None if each is None else each.off_a
    return row


@dataclass(frozen=True)
class MeritPoint:
    """On-resistance and off current of one candidate at one overdrive and boost."""

    candidate: int
    overdrive_v: float
    boost_v: float
    on_ohm: float
    off_a: float
    merit_v: float
    oxide_v: float


@dataclass(frozen=True)
class CurvePoint:
    """A point of a transfer curve."""

    in_v: float
    out_v: float
    slope: float


@dataclass(frozen=True)
class Curve:
    """A falling transfer curve."""

    points: tuple[CurvePoint, ...]

    @property
    def in_v(self) -> np.ndarray[Any, np.dtype[np.float64]]:
        """Inputs, V."""
        return np.array([p.in_v for p in self.points])

    @property
    def out_v(self) -> np.ndarray[Any, np.dtype[np.float64]]:
        """Outputs, V."""
        return np.array([p.out_v for p in self.points])


@dataclass(frozen=True)
class Square:
    """A largest square: side and lower left corner, V."""

    side_v: float
    x_v: float
    y_v: float


@dataclass(frozen=True)
class Butterfly:
    """Two curves over each other, ``y = first(x)`` and ``x = second(y)``, with the squares of both lobes.

    Method of maximum squares: Seevinck, List and Lohstroh, JSSC 22(5) (1987) 748 (from memory).
    """

    first: Curve
    second: Curve
    squares: tuple[Square, ...] | None
    """None where the curves cross once: nothing is held."""


@dataclass(frozen=True)
class UnityGain:
    """Where the gain is one, V."""

    vil_v: float
    vih_v: float
    vol_v: float
    voh_v: float
    nml_v: float
    nmh_v: float


@dataclass(frozen=True)
class PathMargin:
    """One transfer curve of a cell."""

    cell: str
    input: str
    output: str
    others: str
    inverts: bool
    unity: UnityGain | None


@dataclass(frozen=True)
class PairMargin:
    """Largest squares of the worst pair of curves."""

    margin_v: float
    first: str
    second: str
    butterfly: Butterfly


@dataclass(frozen=True)
class Margins:
    """Static noise margins, worst over the values of the other inputs."""

    paths: tuple[PathMargin, ...]
    nml_v: float | None
    nmh_v: float | None
    square: PairMargin | None


@dataclass(frozen=True)
class CornerMargins:
    """Margins at a corner."""

    corner: str
    margins: Margins


@dataclass(frozen=True)
class Mismatch:
    """Local mismatch of thresholds, ``sigma = A/sqrt(W L)`` of a single device, V·m (1 mV·µm = 1e-9 V·m).

    Pelgrom, Duinmaijer and Welbers, JSSC 24 (1989) 1433 (from memory). Constants of the difference of a pair
    are √2 larger.
    """

    n_v_m: float
    p_v_m: float


@dataclass(frozen=True)
class Hold:
    """Hold margin of a loop: the smaller of both lobes, V."""

    inputs: str
    nets: tuple[str, ...]
    margin_v: float
    lobes_v: tuple[float, ...]
    sigma_v: tuple[float, ...] | None
    butterfly: Butterfly


@dataclass(frozen=True)
class Retention:
    """The lowest span between the rails that keeps a cell's state at a corner, V."""

    cell: str
    corner: str
    retention_v: float
    decides: Hold
    z_score: float | None


@dataclass(frozen=True)
class ClampLevel:
    """The span a clamp must leave at a corner, and what the domain draws there."""

    corner: str
    span_v: float
    rail_v: float
    cell: str
    leak_a: float | None
    full_leak_a: float | None


@dataclass(frozen=True)
class Kept:
    """What :func:`keep` found; ``failures`` names cells (as domain) and corners without answer."""

    retentions: tuple[Retention, ...]
    levels: tuple[ClampLevel, ...]
    failures: tuple[Failure, ...]
    stopped: bool

    def to_json(self, indent: int | None = None) -> str:
        """Write as JSON text."""
        return records.to_text(self, indent)

    def flat(self) -> Iterator[dict[str, Any]]:
        """Give one flat row for each cell and corner, SI."""
        columns = ("cell", "corner", "retention_v", "z_score")
        for r in self.retentions:
            yield {c: getattr(r, c) for c in columns}

    def to_pandas(self) -> pd.DataFrame:
        """One row for each cell and corner."""
        import pandas as pd

        return pd.DataFrame(list(self.flat()))


@dataclass(frozen=True)
class RowDroop:
    """Local droop of every node of a rail, V, and the worst."""

    droop_v: tuple[float, ...]
    worst_v: float
    worst_node: int
    tie_a: tuple[float, ...]
    load_a: float
    steps: int
    residual: float


@dataclass(frozen=True)
class _Figure:
    points: tuple[MeritPoint, ...]


@dataclass(frozen=True)
class _Corners:
    corners: tuple[CornerMargins, ...]


def domains(
    study: StrPath,
    loads: Mapping[str, Load],
    *,
    neighbour_a: float | None = None,
    budget_v: float | None = None,
    widest: float = 1000.0,
    density: Density | None = None,
    cells: Sequence[str] | str = (),
    swing: Literal["local", "full"] = "local",
    progress: Progress | None = None,
) -> Report:
    """Ask what the switches of a study's schemes cost while its domains work.

    Parameters
    ----------
    study : path
        The study; every scheme with a switch is taken at every corner.
    loads : mapping of str to Load
        What each domain draws; domains without a load are left out.
    neighbour_a : float, optional
        Current step of a neighbour on the same virtual rail, A; its noise is what follows at once, without
        decoupling charge.
    budget_v : float, optional
        Droop to size the switches for, V.
    widest : float
        Largest width tried when sizing, as a multiple of the scheme's.
    density : Density, optional
        Turns widths into areas.
    cells : str or sequence of str
        Cells whose noise margins and delay penalties are wanted, ``*`` for any run of characters.
    swing : {"local", "full"}
        Whether an output swings over the drooped rails or over the full supply; penalties differ by a factor
        of two and more.
    progress : callable, optional
        Called with points done and points in all.

    Returns
    -------
    Report
        Loads that a switch does not carry, and budgets that no width meets, stand in ``failures``.

    Raises
    ------
    ReadError
        A file that cannot be used, or a domain or cell that does not exist.
    RangeError
        A request that cannot be.
    """
    request = {
        "loads": {name: dict(load.form) for name, load in loads.items()},
        "neighbour_a": neighbour_a,
        "budget_v": budget_v,
        "widest": widest,
        "density": None if density is None else asdict(density),
        "cells": _names(cells),
        "swing": swing,
    }
    text = _core.awake_domains(os.fspath(study), records.to_request(request), progress=progress)
    return records.from_text(Report, text, "awake")


def keep(
    study: StrPath,
    cells: Sequence[str] | str,
    *,
    inputs: Mapping[str, bool] | None = None,
    side: Literal["header", "footer"] = "header",
    nwell: Literal["real", "virtual"] = "real",
    pwell: Literal["real", "virtual"] = "real",
    margin_v: float = 0.0,
    mismatch: Mismatch | None = None,
    bits: float = 1.0,
    failing: float = 0.001,
    domain: str | None = None,
    progress: Progress | None = None,
) -> Kept:
    """Find the lowest span between the rails on which cells keep what they store, at every corner.

    Parameters
    ----------
    study : path
        The study.
    cells : str or sequence of str
        Cells that store, ``*`` for any run of characters.
    inputs : mapping of str to bool, optional
        Inputs that are known, such as a clock that stands low; every vector of the others is tried.
    side : {"header", "footer"}
        Whether the supply falls or the ground rises.
    nwell, pwell : {"real", "virtual"}
        Rail the wells are tied to.
    margin_v : float
        Side of the largest square that must be left, V.
    mismatch : Mismatch, optional
        Local mismatch; taken to first order through the exact slopes of the margin to every threshold.
    bits, failing : float
        How many cells must hold, and how many of them may fail on average, with mismatch.
    domain : str, optional
        Domain whose leakage at the span is wanted.
    progress : callable, optional
        Called with points done and points in all.

    Returns
    -------
    Kept
        Cells that never hold, and cells that store nothing, stand in ``failures``.
    """
    population = None
    if mismatch is not None:
        population = {"mismatch": asdict(mismatch), "bits": float(bits), "failing": float(failing)}
    request = {
        "cells": _names(cells),
        "inputs": dict(inputs or {}),
        "collapse": {"side": side, "nwell": nwell, "pwell": pwell},
        "need": {"margin_v": margin_v, "population": population},
        "domain": domain,
    }
    text = _core.awake_keep(os.fspath(study), records.to_request(request), progress=progress)
    return records.from_text(Kept, text, "awake")


def margins(
    study: StrPath,
    driver: str,
    receiver: str | None = None,
    *,
    driver_droop_v: tuple[float, float] = (0.0, 0.0),
    receiver_droop_v: tuple[float, float] = (0.0, 0.0),
    corners: Sequence[str] | str = (),
    progress: Progress | None = None,
) -> tuple[CornerMargins, ...]:
    """Solve the transfer curves of two cells and give their static noise margins.

    Parameters
    ----------
    study : path
        The study.
    driver, receiver : str
        Names of the cells; the driver meets itself when no receiver is named.
    driver_droop_v, receiver_droop_v : tuple of float
        Voltage lost at supply and ground of each, V; wells stay at the full rails.
    corners : str or sequence of str
        Names of corners; all when empty.
    progress : callable, optional
        Called with corners done and corners in all.
    """
    request = {
        "driver": driver,
        "receiver": receiver,
        "driver_droop_v": list(driver_droop_v),
        "receiver_droop_v": list(receiver_droop_v),
        "corners": _names(corners),
    }
    text = _core.awake_margins(os.fspath(study), records.to_request(request), progress=progress)
    return records.from_text(_Corners, f'{{"corners": {text}}}', "awake").corners


def figure(
    process: Process,
    switches: Sequence[Switch],
    *,
    overdrive_v: ArrayLike,
    boost_v: ArrayLike = (0.0,),
    droop_v: float = 0.01,
    vdd_v: float,
    temp_c: float = 25.0,
    header: bool | Sequence[bool] | None = None,
) -> tuple[MeritPoint, ...]:
    """Give on-resistance times off current of switches over overdrive and boost.

    Parameters
    ----------
    process : Process
        The cards.
    switches : sequence of Switch
        The candidates; their own overdrive and boost are replaced.
    overdrive_v, boost_v : array_like
        Grid, V: how far past its off rail the gate is driven asleep, and past its on rail awake.
    droop_v : float
        Voltage across the switch at which its resistance is taken (chord), V.
    vdd_v : float
        Supply, V.
    temp_c : float
        Temperature, °C.
    header : bool or sequence of bool, optional
        Whether a switch stands on the supply; p-channel ones do when left out.

    Returns
    -------
    tuple of MeritPoint
        Candidates, then overdrives, then boosts.
    """
    request = {
        "candidates": [
            _placed(process, s, temp_c, h) for s, h in zip(switches, _sides(header, switches), strict=True)
        ],
        "overdrive_v": _list(overdrive_v),
        "boost_v": _list(boost_v),
        "droop_v": droop_v,
        "vdd_v": vdd_v,
        "temp_c": temp_c,
    }
    text = _core.awake_figure(process._core, records.to_request(request))
    return records.from_text(_Figure, f'{{"points": {text}}}', "awake").points


def droop(load: Load, *, vdd_v: float, ohm: float) -> Droop:
    """Find where a load behind a resistance comes to rest.

    Parameters
    ----------
    load : Load
        The load.
    vdd_v : float
        Supply, V.
    ohm : float
        Resistance, ohm.

    Raises
    ------
    SolveError
        No droop at which the resistance carries the load; the message says what is missing.

    Examples
    --------
    >>> d = droop(Load.alpha_power(0.1, threshold_v=0.3, alpha=1.3), vdd_v=1.0, ohm=0.5)
    >>> round(1e3 * d.droop_v, 3)
    45.79
    """
    return records.from_text(
        Droop, _core.awake_droop(records.to_request(dict(load.form)), vdd_v, ohm), "awake"
    )


def row(
    loads: Sequence[Load],
    switch_nodes: Sequence[int],
    *,
    vdd_v: float,
    segment_ohm: float,
    across_ohm: float | None = None,
    rows: int = 1,
    ohm: float | None = None,
    switch: Switch | None = None,
    process: Process | None = None,
    temp_c: float = 25.0,
    header: bool | None = None,
) -> RowDroop:
    """Solve the local droop along a rail with switches at some of its nodes.

    Parameters
    ----------
    loads : sequence of Load
        One for each node; nodes are numbered along rows.
    switch_nodes : sequence of int
        Nodes with a switch.
    vdd_v : float
        Supply, V.
    segment_ohm, across_ohm : float
        Resistance of the rail between neighbours of a row, and between rows, ohm.
    rows : int
        Number of rows; one is a ladder.
    ohm : float, optional
        Resistance of each switch; otherwise `switch` and `process` give its device.
    switch, process, temp_c, header
        The switch at every switch node, its cards, temperature (°C) and whether it stands on the supply.
    """
    if rows < 1 or len(loads) == 0 or len(loads) % rows:
        raise RangeError(f"{len(loads)} loads over {rows} rows; want as many in every row")
    placed = None
    if switch is not None and process is not None:
        placed = _placed(process, switch, temp_c, header)
    request = {
        "columns": len(loads) // rows,
        "rows": rows,
        "along_ohm": segment_ohm,
        "across_ohm": segment_ohm if across_ohm is None else across_ohm,
        "vdd_v": vdd_v,
        "nodes": [int(n) for n in switch_nodes],
        "ohm": ohm,
        "switch": placed,
        "temp_c": temp_c,
        "loads": [dict(load.form) for load in loads],
    }
    text = _core.awake_rail(records.to_request(request), None if process is None else process._core)
    return records.from_text(RowDroop, text, "awake")


def _placed(process: Process, switch: Switch, temp_c: float, header: bool | None) -> dict[str, Any]:
    if header is None:
        finger = switch.width_m if switch.finger_width_m is None else switch.finger_width_m
        device = process.transistor(switch.model, w=finger, l=switch.length_m, temp_c=temp_c)
        header = device.polarity == "p"
    return {"switch": asdict(switch), "header": header}


def _sides(header: bool | Sequence[bool] | None, switches: Sequence[Switch]) -> list[bool | None]:
    if header is None or isinstance(header, bool):
        return [header] * len(switches)
    if len(header) != len(switches):
        raise RangeError(f"{len(header)} sides for {len(switches)} switches; want as many")
    return list(header)


def _names(names: Sequence[str] | str) -> list[str]:
    return [names] if isinstance(names, str) else list(names)


def _list(values: ArrayLike) -> list[float]:
    return [float(v) for v in np.asarray(values, dtype=float).reshape(-1)]
