"""What a study itself asks of sleeping and waking: its tables beside domains, schemes and corners.

Each function runs what one kind of table says: ``[awake]``, ``[keep]``, ``[transition]``, ``[[optimum]]`` and
``[[choice]]``. The keys are those of the requests that :mod:`hushrail.awake`, :mod:`hushrail.transition` and
:mod:`hushrail.optimum` take as arguments.
"""

from __future__ import annotations

import os
from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from hushrail import _core, records
from hushrail.awake import Kept, Report
from hushrail.optimum import Choice, Optimum
from hushrail.transition import Transitions

if TYPE_CHECKING:
    from hushrail.study import Progress, StrPath

__all__ = ["Choices", "Optima", "awake", "choices", "keep", "optima", "transitions"]


@dataclass(frozen=True)
class Optima:
    """Answers to the ``[[optimum]]`` tables of a study, in their order."""

    answers: tuple[Optimum, ...]

    def flat(self) -> Iterator[dict[str, Any]]:
        """Give one flat row for each table and corner, SI."""
        for each in self.answers:
            knob = each.compromise.knob
            for o in each.compromise.optima:
                yield {
                    "domain": each.domain,
                    "scheme": each.scheme,
                    "knob": knob,
                    "corner": o.corner,
                    "standing": o.standing,
                    "value": o.value,
                    "power_w": o.power_w,
                    "without_w": o.without_w,
                    "takes_over": o.takes_over,
                    "compromise": each.compromise.value,
                }

    def to_json(self, indent: int | None = None) -> str:
        """Write as JSON text."""
        return records.to_text(self, indent)


@dataclass(frozen=True)
class Choices:
    """Answers to the ``[[choice]]`` tables of a study, in their order."""

    answers: tuple[Choice, ...]

    def flat(self) -> Iterator[dict[str, Any]]:
        """Give one flat row for each table and point of its front, SI."""
        for each in self.answers:
            for point in each.chosen.front:
                c = point.candidate
                yield {
                    "domain": each.domain,
                    "scheme": each.scheme,
                    "settings": " ".join(
                        f"{k}={v:g}" for k, v in zip(each.chosen.knobs, c.values, strict=True)
                    ),
                    "power_w": c.power_w,
                    "corner": c.corner,
                    "area_m2": c.area_m2,
                    "wake_s": c.wake_s,
                    "binding": None if c.binding is None else c.binding.limit,
                    "margin": None if c.binding is None else c.binding.margin,
                }

    def to_json(self, indent: int | None = None) -> str:
        """Write as JSON text."""
        return records.to_text(self, indent)


def awake(study: StrPath, progress: Progress | None = None) -> Report:
    """Answer the ``[awake]`` table of a study: droop, on-resistance, size, margins and delay.

    Parameters
    ----------
    study : path
        The study, a TOML file.
    progress : callable, optional
        Called with points done and points in all.

    Raises
    ------
    ReadError
        No such table, or a file that cannot be used.
    """
    return records.from_text(Report, _core.awake_domains(os.fspath(study), progress=progress), "awake")


def keep(study: StrPath, progress: Progress | None = None) -> Kept:
    """Answer the ``[keep]`` table of a study: lowest spans that keep state. As for :func:`awake`."""
    return records.from_text(Kept, _core.awake_keep(os.fspath(study), progress=progress), "keep")


def transitions(study: StrPath, progress: Progress | None = None) -> Transitions:
    """Answer the ``[transition]`` table of a study: collapse, wake-up, break-even. As for :func:`awake`."""
    return Transitions.from_json(_core.transitions(os.fspath(study), progress=progress))


def optima(study: StrPath, progress: Progress | None = None) -> Optima:
    """Answer the ``[[optimum]]`` tables of a study. Arguments and errors as for :func:`awake`.

    Raises
    ------
    RangeError
        A range, name or weight that cannot be.
    SolveError
        A corner where the domain does not come to rest.
    """
    return records.from_text(Optima, _core.optima_asked(os.fspath(study), progress=progress), "optimum")


def choices(study: StrPath, progress: Progress | None = None) -> Choices:
    """Answer the ``[[choice]]`` tables of a study. Arguments and errors as for :func:`optima`."""
    return records.from_text(Choices, _core.choices_asked(os.fspath(study), progress=progress), "choice")
