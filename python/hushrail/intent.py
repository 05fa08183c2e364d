"""Power intent (IEEE 1801, UPF 1.0 to 3.1, in plain Tcl) and what it means for a netlist.

:func:`read_intent` gives what the files say: domains, supplies, switches, isolation, retention, states.
:func:`map_intent` maps it onto a netlist: what each domain is made of and which switch feeds it. Names are
whole: the path of the scope, ``/``, the name. Places stand as ``file:line:column``.
"""

from __future__ import annotations

import os
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from hushrail import _core, records
from hushrail.results import Note

__all__ = [
    "Connection",
    "Control",
    "DomainMap",
    "InstanceCounts",
    "Intent",
    "Isolation",
    "LevelShifter",
    "MappedDomain",
    "MappedSwitch",
    "Named",
    "PowerDomain",
    "PowerState",
    "PowerSwitch",
    "Retention",
    "StateTable",
    "SupplyNet",
    "SupplyPort",
    "SupplySet",
    "SupplyState",
    "SwitchControl",
    "SwitchState",
    "SwitchSupply",
    "TableRow",
    "Trigger",
    "map_intent",
    "read_intent",
]

StrPath = str | os.PathLike[str]


@dataclass(frozen=True)
class InstanceCounts:
    """How many leaf cells of each kind."""

    top: str
    """The top module."""
    counts: Mapping[str, int]
    """Leaf cells by kind."""

    @property
    def total(self) -> int:
        """All leaf cells."""
        return sum(self.counts.values())


@dataclass(frozen=True)
class Named:
    """A name that a list holds, and where it is written."""

    path: str
    """The whole path."""
    at: str
    """Where it is written."""


@dataclass(frozen=True)
class PowerDomain:
    """A power domain."""

    name: str
    """Whole name."""
    scope: str
    """Path of the scope it is made in."""
    at: str
    """Where it is made."""
    elements: tuple[Named, ...]
    """Instances that belong to it with what is below them."""
    exclude: tuple[Named, ...]
    """Instances that do not."""
    include_scope: bool
    """Whether the scope itself belongs to it."""
    primary_power: str | None
    """Net that ``set_domain_supply_net`` names for power."""
    primary_ground: str | None
    """The same for ground."""
    supplies: Mapping[str, str]
    """Supply sets by handle, such as ``primary``."""


@dataclass(frozen=True)
class SupplyPort:
    """A supply port."""

    name: str
    """Whole name."""
    direction: str
    """``in``, ``out`` or ``inout``."""
    at: str
    """Where it is made."""


@dataclass(frozen=True)
class SupplyNet:
    """A supply net."""

    name: str
    """Whole name."""
    resolve: str | None
    """How several drivers are resolved, when that is said."""
    domains: tuple[str, ...]
    """Domains it is made available in."""
    at: str
    """Where it is made."""


@dataclass(frozen=True)
class SupplySet:
    """A supply set: nets by function."""

    name: str
    """Whole name; ``DOMAIN.handle`` for one that comes with a domain."""
    functions: Mapping[str, str]
    """Net, or function of another set, by function: ``power``, ``ground``…"""
    at: str
    """Where it is made."""


@dataclass(frozen=True)
class Connection:
    """A supply net tied to a port."""

    net: str
    """The net."""
    port: str
    """The port, of a scope or of a switch (``switch/port``)."""


@dataclass(frozen=True)
class SupplyState:
    """A state of a supply."""

    supply: str
    """Port or net."""
    name: str
    """Name of the state."""
    volts: tuple[float, ...]
    """Voltages, V: nominal, or least and most, or all three; nothing when off."""
    at: str
    """Where it stands."""


@dataclass(frozen=True)
class SwitchSupply:
    """A supply port of a switch."""

    port: str
    """Name of the port."""
    net: str | None
    """Net at it, when given."""


@dataclass(frozen=True)
class SwitchControl:
    """A control or acknowledge port of a switch."""

    port: str
    """Name of the port."""
    net: str | None
    """Whole path of the net at it, when given."""
    condition: str | None
    """What an acknowledge port says."""
    at: str
    """Where it is written."""


@dataclass(frozen=True)
class SwitchState:
    """A state of a switch."""

    name: str
    """Name."""
    input: str | None
    """Input port that it connects, when it is on."""
    condition: str
    """When it holds, in names of control ports."""


@dataclass(frozen=True)
class PowerSwitch:
    """A power switch."""

    name: str
    """Whole name."""
    domain: str | None
    """Domain it is given with."""
    inputs: tuple[SwitchSupply, ...]
    """Input supplies."""
    output: SwitchSupply
    """Output supply."""
    controls: tuple[SwitchControl, ...]
    """Control ports."""
    acks: tuple[SwitchControl, ...]
    """Acknowledge ports."""
    on_states: tuple[SwitchState, ...]
    """States in which it conducts."""
    partial_states: tuple[SwitchState, ...]
    """States in which it conducts in part."""
    off_states: tuple[SwitchState, ...]
    """States in which it does not conduct."""
    error_states: tuple[SwitchState, ...]
    """States that must not be."""
    supply_set: str | None
    """Supply set of its own gates."""
    instances: tuple[Named, ...]
    """Instances of the netlist that it stands for."""
    at: str
    """Where it is made."""


@dataclass(frozen=True)
class Isolation:
    """A strategy for isolation at the boundary of a domain."""

    name: str
    """Name."""
    domain: str
    """Domain."""
    elements: tuple[Named, ...]
    """Ports or instances it is for; the whole boundary when empty."""
    exclude: tuple[Named, ...]
    """What it is not for."""
    applies_to: str | None
    """``inputs``, ``outputs`` or ``both``, when said."""
    clamp_values: tuple[str, ...]
    """``0``, ``1``, ``any``, ``Z``, ``latch`` or a value; one for each signal."""
    signals: tuple[Named, ...]
    """Nets that switch it on; whole paths."""
    senses: tuple[str, ...]
    """``high`` or ``low``, one for each signal."""
    location: str | None
    """Where the cells go."""
    source: str | None
    """Supply set of the driver it is for."""
    sink: str | None
    """Supply set of the receiver it is for."""
    supplies: tuple[str, ...]
    """Supply sets of the cells."""
    power_net: str | None
    """Power net of the cells."""
    ground_net: str | None
    """Ground net of the cells."""
    none: bool
    """Whether it says that nothing is isolated."""
    at: str
    """Where it is made."""


@dataclass(frozen=True)
class Trigger:
    """A save or restore signal."""

    net: str
    """Whole path of the net."""
    edge: str
    """``high``, ``low``, ``posedge`` or ``negedge``."""
    at: str
    """Where it is written."""


@dataclass(frozen=True)
class Retention:
    """A strategy for retention in a domain."""

    name: str
    """Name."""
    domain: str
    """Domain."""
    elements: tuple[Named, ...]
    """What it is for; all that stores when empty."""
    exclude: tuple[Named, ...]
    """What it is not for."""
    save: Trigger | None
    """What saves."""
    restore: Trigger | None
    """What restores."""
    condition: str | None
    """When the state is kept, as written."""
    supply: str | None
    """Supply set that keeps it."""
    power_net: str | None
    """Power net that keeps it."""
    ground_net: str | None
    """Ground net that keeps it."""
    none: bool
    """Whether it says that nothing is kept."""
    at: str
    """Where it is made."""


@dataclass(frozen=True)
class LevelShifter:
    """A strategy for level shifters."""

    name: str
    """Name."""
    domain: str
    """Domain."""
    elements: tuple[Named, ...]
    """What it is for; the whole boundary when empty."""
    exclude: tuple[Named, ...]
    """What it is not for."""
    applies_to: str | None
    """``inputs``, ``outputs`` or ``both``, when said."""
    rule: str | None
    """``low_to_high``, ``high_to_low`` or ``both``, when said."""
    location: str | None
    """Where the cells go."""
    threshold: str | None
    """Difference that needs a shift, V, as written."""
    none: bool
    """Whether it says that nothing is shifted."""
    at: str
    """Where it is made."""


@dataclass(frozen=True)
class PowerState:
    """A named state of a domain, supply set or group; expressions as written."""

    object: str
    """Domain, supply set, group…, as a whole name."""
    name: str
    """Name of the state."""
    logic: str | None
    """When it holds."""
    supply: str | None
    """Which supplies it means."""
    simstate: str | None
    """How what it powers behaves."""
    legal: bool | None
    """Whether it may be; nothing when not said."""
    at: str
    """Where it stands."""


@dataclass(frozen=True)
class TableRow:
    """A row of a state table."""

    name: str
    """Name."""
    states: tuple[str, ...]
    """A state for each supply; ``*`` for any."""


@dataclass(frozen=True)
class StateTable:
    """A power state table."""

    name: str
    """Whole name."""
    supplies: tuple[str, ...]
    """Supplies: ports, nets or ports of switches."""
    rows: tuple[TableRow, ...]
    """Rows."""
    at: str
    """Where it is made."""


@dataclass(frozen=True)
class Intent:
    """Power intent: what the files say."""

    version: str | None
    """Version that the files name."""
    scopes: tuple[Named, ...]
    """Scopes other than the top that are gone into."""
    domains: tuple[PowerDomain, ...]
    """Power domains."""
    supply_ports: tuple[SupplyPort, ...]
    """Supply ports."""
    supply_nets: tuple[SupplyNet, ...]
    """Supply nets."""
    supply_sets: tuple[SupplySet, ...]
    """Supply sets."""
    connections: tuple[Connection, ...]
    """Nets tied to ports."""
    supply_states: tuple[SupplyState, ...]
    """States of supplies."""
    switches: tuple[PowerSwitch, ...]
    """Power switches."""
    isolations: tuple[Isolation, ...]
    """Isolation."""
    retentions: tuple[Retention, ...]
    """Retention."""
    level_shifters: tuple[LevelShifter, ...]
    """Level shifters."""
    power_states: tuple[PowerState, ...]
    """Power states."""
    state_tables: tuple[StateTable, ...]
    """State tables."""
    logic_nets: tuple[str, ...]
    """Logic nets and ports that the intent makes."""
    notes: tuple[Note, ...]
    """Remarks."""


@dataclass(frozen=True)
class Control:
    """A net that intent names, found in the netlist."""

    role: str
    """The port of the switch, or what the net does."""
    path: str
    """The whole path as the intent names it."""


@dataclass(frozen=True)
class MappedSwitch:
    """A switch that feeds a domain."""

    name: str
    """Whole name."""
    inputs: tuple[str, ...]
    """Nets it takes from."""
    controls: tuple[Control, ...]
    """Its control nets."""
    acks: tuple[Control, ...]
    """Its acknowledge nets."""
    at: str
    """Where it is made."""


@dataclass(frozen=True)
class MappedDomain:
    """A domain and its part of the netlist."""

    name: str
    """Whole name."""
    counts: InstanceCounts
    """Its leaf cells by kind."""
    power: str | None
    """Primary power, as the intent names it."""
    ground: str | None
    """Primary ground."""
    headers: tuple[MappedSwitch, ...]
    """Switches whose output is the primary power."""
    footers: tuple[MappedSwitch, ...]
    """Switches whose output is the primary ground."""
    isolations: tuple[Isolation, ...]
    """Isolation at its boundary."""
    isolation_nets: tuple[Control, ...]
    """Nets that switch the isolation on, in that order."""
    retentions: tuple[Retention, ...]
    """Retention in it."""
    retention_nets: tuple[Control, ...]
    """Nets that save and restore, in that order."""

    @property
    def is_switched(self) -> bool:
        """Whether a switch feeds it."""
        return bool(self.headers or self.footers)


@dataclass(frozen=True)
class DomainMap:
    """Intent on a netlist."""

    domains: tuple[MappedDomain, ...]
    """Domains in the order they are made."""
    outside: InstanceCounts
    """Leaf cells of no domain."""
    notes: tuple[Note, ...]
    """Remarks."""

    def domain(self, name: str) -> MappedDomain:
        """Give the domain of a whole name; ``KeyError`` when there is none."""
        for each in self.domains:
            if each.name == name:
                return each
        raise KeyError(name)


def read_intent(
    paths: StrPath | Sequence[StrPath],
    *,
    env: Mapping[str, str] | None = None,
    verilog: StrPath | Sequence[StrPath] = (),
    top: str | None = None,
) -> Intent:
    """Read power intent.

    Parameters
    ----------
    paths : path or sequence of paths
        The files, read in order.
    env : mapping, optional
        What the script finds in ``::env``; nothing of this process's environment is there unless given.
    verilog : path or sequence of paths, optional
        The netlist, which ``find_objects`` looks in.
    top : str, optional
        Its top module, where more than one is possible.

    Raises
    ------
    FileNotFoundError
        A file is missing.
    ReadError
        A misspelt command, option or name, a script without end; with its place and the nearest right one.
    """
    text = _core.read_intent(_several(paths), dict(env or {}), verilog=_several(verilog), top=top)
    return records.from_text(Intent, text, "power intent")


def map_intent(
    paths: StrPath | Sequence[StrPath],
    verilog: StrPath | Sequence[StrPath],
    *,
    top: str | None = None,
    env: Mapping[str, str] | None = None,
) -> DomainMap:
    """Read power intent and map it onto a netlist.

    Parameters
    ----------
    paths : path or sequence of paths
        The files of the intent, read in order.
    verilog : path or sequence of paths
        The netlist in structural Verilog.
    top : str, optional
        Its top module, where more than one is possible.
    env : mapping, optional
        What the script finds in ``::env``.

    Raises
    ------
    FileNotFoundError
        A file is missing.
    ReadError
        As for :func:`read_intent`; also a name that the netlist does not have, an instance in two domains, a
        domain with two supplies.
    """
    text = _core.map_intent(_several(paths), dict(env or {}), _several(verilog), top=top)
    return records.from_text(DomainMap, text, "power intent")


def _several(paths: StrPath | Sequence[StrPath]) -> list[str]:
    several = [paths] if isinstance(paths, str | os.PathLike) else list(paths)
    return [os.fspath(each) for each in several]
