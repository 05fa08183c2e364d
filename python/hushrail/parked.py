"""What every instance of a domain holds while it is parked, and the vector that leaks least.

A study's domain with a ``parked`` table has its states from the connections of its netlist: values of inputs
and registers are carried through the cells, whose functions come from their own transistors. What nothing is
said of stays unknown, counts as one half and is told as assumed.

Sources. Probabilities to first order, the pins of a gate taken as independent: Parker and McCluskey, IEEE
Trans. Comput. C-24 (1975) 668 (memory). Annealing: Kirkpatrick, Gelatt and Vecchi, Science 220 (1983) 671
(memory).
"""

from __future__ import annotations

import json
import os
from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

from hushrail import _core, records
from hushrail.results import Certainty, Note

if TYPE_CHECKING:
    from hushrail.study import Progress, StrPath

__all__ = ["DomainStates", "Parked", "search", "states"]


@dataclass(frozen=True)
class DomainStates:
    """States of a domain: instances by cell and state, and the share of time at one of every net."""

    domain: str
    certainty: Certainty
    cells: Mapping[str, Mapping[str, float]]
    nets: Mapping[str, float]
    assumed: tuple[str, ...]
    notes: tuple[Note, ...]


@dataclass(frozen=True)
class Parked:
    """What a search found.

    ``nets`` and ``registers`` hold the values to park at. Powers in W, of the cells at full rails: with these
    values, of random vectors (mean, and least of sixty-four), and the sum of every instance's least power,
    which no vector goes below; ``gap`` is relative to that.
    """

    domain: str
    corner: str
    nets: Mapping[str, float]
    registers: Mapping[str, float]
    power_w: float
    random_mean_w: float
    random_least_w: float
    bound_w: float
    gap: float
    tried: int
    certainty: Certainty
    notes: tuple[Note, ...]
    stopped: bool

    def to_json(self, indent: int | None = None) -> str:
        """Write as JSON text."""
        return records.to_text(self, indent)

    def to_toml(self) -> str:
        """Write as the ``parked`` table of a domain, to be put into a study."""
        lines = []
        for title, own in (("nets", self.nets), ("registers", self.registers)):
            if own:
                lines.append(f"[domain.parked.{title}]")
                lines += [f"{json.dumps(name)} = {value:g}" for name, value in own.items()]
        return "\n".join(lines) + "\n"


def states(study: StrPath, domain: str | None = None) -> DomainStates:
    """Give the states of a domain's instances.

    Parameters
    ----------
    study : path
        The study, a TOML file.
    domain : str, optional
        Which; the only one when left out.

    Raises
    ------
    ReadError
        A file that cannot be used, or a name of the ``parked`` table that the netlist does not have.
    """
    return records.from_text(DomainStates, _core.domain_states(os.fspath(study), domain), "states")


def search(
    study: StrPath,
    domain: str | None = None,
    *,
    corner: str | None = None,
    seed: int = 0,
    flips: int = 2000,
    registers: bool = False,
    progress: Progress | None = None,
) -> Parked:
    """Search the values of a domain's inputs that make it leak least.

    What the ``parked`` table of the domain gives stays; every other input is free.

    Parameters
    ----------
    study : path
        The study, a TOML file.
    domain, corner : str, optional
        Which domain (the only one when left out), and the corner to judge at (the first).
    seed : int
        The same seed gives the same answer.
    flips : int
        Flips tried in each of sixty-four chains.
    registers : bool
        Whether what registers keep may be chosen too, as when it is loaded through a scan chain.
    progress : callable, optional
        Called with steps done and steps in all.

    Raises
    ------
    ReadError
        A file that cannot be used, or a name that does not exist.
    """
    request = {
        "domain": domain,
        "corner": corner,
        "search": {"seed": seed, "flips": flips, "registers": registers},
    }
    text = _core.park(os.fspath(study), records.to_request(request), progress=progress)
    return records.from_text(Parked, text, "park")
