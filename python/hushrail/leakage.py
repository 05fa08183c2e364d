"""Leakage tables, comparisons with published ones, and instance counts."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Literal

from hushrail import records
from hushrail.errors import RangeError, SolveError
from hushrail.results import MECHANISMS, ByMechanism, Failure, Note, remarks

if TYPE_CHECKING:
    import pandas as pd
    import xarray as xr

__all__ = [
    "Compared",
    "ComparedRow",
    "Comparison",
    "CornerStatistics",
    "Counts",
    "LeakageRow",
    "LeakageTable",
    "Suspect",
    "Unmatched",
]


@dataclass(frozen=True)
class LeakageRow:
    """One state of one cell at one corner.

    ``power_w`` is drawn from supply, n-well and inputs at one, W; ``mechanisms`` splits it, over the supply
    voltage, A; ``ports`` holds the current into each port but outputs, A. ``stable`` says whether the cell
    stays in the state.
    """

    cell: str
    corner: str
    state: str
    power_w: float
    ports: Mapping[str, float]
    mechanisms: ByMechanism
    stable: bool


@dataclass(frozen=True)
class LeakageTable:
    """Cells, then corners, then states. A cell that failed at a corner is in ``failures``, without rows."""

    rows: tuple[LeakageRow, ...]
    failures: tuple[Failure, ...]
    notes: tuple[Note, ...]
    stopped: bool

    @classmethod
    def from_json(cls, text: str, name: str = "leakage table") -> LeakageTable:
        """Read what :meth:`to_json` wrote; ``name`` stands for it in messages."""
        return records.from_text(cls, text, name)

    def to_json(self, indent: int | None = None) -> str:
        """Write as JSON text; :meth:`from_json` gives an equal table back."""
        return records.to_text(self, indent)

    @property
    def cells(self) -> tuple[str, ...]:
        """Cells with rows, in order."""
        return tuple(dict.fromkeys(row.cell for row in self.rows))

    @property
    def corners(self) -> tuple[str, ...]:
        """Corners with rows, in order."""
        return tuple(dict.fromkeys(row.corner for row in self.rows))

    def flat(self, of: Literal["states", "ports"] = "states") -> Iterator[dict[str, Any]]:
        """Give flat rows, W and A: one for each state, by mechanism, or one for each port of each state."""
        for row in self.rows:
            names = {"cell": row.cell, "corner": row.corner, "state": row.state}
            if of == "states":
                shares = {f"{name}_a": x for name, x in row.mechanisms._asdict().items()}
                yield {**names, "power_w": row.power_w, **shares, "stable": row.stable}
            elif of == "ports":
                for port, x in row.ports.items():
                    yield {**names, "port": port, "current_a": x}
            else:
                raise RangeError(f"rows of `{of}` do not exist; want states or ports")

    def to_pandas(self, of: Literal["states", "ports"] = "states") -> pd.DataFrame:
        """Make a data frame of :meth:`flat`, with its columns and units."""
        import pandas as pd

        frame = pd.DataFrame(list(self.flat(of)))
        frame.attrs["remarks"] = remarks(self.notes)
        return frame

    def to_xarray(self, *, fill: float | None = None) -> xr.Dataset:
        """Make a labelled array set over row (a state of a cell) and corner.

        Parameters
        ----------
        fill : float, optional
            What stands where a cell failed at a corner, such as NaN. Without it that is an error.

        Returns
        -------
        xarray.Dataset
            ``power_w`` of shape (R, C) in W and ``by_mechanism_a`` of shape (R, C, 5) in A; ``cell`` and
            ``state`` of shape (R,) say what a row is.
        """
        import numpy as np
        import xarray as xr

        if fill is None and self.failures:
            f = self.failures[0]
            text = f"{f.domain} / {f.corner}: {f.reason} (give `fill` to have the other points)"
            raise SolveError(text)
        states = list(dict.fromkeys((row.cell, row.state) for row in self.rows))
        corners = self.corners
        at_state = {name: i for i, name in enumerate(states)}
        at_corner = {name: i for i, name in enumerate(corners)}
        empty = np.nan if fill is None else fill
        power = np.full((len(states), len(corners)), empty)
        shares = np.full((*power.shape, len(MECHANISMS)), empty)
        for row in self.rows:
            at = at_state[row.cell, row.state], at_corner[row.corner]
            power[at] = row.power_w
            shares[at] = row.mechanisms
        return xr.Dataset(
            {
                "power_w": (("row", "corner"), power),
                "by_mechanism_a": (("row", "corner", "mechanism"), shares),
            },
            coords={
                "cell": ("row", [cell for cell, _ in states]),
                "state": ("row", [state for _, state in states]),
                "corner": list(corners),
                "mechanism": list(MECHANISMS),
            },
            attrs={"remarks": remarks(self.notes)},
        )


@dataclass(frozen=True)
class CornerStatistics:
    """How the predictions of one corner stand to the published values.

    Ratios are predicted over published; ``decades`` is the magnitude of the ratio's logarithm to base 10;
    ``within`` are shares of rows.
    """

    corner: str
    states: int
    median_ratio: float
    median_decades: float
    p90_decades: float
    worst_decades: float
    within_0p3_percent: float
    within_1_percent: float
    within_2_percent: float
    within_5_percent: float


@dataclass(frozen=True)
class ComparedRow:
    """A published row and its prediction, nW; ``states`` is the number of states averaged."""

    cell: str
    corner: str
    when: str
    published_nw: float
    predicted_nw: float
    states: int

    @property
    def ratio(self) -> float:
        """Predicted over published; infinite when nothing was published."""
        return self.predicted_nw / self.published_nw if self.published_nw != 0.0 else float("inf")


@dataclass(frozen=True)
class Unmatched:
    """A published row without prediction, and why."""

    cell: str
    corner: str
    when: str
    reason: str


@dataclass(frozen=True)
class Suspect:
    """A published row that contradicts other rows or the prediction; ``severity`` is in decades."""

    cell: str
    corner: str
    when: str
    published_nw: float
    severity: float
    reasons: tuple[str, ...]
    contradicts_table: bool


@dataclass(frozen=True)
class Compared:
    """Rows with and without prediction."""

    rows: tuple[ComparedRow, ...]
    unmatched: tuple[Unmatched, ...]
    notes: tuple[Note, ...] = ()


@dataclass(frozen=True)
class Comparison:
    """Predictions held against a published table.

    ``suspects`` are rows of the table that contradict others or the prediction, worst first; ``cells_lost``
    says why a cell could not be read.
    """

    statistics: tuple[CornerStatistics, ...]
    compared: Compared
    suspects: tuple[Suspect, ...]
    cells_lost: Mapping[str, str]

    @classmethod
    def from_json(cls, text: str, name: str = "comparison") -> Comparison:
        """Read what :meth:`to_json` wrote; ``name`` stands for it in messages."""
        return records.from_text(cls, text, name)

    def to_json(self, indent: int | None = None) -> str:
        """Write as JSON text; :meth:`from_json` gives an equal comparison back."""
        return records.to_text(self, indent)

    def worst(self, n: int = 10) -> tuple[ComparedRow, ...]:
        """Give the n rows whose ratio is furthest from one, furthest first."""

        def far(row: ComparedRow) -> float:
            ratio = row.ratio
            return max(ratio, 1.0 / ratio) if ratio > 0.0 else float("inf")

        return tuple(sorted(self.compared.rows, key=far, reverse=True)[:n])

    def flat(self) -> Iterator[dict[str, Any]]:
        """Give one flat row for each compared row; nW."""
        for row in self.compared.rows:
            yield {
                "cell": row.cell,
                "corner": row.corner,
                "when": row.when,
                "published_nw": row.published_nw,
                "predicted_nw": row.predicted_nw,
                "ratio": row.ratio,
                "states": row.states,
            }

    def to_pandas(self) -> pd.DataFrame:
        """Make a data frame of :meth:`flat`."""
        import pandas as pd

        frame = pd.DataFrame(list(self.flat()))
        frame.attrs["remarks"] = remarks(self.compared.notes)
        return frame


@dataclass(frozen=True)
class Counts:
    """Instances by master, in the order the netlist first names them."""

    top: str
    path: str
    counts: Mapping[str, int]

    @property
    def instances(self) -> int:
        """Instances in all."""
        return sum(self.counts.values())

    @classmethod
    def from_json(cls, text: str, name: str = "counts") -> Counts:
        """Read what :meth:`to_json` wrote; ``name`` stands for it in messages."""
        return records.from_text(cls, text, name)

    def to_json(self, indent: int | None = None) -> str:
        """Write as JSON text; :meth:`from_json` gives equal counts back."""
        return records.to_text(self, indent)

    def flat(self) -> Iterator[dict[str, Any]]:
        """Give one flat row for each master, in the form a study takes as ``counts``."""
        for master, n in self.counts.items():
            yield {"cell": master, "count": n}

    def to_pandas(self) -> pd.DataFrame:
        """Make a data frame of :meth:`flat`."""
        import pandas as pd

        return pd.DataFrame(list(self.flat()))
