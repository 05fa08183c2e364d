"""Liberty libraries: leakage by state, supply pins, what cells are for in power gating."""

from __future__ import annotations

import os
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

from hushrail import _core, records
from hushrail.errors import RangeError
from hushrail.leakage import LeakageTable
from hushrail.results import Corner, Note, remarks

if TYPE_CHECKING:
    import pandas as pd

__all__ = [
    "LeakageGroup",
    "Library",
    "LibraryCell",
    "Nominal",
    "PgPin",
    "Pin",
    "Storage",
    "Units",
    "read_liberty",
    "write_liberty",
]


@dataclass(frozen=True)
class Units:
    """W per unit of leakage and V per unit of voltage; None where the file does not say."""

    leakage_w: float | None = None
    voltage_v: float | None = None


@dataclass(frozen=True)
class Nominal:
    """Process factor, supply in V and temperature in degrees Celsius; None where not stated."""

    process: float | None = None
    voltage_v: float | None = None
    temp_c: float | None = None


@dataclass(frozen=True)
class LeakageGroup:
    """One leakage value in the library's unit.

    ``when`` is the condition as written, empty for every state that no other group has; ``supply`` is the
    supply pin it is drawn from, when one is named; ``line`` is zero when the group comes from no file.
    """

    when: str
    value: float
    supply: str | None = None
    line: int = 0


@dataclass(frozen=True)
class PgPin:
    """A supply or well pin; ``kind`` is its ``pg_type``."""

    kind: str
    voltage_name: str | None = None
    attributes: Mapping[str, str] = field(default_factory=dict)


@dataclass(frozen=True)
class Pin:
    """A signal pin; ``attributes`` say what it is for in power gating and clocking, as written."""

    direction: str
    function: str | None = None
    three_state: str | None = None
    related_power_pin: str | None = None
    related_ground_pin: str | None = None
    attributes: Mapping[str, str] = field(default_factory=dict)


@dataclass(frozen=True)
class Storage:
    """A group that keeps a value: ff, latch, ff_bank, latch_bank or statetable."""

    kind: str
    args: tuple[str, ...]
    attributes: Mapping[str, str]


@dataclass(frozen=True)
class LibraryCell:
    """A cell; values in the library's units."""

    area: float | None
    cell_leakage_power: float | None
    leakage: tuple[LeakageGroup, ...]
    pg_pins: Mapping[str, PgPin]
    pins: Mapping[str, Pin]
    storage: tuple[Storage, ...]
    attributes: Mapping[str, str]
    line: int


@dataclass(frozen=True)
class Library:
    """The cells of one corner; ``notes`` say what is missing, zero or contradictory in the file."""

    name: str
    path: str
    units: Units
    nominal: Nominal
    conditions: Mapping[str, Nominal]
    default_conditions: str | None
    voltage_map: Mapping[str, float]
    default_cell_leakage_power: float | None
    default_leakage_power_density: float | None
    cells: Mapping[str, LibraryCell]
    notes: tuple[Note, ...]

    @classmethod
    def from_json(cls, text: str, name: str = "library") -> Library:
        """Read what :meth:`to_json` wrote; ``name`` stands for it in messages."""
        return records.from_text(cls, text, name)

    def to_json(self, indent: int | None = None) -> str:
        """Write as JSON text; :meth:`from_json` gives an equal library back."""
        return records.to_text(self, indent)

    def to_liberty(self) -> str:
        """Write as Liberty text that :func:`read_liberty` reads back unchanged."""
        return _core.liberty_text(self.to_json())

    def flat(self) -> Iterator[dict[str, Any]]:
        """Give one flat row for each leakage group; ``power_w`` is None where the unit is not known."""
        unit_w = self.units.leakage_w
        for name, cell in self.cells.items():
            for group in cell.leakage:
                yield {
                    "library": self.name,
                    "cell": name,
                    "when": group.when,
                    "supply": group.supply,
                    "value": group.value,
                    "power_w": None if unit_w is None else group.value * unit_w,
                    "line": group.line,
                }

    def to_pandas(self) -> pd.DataFrame:
        """Make a data frame of :meth:`flat`."""
        import pandas as pd

        frame = pd.DataFrame(list(self.flat()))
        frame.attrs["remarks"] = remarks(self.notes)
        return frame


def read_liberty(
    path: str | os.PathLike[str],
    *,
    leakage_unit_w: float | None = None,
    vdd_v: float | None = None,
    temp_c: float | None = None,
) -> Library:
    """Read a Liberty library, or a fragment that holds cell groups only; plain or gzip.

    Parameters
    ----------
    path : path
        The file. Timing and power tables in it are passed over.
    leakage_unit_w, vdd_v, temp_c : float, optional
        W per unit of leakage, supply in V and temperature in degrees Celsius, for a file that does not say.

    Raises
    ------
    ReadError
        Text that does not follow the format, with file, line and column.
    """
    text = _core.read_liberty(os.fspath(path), leakage_unit_w=leakage_unit_w, vdd_v=vdd_v, temp_c=temp_c)
    return Library.from_json(text)


def write_liberty(
    table: LeakageTable,
    corner: Corner,
    path: str | os.PathLike[str] | None = None,
    *,
    name: str | None = None,
) -> Library:
    """Make a Liberty library of one corner of a leakage table, and write it to a file when one is named.

    Parameters
    ----------
    table : LeakageTable
        Predictions, from :func:`hushrail.cells`.
    corner : Corner
        The corner of the table to take, with its supply and temperature.
    path : path, optional
        File to write.
    name : str, optional
        Name of the library; that of the corner when left out.

    Returns
    -------
    Library
        In nW; ``notes`` name states that pins cannot tell apart.
    """
    if corner.name not in table.corners:
        raise RangeError(f"corner `{corner.name}` has no rows in the table; want {', '.join(table.corners)}")
    plain = records.to_text(corner)
    made = Library.from_json(_core.liberty_of_table(table.to_json(), plain, name or corner.name))
    if path is not None:
        Path(path).write_text(made.to_liberty(), encoding="utf-8")
    return made
