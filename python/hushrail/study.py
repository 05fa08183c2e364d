"""The four jobs: estimate a study, table its cells, compare with a published table, count a netlist.

Each call lets other Python threads run, calls ``progress`` about twenty times a second and ends early on
Ctrl-C.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Sequence
from typing import Any, TypeAlias

from hushrail import _core
from hushrail.errors import RangeError
from hushrail.leakage import Comparison, Counts, LeakageTable
from hushrail.results import Estimate
from hushrail.sensitivity import SensitivityTable

__all__ = ["Progress", "StrPath", "cells", "compare", "count", "estimate", "sensitivities"]

StrPath: TypeAlias = str | os.PathLike[str]
"""A path as text or as a path object."""

Progress: TypeAlias = Callable[[int, int], Any]
"""Called with points done and in all; an exception it raises stops the work and comes out of the call."""


def estimate(path: StrPath, progress: Progress | None = None) -> Estimate:
    """Run a study: every domain under every scheme at every corner.

    Parameters
    ----------
    path : path
        The study, a TOML file; paths in it are relative to its folder.
    progress : callable, optional
        Called with points done and points in all, on the calling thread; an exception it raises stops the
        work.

    Returns
    -------
    Estimate
        Points that could not be computed are in ``failures``.

    Raises
    ------
    FileNotFoundError
        The study or a file it names is missing.
    ReadError
        A file says something that cannot be used; with its place.
    """
    return Estimate.from_json(_core.estimate(os.fspath(path), progress=progress))


def cells(
    path: StrPath,
    patterns: Sequence[str] | str = (),
    *,
    floor_s: float = 0.0,
    progress: Progress | None = None,
) -> LeakageTable:
    """Solve every state of a study's cells at its corners, rails at full supply.

    Parameters
    ----------
    path : path
        The study; its domains and schemes are not needed.
    patterns : str or sequence of str
        Cell names, ``*`` for any run of characters; all cells when empty.
    floor_s : float
        Conductance across every junction, S, to reproduce a table made with one; zero adds none.
    progress : callable, optional
        Called with cells done and cells in all, each counted at each corner.

    Returns
    -------
    LeakageTable
        Rows are cells, then corners, then states.
    """
    wanted = [patterns] if isinstance(patterns, str) else list(patterns)
    text = _core.cell_table(os.fspath(path), cells=wanted, floor_s=_floor(floor_s), progress=progress)
    return LeakageTable.from_json(text)


def sensitivities(
    path: StrPath,
    patterns: Sequence[str] | str = (),
    *,
    blocks: bool = True,
    progress: Progress | None = None,
) -> SensitivityTable:
    """Work out how the currents of a study's cells and blocks answer to threshold, size, heat and oxide.

    Slopes are exact: the same equations with dual numbers in the parameters, and node voltages that follow
    by the implicit function theorem. Rails are at full supply.

    Parameters
    ----------
    path : path
        The study.
    patterns : str or sequence of str
        Cell names, ``*`` for any run of characters; no cells when empty.
    blocks : bool
        The blocks of the study's domains too.
    progress : callable, optional
        Called with tasks done and tasks in all; a task is a cell or a domain at a corner.

    Returns
    -------
    SensitivityTable
        d ln I by knob; see :class:`LogSlopes` for the units.
    """
    wanted = [patterns] if isinstance(patterns, str) else list(patterns)
    text = _core.sensitivities(os.fspath(path), cells=wanted, blocks=blocks, progress=progress)
    return SensitivityTable.from_json(text)


def compare(
    path: StrPath,
    table: StrPath,
    *,
    corners: StrPath | None = None,
    prefix: str = "",
    floor_s: float = 0.0,
    same_cards: Sequence[Sequence[str]] = (),
    progress: Progress | None = None,
) -> Comparison:
    """Hold the predictions of a study's cards and netlists against a published leakage table.

    Parameters
    ----------
    path : path
        The study; its domains and schemes are not needed.
    table : path
        CSV with the columns ``cell``, ``corner``, ``when`` (such as ``!A&B``) and ``leakage_nw``.
    corners : path, optional
        CSV with the columns ``corner``, ``process``, ``temp_c`` and ``vdd_v``; the study's own corners when
        left out.
    prefix : str
        What the netlist puts before the table's cell names.
    floor_s : float
        Conductance that the table's makers put across every junction, S.
    same_cards : sequence of sequences of str
        Processes of the table that were made with one card set: their rows must agree at equal supply and
        temperature.
    progress : callable, optional
        Called with rows done and rows in all.

    Returns
    -------
    Comparison
        Statistics by corner, rows with predictions, rows under suspicion, and what could not be matched.
    """
    text = _core.compare(
        os.fspath(path),
        os.fspath(table),
        corners=None if corners is None else os.fspath(corners),
        prefix=prefix,
        floor_s=_floor(floor_s),
        same_cards=[list(each) for each in same_cards],
        progress=progress,
    )
    return Comparison.from_json(text)


def count(files: StrPath | Sequence[StrPath], *, top: str | None = None, path: str = "") -> Counts:
    """Count the instances of a structural Verilog netlist, or of a DEF layout, by master.

    Files are read piece by piece, so memory does not grow with them.

    Parameters
    ----------
    files : path or sequence of paths
        The netlist in one or more Verilog files, or one layout, told by a name that ends in ``.def`` or
        ``.def.gz``. Gzip is undone; ``-`` is Verilog on standard input.
    top : str, optional
        The top module, where more than one is possible.
    path : str
        Instance path below the top to count under, such as ``u_core.u_dsp``; the whole top when empty. On
        standard input, which can be read once, modules must come before their use for a path to be found.
    """
    several = [files] if isinstance(files, str | os.PathLike) else list(files)
    if not several:
        raise RangeError("no netlist was named; want at least one Verilog or DEF file")
    found, counts = _core.count([os.fspath(each) for each in several], top=top, path=path)
    return Counts(top=found, path=path, counts=dict(counts))


def _floor(floor_s: float) -> float:
    if not 0.0 <= floor_s < 1.0:
        raise RangeError(f"floor_s is {floor_s} S; want zero or a small conductance such as 1e-15 S")
    return float(floor_s)
