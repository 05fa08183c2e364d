"""What a study found: frozen dataclasses in the form of the core's JSON, and the ways out of them."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any, Literal, NamedTuple

from hushrail import records
from hushrail.errors import RangeError, ReadError, SolveError

if TYPE_CHECKING:
    import pandas as pd
    import xarray as xr

__all__ = [
    "MECHANISMS",
    "Block",
    "ByMechanism",
    "CellShare",
    "Certainty",
    "Corner",
    "Domain",
    "Estimate",
    "Failure",
    "Interval",
    "LimitCheck",
    "Note",
    "PathShare",
    "Point",
    "Rest",
    "Supply",
    "Uncovered",
]


class ByMechanism(NamedTuple):
    """Currents by mechanism, A."""

    channel: float
    gidl: float
    gate: float
    junction: float
    floor: float

    @property
    def total(self) -> float:
        """Sum of all, A."""
        return self.channel + self.gidl + self.gate + self.junction + self.floor


MECHANISMS: tuple[str, ...] = ByMechanism._fields
"""Names of the mechanisms, in the order of every array."""


@dataclass(frozen=True)
class Note:
    """A remark: a short stable code and a sentence."""

    code: str
    text: str


def remarks(notes: Sequence[Note]) -> list[str]:
    """Give notes as ``code: text``, each once, for the attributes of a data frame or data set."""
    return list(dict.fromkeys(f"{note.code}: {note.text}" for note in notes))


@dataclass(frozen=True)
class Failure:
    """A point that could not be computed, and why.

    In a leakage table ``domain`` is the cell. An empty scheme means every scheme.
    """

    domain: str
    scheme: str
    corner: str
    reason: str


@dataclass(frozen=True)
class Corner:
    """Process, supply (V) and temperature (°C) under one name."""

    name: str
    process: str
    vdd_v: float
    temp_c: float


@dataclass(frozen=True)
class Uncovered:
    """A master without transistor netlist, and what the study says about it.

    ``policy`` is ``"zero"`` or ``"liberty"``, or a mapping with one of the keys ``alias`` and ``current_a``.
    """

    master: str
    count: int
    policy: str | Mapping[str, str | float]


@dataclass(frozen=True)
class Certainty:
    """Instances by what their state rests on.

    Every pin known; some probable, from probabilities given; some assumed; and cells without a function.
    """

    known: int
    probable: int
    assumed: int
    opaque: int


@dataclass(frozen=True)
class Domain:
    """A domain: instances in all, those computed from transistors, and the rest.

    ``certainty`` tells how many are in known states, where the domain has a ``parked`` table.
    """

    name: str
    instances: int
    computed: int
    uncovered: tuple[Uncovered, ...]
    certainty: Certainty | None = None


@dataclass(frozen=True)
class Supply:
    """What one real supply delivers: V, A, W. Currents are positive out of the supply."""

    supply: str
    voltage_v: float
    current_a: float
    power_w: float


@dataclass(frozen=True)
class PathShare:
    """One way current takes out of the supplies, by mechanism, A."""

    path: str
    mechanism: str
    current_a: float


@dataclass(frozen=True)
class CellShare:
    """Current of all instances of one master from supply and n-well, A."""

    master: str
    count: int
    current_a: float


NOTHING = ByMechanism(0.0, 0.0, 0.0, 0.0, 0.0)
"""No current by any mechanism."""


@dataclass(frozen=True)
class Outside:
    """A bias that a model's card or table does not cover; voltages of an n-channel device, V.

    ``basis`` is ``card`` (largest voltages the card states) or ``points`` (of a table). ``refused`` results
    are errors; what stands in a result was asked for.
    """

    basis: str
    quantity: str
    value_v: float
    low_v: float
    high_v: float
    refused: bool


@dataclass(frozen=True)
class Block:
    """Currents of the block at the rest point, A, by mechanism, positive into the block.

    ``power_w`` is what each mechanism dissipates inside, W. ``real_supply`` and ``real_ground`` flow past
    any switch: cells that stay powered, rows with a real rail. ``inputs_high`` and ``inputs_low`` are the
    parts of ``supply`` and ``ground`` that enter through inputs.
    """

    supply: ByMechanism
    ground: ByMechanism
    nwell: ByMechanism
    pwell: ByMechanism
    power_w: ByMechanism
    given_a: float
    cells: tuple[CellShare, ...]
    states: int
    unstable: int
    steps: int
    fallbacks: int
    outside: Outside | None = None
    real_supply: ByMechanism = NOTHING
    real_ground: ByMechanism = NOTHING
    inputs_high: ByMechanism = NOTHING
    inputs_low: ByMechanism = NOTHING


@dataclass(frozen=True)
class Rest:
    """A domain at rest: where the virtual rails settle, and what the real supplies deliver there.

    ``mechanisms`` is the power that each mechanism dissipates over the supply voltage, A: together with the
    overhead it adds up to ``power_w`` over the supply. ``switch_mechanisms`` splits the current of the switch
    at its virtual rail (the header's where there are two), which holds the domain. ``overhead_w`` is what
    makes the scheme work: the stated overhead, and what the pump loses, W.
    """

    virtual_supply_v: float
    virtual_ground_v: float
    supplies: tuple[Supply, ...]
    current_a: float
    power_w: float
    mechanisms: ByMechanism
    switch_mechanisms: ByMechanism
    paths: tuple[PathShare, ...]
    oxide_v: float
    oxide_field_v_m: float
    block: Block
    evaluations: int
    residual: float
    notes: tuple[Note, ...]
    overhead_w: float = 0.0

    @property
    def shares(self) -> dict[str, float]:
        """Mechanisms, and the overhead where a scheme has one, A over the supply."""
        overhead = sum(path.current_a for path in self.paths if path.path == "overhead")
        shares = dict(self.mechanisms._asdict())
        return shares | {"overhead": overhead} if overhead else shares


@dataclass(frozen=True)
class LimitCheck:
    """A limit, the value held against it, and whether it holds; SI units."""

    limit: str
    value: float
    allowed: float
    holds: bool


@dataclass(frozen=True)
class Interval:
    """Least and most that the tables of cells without transistors allow; W, A.

    Each is a pair, least first; all such cells are at the same end.
    """

    power_w: tuple[float, ...]
    current_a: tuple[float, ...]
    ungated_power_w: tuple[float, ...]


@dataclass(frozen=True)
class Point:
    """A domain under a scheme at a corner.

    ``saving`` is the share of the ungated power that the scheme saves. ``interval`` is there where cells
    without transistors took their leakage from Liberty libraries: what their tables leave open.
    """

    domain: str
    scheme: str
    corner: str
    asleep: Rest
    ungated_power_w: float
    ungated_current_a: float
    saving: float
    limits: tuple[LimitCheck, ...]
    interval: Interval | None = None

    @property
    def power_w(self) -> float:
        """Power of all real supplies in standby, W."""
        return self.asleep.power_w

    @property
    def current_a(self) -> float:
        """Current of all real supplies above ground in standby, A."""
        return self.asleep.current_a

    @property
    def holds(self) -> bool:
        """Whether every limit holds."""
        return all(each.holds for each in self.limits)


FORMAT = "hushrail-estimate"
VERSION = 1


@dataclass(frozen=True)
class Estimate:
    """Everything a study found: points are domains, then schemes, then corners.

    Points that failed are listed in ``failures`` and stand nowhere else. A scheme may be for some domains
    only: then the others have no points of it.
    """

    format: str
    version: int
    title: str
    domains: tuple[Domain, ...]
    schemes: tuple[str, ...]
    corners: tuple[Corner, ...]
    points: tuple[Point, ...]
    failures: tuple[Failure, ...]
    notes: tuple[Note, ...]
    stopped: bool

    @classmethod
    def from_json(cls, text: str, name: str = "estimate") -> Estimate:
        """Read what :meth:`to_json` or ``estimate --json`` wrote; ``name`` stands for it in messages."""
        made = records.from_text(cls, text, name)
        if (made.format, made.version) != (FORMAT, VERSION):
            found = f"the form is `{made.format}` version {made.version}; want `{FORMAT}` version {VERSION}"
            raise ReadError(f"{name}: {found}", name)
        return made

    def to_json(self, indent: int | None = None) -> str:
        """Write as JSON text; :meth:`from_json` gives an equal estimate back."""
        return records.to_text(self, indent)

    @cached_property
    def _by_name(self) -> dict[tuple[str, str, str], Point]:
        return {(p.domain, p.scheme, p.corner): p for p in self.points}

    def find(self, domain: str, scheme: str, corner: str) -> Point | None:
        """Look up a point by its names; nothing when it failed or was not asked for."""
        return self._by_name.get((domain, scheme, corner))

    def point(self, domain: str, scheme: str, corner: str) -> Point:
        """Look up a point by its names.

        Raises
        ------
        RangeError
            A name the study does not have.
        SolveError
            The point failed or was not asked for; the message says why.
        """
        names = [d.name for d in self.domains], self.schemes, [c.name for c in self.corners]
        for what, name, known in zip(
            ("domain", "scheme", "corner"), (domain, scheme, corner), names, strict=True
        ):
            if name not in known:
                raise RangeError(
                    f"{what} `{name}` is not in the estimate; want one of `{'`, `'.join(known)}`"
                )
        found = self.find(domain, scheme, corner)
        if found is None:
            raise SolveError(self._reason(domain, scheme, corner))
        return found

    def _reason(self, domain: str, scheme: str, corner: str) -> str:
        for f in self.failures:
            if (f.domain, f.corner) == (domain, corner) and f.scheme in ("", scheme):
                return f"{domain} / {scheme} / {corner}: {f.reason}"
        return f"{domain} / {scheme} / {corner}: the study does not ask for this point"

    @property
    def broken(self) -> tuple[tuple[Point, LimitCheck], ...]:
        """Limits that do not hold, with their points."""
        return tuple((p, each) for p in self.points for each in p.limits if not each.holds)

    def rows(
        self, of: Literal["points", "supplies", "paths", "cells"] = "points"
    ) -> Iterator[dict[str, Any]]:
        """Give flat rows for a table.

        Parameters
        ----------
        of : {"points", "supplies", "paths", "cells"}
            One row for each point; or for each real supply, path and mechanism, or cell of each point.

        Yields
        ------
        dict
            Column name to value: V, A, W, V/m, °C, as the name says; ``remarks`` holds the codes of the notes
            that bear on the point.
        """
        corners = {c.name: c for c in self.corners}
        for p in self.points:
            names = {"domain": p.domain, "scheme": p.scheme, "corner": p.corner}
            if of == "points":
                c, r = corners[p.corner], p.asleep
                yield {
                    **names,
                    "process": c.process,
                    "vdd_v": c.vdd_v,
                    "temp_c": c.temp_c,
                    "current_a": r.current_a,
                    "power_w": r.power_w,
                    "ungated_current_a": p.ungated_current_a,
                    "ungated_power_w": p.ungated_power_w,
                    "saving": p.saving,
                    "virtual_supply_v": r.virtual_supply_v,
                    "virtual_ground_v": r.virtual_ground_v,
                    **{f"{name}_a": x for name, x in r.mechanisms._asdict().items()},
                    "oxide_v": r.oxide_v,
                    "oxide_field_v_m": r.oxide_field_v_m,
                    "unstable_states": r.block.unstable,
                    "limits_hold": p.holds,
                    "residual": r.residual,
                    "remarks": " ".join(dict.fromkeys(n.code for n in r.notes)),
                }
            elif of == "supplies":
                for s in p.asleep.supplies:
                    numbers = {"voltage_v": s.voltage_v, "current_a": s.current_a, "power_w": s.power_w}
                    yield {**names, "supply": s.supply, **numbers}
            elif of == "paths":
                for way in p.asleep.paths:
                    yield {**names, "path": way.path, "mechanism": way.mechanism, "current_a": way.current_a}
            elif of == "cells":
                for cell in p.asleep.block.cells:
                    yield {**names, "master": cell.master, "count": cell.count, "current_a": cell.current_a}
            else:
                raise RangeError(f"rows of `{of}` do not exist; want points, supplies, paths or cells")

    def to_pandas(self, of: Literal["points", "supplies", "paths", "cells"] = "points") -> pd.DataFrame:
        """Make a data frame of :meth:`rows`, with their columns and units."""
        import pandas as pd

        frame = pd.DataFrame(list(self.rows(of)))
        frame.attrs["remarks"] = remarks(self.notes)
        return frame

    def to_xarray(self, *, fill: float | None = None) -> xr.Dataset:
        """Make a labelled array set over domain, scheme and corner.

        Parameters
        ----------
        fill : float, optional
            What stands for a point that failed, such as NaN. Without it such a point is an error. A point
            that the study does not ask for is NaN.

        Returns
        -------
        xarray.Dataset
            ``computed`` (whether there is a point), ``power_w``, ``current_a``, ``ungated_power_w``,
            ``ungated_current_a``, ``saving``, ``virtual_supply_v``, ``virtual_ground_v`` and ``oxide_v`` of
            shape (D, S, C), ``by_mechanism_a`` of shape (D, S, C, 5), and the corners' ``process``, ``vdd_v``
            and ``temp_c`` of shape (C,).

        Raises
        ------
        SolveError
            A point failed and no ``fill`` was given.
        """
        import numpy as np
        import xarray as xr

        shape = (len(self.domains), len(self.schemes), len(self.corners))
        names = [
            "power_w",
            "current_a",
            "ungated_power_w",
            "ungated_current_a",
            "saving",
            "virtual_supply_v",
            "virtual_ground_v",
            "oxide_v",
        ]
        failed = {(f.domain, f.scheme, f.corner) for f in self.failures}
        computed = np.zeros(shape, dtype=bool)
        values = {name: np.full(shape, np.nan) for name in names}
        shares = np.full((*shape, len(MECHANISMS)), np.nan)
        for at in np.ndindex(*shape):
            keys = self.domains[at[0]].name, self.schemes[at[1]], self.corners[at[2]].name
            p = self.find(*keys)
            if p is not None:
                computed[at] = True
                for name in names:
                    values[name][at] = getattr(p, name) if hasattr(p, name) else getattr(p.asleep, name)
                shares[at] = p.asleep.mechanisms
            elif keys in failed or (keys[0], "", keys[2]) in failed:
                if fill is None:
                    raise SolveError(f"{self._reason(*keys)} (give `fill` to have the other points)")
                for each in [*values.values(), shares]:
                    each[at] = fill
        dims = ("domain", "scheme", "corner")
        return xr.Dataset(
            {"computed": (dims, computed)}
            | {name: (dims, each) for name, each in values.items()}
            | {"by_mechanism_a": ((*dims, "mechanism"), shares)},
            coords={
                "domain": [d.name for d in self.domains],
                "scheme": list(self.schemes),
                "corner": [c.name for c in self.corners],
                "mechanism": list(MECHANISMS),
                "process": ("corner", [c.process for c in self.corners]),
                "vdd_v": ("corner", [c.vdd_v for c in self.corners]),
                "temp_c": ("corner", [c.temp_c for c in self.corners]),
            },
            attrs={"title": self.title, "remarks": remarks(self.notes)},
        )
