"""How standby currents answer to what makes their devices: exact slopes, not from differences."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from hushrail import records
from hushrail.results import Failure, Note, remarks

if TYPE_CHECKING:
    import pandas as pd

__all__ = ["KNOBS", "BlockSlopes", "CellSlopes", "LogSlopes", "SensitivityTable"]

KNOBS: tuple[str, ...] = ("threshold_v", "length_m", "width_m", "temperature_k", "oxide_m")
"""What devices are varied in, with its unit, in the order of every array."""


@dataclass(frozen=True)
class LogSlopes:
    """d ln I by knob, all transistors varied together: per V, m, m, K, m, and per V of the supply."""

    threshold_v: float
    length_m: float
    width_m: float
    temperature_k: float
    oxide_m: float
    supply_v: float


@dataclass(frozen=True)
class CellSlopes:
    """A state of a cell: current from supply, n-well and inputs at one, A, and its slopes."""

    cell: str
    corner: str
    state: str
    current_a: float
    slopes: LogSlopes


@dataclass(frozen=True)
class BlockSlopes:
    """The powered block of a domain: current from supply, n-well and inputs at one, A, and its slopes."""

    domain: str
    corner: str
    current_a: float
    slopes: LogSlopes


@dataclass(frozen=True)
class SensitivityTable:
    """Slopes of cells and blocks over the corners of a study; ``failures`` name a cell as domain."""

    cells: tuple[CellSlopes, ...]
    blocks: tuple[BlockSlopes, ...]
    failures: tuple[Failure, ...]
    notes: tuple[Note, ...]
    stopped: bool

    @classmethod
    def from_json(cls, text: str, name: str = "sensitivities") -> SensitivityTable:
        """Read what :meth:`to_json` wrote; ``name`` stands for it in messages."""
        return records.from_text(cls, text, name)

    def to_json(self, indent: int | None = None) -> str:
        """Write as JSON text; :meth:`from_json` gives an equal table back."""
        return records.to_text(self, indent)

    def flat(self) -> Iterator[dict[str, Any]]:
        """Give one flat row for each state of a cell and each block; current in A."""
        for row in self.cells:
            names = {"kind": "cell", "name": row.cell, "state": row.state, "corner": row.corner}
            yield {**names, "current_a": row.current_a, **_columns(row.slopes)}
        for block in self.blocks:
            names = {"kind": "block", "name": block.domain, "state": "", "corner": block.corner}
            yield {**names, "current_a": block.current_a, **_columns(block.slopes)}

    def to_pandas(self) -> pd.DataFrame:
        """Make a data frame of :meth:`flat`."""
        import pandas as pd

        frame = pd.DataFrame(list(self.flat()))
        frame.attrs["remarks"] = remarks(self.notes)
        return frame


def _columns(slopes: LogSlopes) -> dict[str, float]:
    return {f"dln_d_{name}": getattr(slopes, name) for name in (*KNOBS, "supply_v")}
