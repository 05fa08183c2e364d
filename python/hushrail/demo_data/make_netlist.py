# SPDX-License-Identifier: Apache-2.0
"""Writes the gate-level netlist of the demonstration: ``buoy_hub.v``.

The chip is invented: the sensor hub of a tide-gauge buoy with three domains. ``u_dsp`` filters the water
level and sleeps most of the day, ``u_link`` is the baseband of a slow radio, ``u_keeper`` stays on and
decides who wakes. Its logic computes nothing useful; what matters is a plausible mix of cells, clouds of
logic between registers, and every input driven. The same seed gives the same bytes on every platform and
every version of Python.

Run it with ``python make_netlist.py [--seed N] [--out FILE]``.
"""

from __future__ import annotations

import argparse
import random
from collections.abc import Mapping, Sequence
from pathlib import Path

HEADER = """\
// SPDX-License-Identifier: Apache-2.0
//
// buoy_hub: an invented chip, written by make_netlist.py with seed {seed}. The design and its cells are made
// up; they mean nothing about any real product. Supplies are left off; FILL cells hold no transistor.
"""

#: Seed of the netlist that ships with the package.
SEED = 40

#: Inputs and outputs of each cell, without drive strength and threshold flavour, in the order of arguments.
PINS: dict[str, tuple[tuple[str, ...], tuple[str, ...]]] = {
    "inv": (("A",), ("Y",)),
    "buf": (("A",), ("Y",)),
    "nand2": (("A", "B"), ("Y",)),
    "nand3": (("A", "B", "C"), ("Y",)),
    "nor2": (("A", "B"), ("Y",)),
    "nor3": (("A", "B", "C"), ("Y",)),
    "and2": (("A", "B"), ("Y",)),
    "xor2": (("A", "B"), ("Y",)),
    "aoi21": (("A", "B", "C"), ("Y",)),
    "oai21": (("A", "B", "C"), ("Y",)),
    "mux2": (("D0", "D1", "S"), ("Y",)),
    "ha": (("A", "B"), ("S", "CO")),
    "fa": (("A", "B", "CI"), ("S", "CO")),
    "dff": (("D", "CK"), ("Q",)),
    "dffr": (("D", "CK", "RN"), ("Q",)),
    "lat": (("D", "G"), ("Q",)),
    "cg": (("CK", "E"), ("GCK",)),
    "tiehi": ((), ("Y",)),
    "tielo": ((), ("Y",)),
}

#: Masters of a logic cloud and how often each is drawn.
LOW_THRESHOLD = {
    "inv_1": 10,
    "inv_2": 4,
    "buf_2": 3,
    "nand2_1": 20,
    "nand3_1": 6,
    "nor2_1": 10,
    "nor3_1": 3,
    "and2_1": 5,
    "aoi21_1": 12,
    "oai21_1": 9,
    "xor2_1": 5,
    "mux2_1": 6,
}
#: The same with the paths that have time to spare in high threshold.
MIXED_THRESHOLD = {
    "inv_1": 5,
    "inv_1_h": 5,
    "buf_2": 2,
    "nand2_1": 10,
    "nand2_1_h": 10,
    "nand3_1": 4,
    "nor2_1": 4,
    "nor2_1_h": 5,
    "and2_1_h": 3,
    "aoi21_1": 6,
    "aoi21_1_h": 6,
    "oai21_1": 7,
    "xor2_1": 5,
    "mux2_1": 3,
    "mux2_1_h": 3,
}
#: High threshold only, for logic that is never switched off.
HIGH_THRESHOLD = {
    "inv_1_h": 12,
    "inv_2_h": 2,
    "buf_2_h": 4,
    "nand2_1_h": 22,
    "nor2_1_h": 14,
    "and2_1_h": 6,
    "aoi21_1_h": 12,
    "mux2_1_h": 6,
}

Bits = list[str]


def base_of(master: str) -> str:
    """Name of a master without drive strength and threshold flavour: ``inv_1_h`` gives ``inv``."""
    return master.split("_", 1)[0]


def bits_of(name: str, width: int) -> Bits:
    """Names of the bits of a bus, lowest first."""
    return [name] if width == 1 else [f"{name}[{i}]" for i in range(width)]


class Module:
    """One Verilog module under construction.

    Nets are named bit by bit (``d[3]``). Whoever drives or reads a bit is recorded, so that a bit with two
    drivers, or with none, is found.
    """

    def __init__(self, name: str, remark: str) -> None:
        self.name = name
        self.remark = remark
        self.ports: list[tuple[str, str, int]] = []
        self.wires: list[tuple[str, int]] = []
        self.widths: dict[str, int] = {}
        self.body: list[str] = []
        self.driven: set[str] = set()
        self.read: set[str] = set()
        self.loose = 0
        self.cells = 0

    def _bits(self, name: str, width: int) -> Bits:
        self.widths[name] = width
        return bits_of(name, width)

    def takes(self, name: str, width: int = 1) -> Bits:
        """Declare an input port and return its bits, lowest first."""
        self.ports.append(("input", name, width))
        bits = self._bits(name, width)
        self.driven.update(bits)
        return bits

    def gives(self, name: str, width: int = 1) -> Bits:
        """Declare an output port and return its bits, lowest first."""
        self.ports.append(("output", name, width))
        bits = self._bits(name, width)
        self.read.update(bits)
        return bits

    def wire(self, name: str, width: int = 1) -> Bits:
        """Declare an inner bus and return its bits, lowest first."""
        self.wires.append((name, width))
        return self._bits(name, width)

    def _drive(self, bits: Sequence[str]) -> None:
        for bit in bits:
            if bit in self.driven:
                raise ValueError(f"{self.name}: {bit} is driven twice")
            self.driven.add(bit)

    def join(self, bits: Sequence[str]) -> str:
        """Expression for some bits: a bus, a part of one, or a concatenation."""
        if len(bits) == 1:
            return bits[0]
        name, _, low = bits[0].partition("[")
        whole = bits_of(name, self.widths.get(name, 1))
        if list(bits) == whole:
            return name
        first = int(low.rstrip("]") or 0)
        if list(bits) == whole[first : first + len(bits)]:
            return f"{name}[{first + len(bits) - 1}:{first}]"
        return "{" + ", ".join(reversed(bits)) + "}"

    def place(self, master: str, inputs: Sequence[str], outputs: Sequence[str], name: str = "") -> None:
        """Add one cell between nets that exist."""
        pins_in, pins_out = PINS[base_of(master)]
        if (len(inputs), len(outputs)) != (len(pins_in), len(pins_out)):
            raise ValueError(f"{self.name}: {master} has {len(pins_in)} inputs and {len(pins_out)} outputs")
        self.read.update(inputs)
        self._drive(outputs)
        pairs = [*zip(pins_in, inputs, strict=True), *zip(pins_out, outputs, strict=True)]
        listed = ", ".join(f".{pin}({net})" for pin, net in pairs)
        self.body.append(f"  {master} {name or f'u{self.cells}'} ({listed});")
        self.cells += 1

    def gate(self, master: str, *inputs: str) -> Bits:
        """Add one cell with new nets at its outputs and return these."""
        outputs = [f"n{self.loose + i}" for i in range(len(PINS[base_of(master)][1]))]
        self.loose += len(outputs)
        self.place(master, inputs, outputs)
        return outputs

    def array(self, master: str, name: str, pins: Mapping[str, Bits]) -> None:
        """Add an array of cells; a pin takes one bit for each member, or one bit for all."""
        count = max((len(bits) for bits in pins.values()), default=0)
        outputs = PINS[base_of(master)][1]
        for pin, bits in pins.items():
            if len(bits) not in (1, count):
                raise ValueError(f"{self.name}: {name}.{pin} has {len(bits)} bits, want 1 or {count}")
            if pin in outputs:
                self._drive(bits)
            else:
                self.read.update(bits)
        listed = ", ".join(f".{pin}({self.join(bits)})" for pin, bits in pins.items())
        self.body.append(f"  {master} {name} [{count - 1}:0] ({listed});")

    def filler(self, master: str, name: str, count: int) -> None:
        """Add an array of cells without signal pins."""
        self.body.append(f"  {master} {name} [{count - 1}:0] ();")

    def child(self, module: Module, name: str, pins: Mapping[str, Bits]) -> None:
        """Add an instance of another module; every port must be given."""
        for direction, port, width in module.ports:
            if len(pins[port]) != width:
                raise ValueError(f"{self.name}: {name}.{port} has {len(pins[port])} bits, want {width}")
            if direction == "output":
                self._drive(pins[port])
            else:
                self.read.update(pins[port])
        listed = ", ".join(f".{port}({self.join(pins[port])})" for _, port, _ in module.ports)
        self.body.append(f"  {module.name} {name} ({listed});")

    def text(self) -> str:
        """Verilog of the module.

        Raises
        ------
        ValueError
            A bit is read and not driven.
        """
        lost = sorted(self.read - self.driven)
        if lost:
            raise ValueError(f"{self.name}: {', '.join(lost[:5])} read and not driven")

        def declared(name: str, width: int) -> str:
            return name if width == 1 else f"[{width - 1}:0] {name}"

        ports = ",\n".join(f"  {direction} {declared(name, width)}" for direction, name, width in self.ports)
        lines = [f"// {self.remark}", f"module {self.name} (", ports, ");"]
        lines += [f"  wire {declared(name, width)};" for name, width in self.wires]
        lines += [f"  wire {', '.join(names)};" for names in _rows([f"n{i}" for i in range(self.loose)], 16)]
        return "\n".join([*lines, *self.body, "endmodule", ""])


def _rows(names: Sequence[str], size: int) -> list[Sequence[str]]:
    return [names[i : i + size] for i in range(0, len(names), size)]


class Designer:
    """Makes the modules of the chip from one stream of random numbers."""

    def __init__(self, seed: int) -> None:
        self.random = random.Random(seed)
        self.done: list[Module] = []

    def below(self, limit: int) -> int:
        """Return a whole number below `limit`; only `random()` is the same in every version of Python."""
        return int(self.random.random() * limit)

    def draw(self, weights: Mapping[str, int]) -> str:
        """Return a name, each as often as its weight says."""
        at = self.below(sum(weights.values()))
        for name, weight in weights.items():
            at -= weight
            if at < 0:
                return name
        raise ValueError("no weights")

    def cloud(self, m: Module, sources: Bits, size: int, wanted: int, palette: Mapping[str, int]) -> Bits:
        """Add `size` random gates behind `sources` and return `wanted` nets at their end.

        Inputs come mostly from young nets, so that the cloud has depth; nets nobody reads yet are preferred,
        so that little hangs loose.
        """
        nets = list(sources)
        fresh = list(sources)
        for _ in range(size):
            master = self.draw(palette)
            inputs: Bits = []
            while len(inputs) < len(PINS[base_of(master)][0]):
                if fresh and self.random.random() < 0.6:
                    net = fresh.pop(self.below(len(fresh)))
                else:
                    net = nets[max(0, len(nets) - 1 - self.below(24 + len(nets) // 4))]
                if net not in inputs:
                    inputs.append(net)
            outputs = m.gate(master, *inputs)
            nets += outputs
            fresh += outputs
        return nets[-wanted:]

    def rebuffer(self, m: Module, net: str, count: int, master: str) -> Bits:
        """Return `count` copies of a net behind buffers."""
        return [m.gate(master, net)[0] for _ in range(count)]

    def fir_tap(self) -> Module:
        """Return a filter tap: delay line, two partial products, two rows of adders."""
        m = Module("fir_tap", "one tap of the level filter: delay, partial products, two rows of adders")
        clk, x, c = m.takes("clk")[0], m.takes("x", 12), m.takes("c", 4)
        total, z, s = m.takes("sum_in", 16), m.gives("x_out", 12), m.gives("sum_out", 16)
        leaf = m.gate("buf_4", clk)
        m.array("dff_1", "delay", {"D": x, "CK": leaf, "Q": z})
        zero = m.gate("tielo_1")[0]
        rows = [[m.gate("and2_1", bit, c[k])[0] for bit in x] for k in (0, 1)]
        carry, first = zero, []
        for i in range(12):
            out, carry = m.gate("fa_1", rows[0][i], rows[1][i - 1] if i else zero, carry)
            first.append(out)
        first += [carry, rows[1][11]]
        signed = [m.gate("xor2_1", bit, c[2])[0] for bit in first]
        carry, second = c[2], []
        for i in range(16):
            out, carry = m.gate("fa_1", total[i], signed[min(i, 13)], carry)
            second.append(out)
        held = [m.gate("mux2_1", out, total[i], c[3])[0] for i, out in enumerate(second)]
        m.array("dff_1", "pipe", {"D": self.bundle(m, "held", held), "CK": leaf, "Q": s})
        m.filler("FILL_2", "gap", 6)
        return self.keep(m)

    def bundle(self, m: Module, name: str, bits: Bits) -> Bits:
        """Return a bus that follows single nets, each behind an inverter pair's worth of buffer."""
        bus = m.wire(name, len(bits))
        for net, bit in zip(bits, bus, strict=True):
            m.place("buf_2", [net], [bit])
        return bus

    def keep(self, m: Module) -> Module:
        """Add a module to the output and return it."""
        self.done.append(m)
        return m

    def stage(
        self, name: str, remark: str, width: int, size: int, palette: Mapping[str, int], flop: str
    ) -> Module:
        """Return a registered cloud of logic: `width` flops around `size` gates, with its own clock gate."""
        m = Module(name, remark)
        clk, rst_n, enable = m.takes("clk")[0], m.takes("rst_n")[0], m.takes("enable")[0]
        d, q = m.takes("d", width), m.gives("q", width)
        high = "_h" if flop.endswith("_h") else ""
        gated = m.gate(f"cg_1{high}", clk, enable)[0]
        leaves = self.rebuffer(m, gated, (width + 15) // 16, "buf_2_h" if high else "buf_4")
        ends = self.cloud(m, [*d, *q], size, width, palette)
        for i, (end, bit) in enumerate(zip(ends, q, strict=True)):
            pins = [end, leaves[i // 16]] + ([rst_n] if base_of(flop) == "dffr" else [])
            m.place(flop, pins, [bit], f"state{i}")
        if base_of(flop) != "dffr":
            m.gate("buf_2", rst_n)
        return self.keep(m)

    def correlator(self) -> Module:
        """Return a correlator: a shift register, a compare with the code, a tree that counts matches."""
        m = Module("correlator", "one finger of the correlator: shift register, compare, count of matches")
        clk, chip, code = m.takes("clk")[0], m.takes("chip")[0], m.takes("code", 16)
        count, last = m.gives("count", 5), m.gives("chip_out")
        leaf = m.gate("buf_4", clk)[0]
        line = m.wire("line", 16)
        for i, bit in enumerate(line):
            m.place("dff_1", [line[i - 1] if i else chip, leaf], [bit])
        m.place("buf_2", [line[15]], last)
        match = [m.gate("xor2_1", line[i], code[i])[0] for i in range(16)]
        columns: list[Bits] = [match, [], [], [], [], []]
        for place in range(5):
            column = columns[place]
            while len(column) > 1:
                if len(column) > 2:
                    out, carry = m.gate("fa_1", column.pop(0), column.pop(0), column.pop(0))
                else:
                    out, carry = m.gate("ha_1", column.pop(0), column.pop(0))
                column.append(out)
                columns[place + 1].append(carry)
        for place, bit in enumerate(count):
            m.place("dff_1", [columns[place][0], leaf], [bit])
        return self.keep(m)

    def buffer_memory(self) -> Module:
        """Return a small memory of latches with a read tree."""
        m = Module("frame_store", "sixteen words of eight latches, read through a tree")
        clk, write, address = m.takes("clk")[0], m.takes("write")[0], m.takes("address", 4)
        d, q = m.takes("d", 8), m.gives("q", 8)
        inverse = [m.gate("inv_2", a)[0] for a in address]
        rows: list[Bits] = []
        for word in range(16):
            pick = [address[i] if word >> i & 1 else inverse[i] for i in range(4)]
            low = m.gate("nand2_1", pick[0], pick[1])[0]
            high = m.gate("nand2_1", pick[2], pick[3])[0]
            hit = m.gate("nor2_1", low, high)[0]
            strobe = m.gate("cg_1", clk, m.gate("and2_1", hit, write)[0])
            row = m.wire(f"word{word}", 8)
            m.array("lat_1", f"row{word}", {"D": d, "G": strobe, "Q": row})
            rows.append(row)
        for bit in range(8):
            level = [row[bit] for row in rows]
            for i in range(4):
                pairs = list(zip(level[::2], level[1::2], strict=True))
                level = [m.gate("mux2_1", a, b, address[i])[0] for a, b in pairs]
            m.place("buf_2", level, [q[bit]])
        return self.keep(m)

    def counter(self, width: int) -> Module:
        """Return a ripple of half adders in high threshold, made of simple gates."""
        m = Module("tide_timer", "the timer that never sleeps")
        clk, rst_n, q = m.takes("clk")[0], m.takes("rst_n")[0], m.gives("q", width)
        carry = m.gate("tiehi_1")[0]
        for i, bit in enumerate(q):
            none = m.gate("nor2_1_h", bit, carry)[0]
            both = m.gate("nand2_1_h", bit, carry)[0]
            carry = m.gate("inv_1_h", both)[0]
            step = m.gate("nor2_1_h", none, carry)[0]
            m.place("dffr_1_h", [step, clk, rst_n], [bit], f"state{i}")
        m.gate("buf_2_h", carry)
        return self.keep(m)

    def dsp(self) -> Module:
        """Return the signal-processing domain."""
        taps = 28
        tap = self.fir_tap()
        window = self.stage("window", "weights of the spectral window", 32, 420, LOW_THRESHOLD, "dff_1")
        tide = self.stage("tide_model", "harmonics of the tide", 48, 900, MIXED_THRESHOLD, "dff_1")
        control = self.stage("dsp_control", "sequencer of the filter", 24, 260, MIXED_THRESHOLD, "dffr_1")
        m = Module("dsp", "domain: filters the water level; sleeps most of the day")
        clk, rst_n, run = m.takes("clk")[0], m.takes("rst_n")[0], m.takes("run")[0]
        level, out = m.takes("level", 12), m.gives("level_out", 16)
        trunk = m.gate("buf_4", m.gate("cg_1", clk, run)[0])[0]
        branches = self.rebuffer(m, trunk, 8, "buf_4")
        state = m.wire("state", 24)
        feed = [*level, *out[:12]]
        shared = {"rst_n": [rst_n], "enable": [run]}
        m.child(control, "u_control", {"clk": [branches[0]], **shared, "d": feed, "q": state})
        weights = m.wire("weights", 32)
        pins = {"clk": [branches[1]], **shared, "d": [*state, *level[:8]], "q": weights}
        m.child(window, "u_window", pins)
        harmonics = m.wire("harmonics", 48)
        m.child(tide, "u_tide", {"clk": [branches[2]], **shared, "d": [*weights, *out], "q": harmonics})
        zero = m.gate("tielo_1")[0]
        x, total = level, [zero] * 16
        coefficients = [*weights, *harmonics]
        for i in range(taps):
            z, s = m.wire(f"x{i}", 12), m.wire(f"s{i}", 16)
            c = [coefficients[(4 * i + k) % 80] for k in range(4)]
            pins = {"clk": [branches[3 + i % 5]], "x": x, "c": c, "sum_in": total, "x_out": z, "sum_out": s}
            m.child(tap, f"u_tap{i}", pins)
            x, total = z, s
        m.array("dff_1", "result", {"D": total, "CK": [branches[0]], "Q": out})
        m.array("buf_2", "spare", {"A": x, "Y": m.wire("unused", 12)})
        m.filler("decap_4", "reservoir", 160)
        m.filler("FILL_1", "gap1", 120)
        m.filler("FILL_4", "gap4", 80)
        m.filler("FILL_8", "gap8", 24)
        return self.keep(m)

    def link(self) -> Module:
        """Return the radio baseband domain."""
        finger, store = self.correlator(), self.buffer_memory()
        framer = self.stage("framer", "frames, checksum and retries", 40, 520, MIXED_THRESHOLD, "dffr_1")
        scrambler = self.stage("scrambler", "whitening and coding", 32, 300, LOW_THRESHOLD, "dff_1")
        m = Module("link", "domain: baseband of the radio; wakes a few times an hour")
        clk, rst_n, run = m.takes("clk")[0], m.takes("rst_n")[0], m.takes("run")[0]
        chip, data, sent = m.takes("chip")[0], m.takes("data", 16), m.gives("sent", 8)
        trunk = m.gate("buf_4", m.gate("cg_1", clk, run)[0])[0]
        branches = self.rebuffer(m, trunk, 4, "buf_4")
        frame, code = m.wire("frame", 40), m.wire("code", 32)
        counts: Bits = []
        at = chip
        for i in range(8):
            count, last = m.wire(f"count{i}", 5), m.wire(f"chip{i}")
            pins = {"clk": [branches[i % 2]], "chip": [at], "code": code[8 * (i % 3) : 8 * (i % 3) + 16]}
            m.child(finger, f"u_finger{i}", {**pins, "count": count, "chip_out": last})
            counts += count
            at = last[0]
        read = m.wire("read", 8)
        shared = {"rst_n": [rst_n], "enable": [run]}
        pins = {"clk": [branches[2]], **shared, "d": [*data, *read, *counts[:16]], "q": frame}
        m.child(framer, "u_framer", pins)
        pins = {"clk": [branches[3]], **shared, "d": [*frame[:15], at, *counts[24:]], "q": code}
        m.child(scrambler, "u_scrambler", pins)
        pins = {"clk": [branches[2]], "write": [frame[12]], "address": frame[8:12], "d": frame[:8], "q": read}
        m.child(store, "u_store", pins)
        m.array("dff_1", "out", {"D": read, "CK": [branches[3]], "Q": sent})
        m.filler("decap_4", "reservoir", 60)
        m.filler("FILL_2", "gap2", 70)
        m.filler("FILL_4", "gap4", 40)
        return self.keep(m)

    def keeper(self) -> Module:
        """Return the domain that stays on."""
        timer = self.counter(32)
        plan = self.stage("wake_plan", "who wakes when", 24, 180, HIGH_THRESHOLD, "dffr_1_h")
        m = Module("keeper", "domain: always on; keeps time, wakes the others and holds their outputs")
        clk, rst_n, level = m.takes("clk")[0], m.takes("rst_n")[0], m.takes("level", 16)
        wake, held = m.gives("wake", 2), m.gives("level_held", 16)
        leaf = m.gate("buf_2_h", clk)
        now, todo = m.wire("now", 32), m.wire("todo", 24)
        m.child(timer, "u_timer", {"clk": leaf, "rst_n": [rst_n], "q": now})
        one = m.gate("tiehi_1")
        d = [*now[8:24], *held[:8]]
        m.child(plan, "u_plan", {"clk": leaf, "rst_n": [rst_n], "enable": one, "d": d, "q": todo})
        m.array("and2_1_h", "hold", {"A": level, "B": [todo[0]], "Y": held})
        m.place("buf_2_h", [todo[1]], [wake[0]])
        m.place("buf_2_h", [todo[2]], [wake[1]])
        m.filler("decap_4_h", "reservoir", 24)
        m.filler("FILL_2", "gap", 30)
        return self.keep(m)

    def chip(self) -> list[Module]:
        """Return all modules, the top last."""
        keeper, dsp, link = self.keeper(), self.dsp(), self.link()
        m = Module("buoy_hub", "the chip")
        clk, rst_n = m.takes("clk")[0], m.takes("rst_n")[0]
        level, chip, sent = m.takes("level", 12), m.takes("chip"), m.gives("sent", 8)
        wake, filtered, held = m.wire("wake", 2), m.wire("filtered", 16), m.wire("held", 16)
        pins = {"clk": [clk], "rst_n": [rst_n], "level": filtered, "wake": wake, "level_held": held}
        m.child(keeper, "u_keeper", pins)
        pins = {"clk": [clk], "rst_n": [rst_n], "run": [wake[0]], "level": level, "level_out": filtered}
        m.child(dsp, "u_dsp", pins)
        pins = {"clk": [clk], "rst_n": [rst_n], "run": [wake[1]], "chip": chip, "data": held, "sent": sent}
        m.child(link, "u_link", pins)
        m.filler("FILL_8", "rim", 16)
        return [*self.done, m]


def netlist(seed: int = SEED) -> str:
    """Return the Verilog text of the chip.

    Parameters
    ----------
    seed
        Start of the random stream; the shipped file has the default.
    """
    return "\n".join([HEADER.format(seed=seed), *(m.text() for m in Designer(seed).chip())])


def main() -> None:
    """Write the netlist."""
    parser = argparse.ArgumentParser(description="Write the gate-level netlist of the demonstration.")
    parser.add_argument("--seed", type=int, default=SEED, help="start of the random stream (%(default)s)")
    parser.add_argument(
        "--out", type=Path, default=Path(__file__).with_name("buoy_hub.v"), help="file to write"
    )
    options = parser.parse_args()
    options.out.write_text(netlist(options.seed), encoding="utf-8", newline="\n")


if __name__ == "__main__":
    main()
