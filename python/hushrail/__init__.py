"""Standby current of power-gated CMOS blocks, from foundry cards, cell netlists and sleep schemes.

The main job is one call: :func:`estimate` runs a study, a TOML file that names cards, cell netlists, domains,
sleep schemes and corners. :func:`cells` gives the leakage table behind it, :func:`compare` holds it against a
published one, :func:`count` counts the instances of a netlist, :func:`read_liberty` and :func:`write_liberty`
take leakage from Liberty libraries and to them, :func:`read_intent` and :func:`map_intent` read power intent
and map it onto a netlist. :class:`Process` and :class:`Device` give the currents of single transistors as
NumPy arrays; :class:`CompactModel` and :class:`TableModel` do so without cards, and ``hushrail.fit``
calibrates the former. ``hushrail.awake`` tells what a switch costs while its domain works and the lowest rail
that keeps state, ``hushrail.transition`` what lies in between, ``hushrail.optimum`` the best overdrive, well
bias or width and the choice under limits, ``hushrail.parked`` the states of a netlist and the vector that
leaks least. Plots are in ``hushrail.plot``, the demonstration in ``hushrail.demo``.
"""

from hushrail._core import __version__
from hushrail.device import TERMINALS, CompactModel, Device, Parameter, Process, TableModel
from hushrail.errors import HushrailError, RangeError, ReadError, SolveError
from hushrail.intent import map_intent, read_intent
from hushrail.leakage import (
    Compared,
    ComparedRow,
    Comparison,
    CornerStatistics,
    Counts,
    LeakageRow,
    LeakageTable,
    Suspect,
    Unmatched,
)
from hushrail.liberty import Library, read_liberty, write_liberty
from hushrail.results import (
    MECHANISMS,
    Block,
    ByMechanism,
    CellShare,
    Corner,
    Domain,
    Estimate,
    Failure,
    Interval,
    LimitCheck,
    Note,
    Outside,
    PathShare,
    Point,
    Rest,
    Supply,
    Uncovered,
)
from hushrail.sensitivity import KNOBS, BlockSlopes, CellSlopes, LogSlopes, SensitivityTable
from hushrail.study import cells, compare, count, estimate, sensitivities

__all__ = [
    "KNOBS",
    "MECHANISMS",
    "TERMINALS",
    "Block",
    "BlockSlopes",
    "ByMechanism",
    "CellShare",
    "CellSlopes",
    "CompactModel",
    "Compared",
    "ComparedRow",
    "Comparison",
    "Corner",
    "CornerStatistics",
    "Counts",
    "Device",
    "Domain",
    "Estimate",
    "Failure",
    "HushrailError",
    "Interval",
    "LeakageRow",
    "LeakageTable",
    "Library",
    "LimitCheck",
    "LogSlopes",
    "Note",
    "Outside",
    "Parameter",
    "PathShare",
    "Point",
    "Process",
    "RangeError",
    "ReadError",
    "Rest",
    "SensitivityTable",
    "SolveError",
    "Supply",
    "Suspect",
    "TableModel",
    "Uncovered",
    "Unmatched",
    "__version__",
    "cells",
    "compare",
    "count",
    "estimate",
    "map_intent",
    "read_intent",
    "read_liberty",
    "sensitivities",
    "write_liberty",
]
