"""An invented process of two cards, five cells and a study over them, written where a test wants them.

All numbers are made up. Every mechanism is switched on: channel, gidl, gate tunnelling and junctions.
"""

from __future__ import annotations

from pathlib import Path

VDD_V = 1.0

_SHARED = """\
+ level = 54 version = 4.7 mobmod = 0 igcmod = 1 igbmod = 1 diomod = 1 tnom = 25
+ lmin = 0.05u lmax = 10u wmin = 0.1u wmax = 100u
+ toxe = 2.1n xj = 30n ndep = 3e18 ngate = 2e20 k1 = 0.32 lpe0 = 8n
+ dvt0 = 0.5 dvt1 = 0.6 eta0 = 0.3 dsub = 0.6 voff = -0.12 nfactor = 1.3
+ vsat = 9e4 a0 = 1 ua = 4e-10 ub = 1e-18 rdsw = 150
+ agidl = 4e-9 bgidl = 2.3e9 cgidl = 0.3 egidl = 0.35
+ toxref = 2.1n ntox = 1.5 dlcig = 3n
+ jss = 1e-6 jsws = 1e-13 jswgs = 1e-13 njs = 1 xtis = 3
+ cjs = 1e-3 pbs = 0.9 bvs = 9 xjbvs = 0
"""

CARDS = f"""\
* cards of an invented process; nothing real
.model nch nmos
{_SHARED}+ vth0 = 0.42 u0 = 0.028
+ aigc = 1.31e-2 bigc = 1.7e-3 cigc = 0.075 aigsd = 1.46e-2 bigsd = 1.7e-3 cigsd = 0.075
.model pch pmos
{_SHARED}+ vth0 = -0.42 u0 = 0.010
+ aigc = 9.8e-3 bigc = 7.5e-4 cigc = 0.03 aigsd = 9.3e-3 bigsd = 7.5e-4 cigsd = 0.03
"""

N = "w=0.4u l=0.06u ad=0.04p as=0.04p pd=1u ps=1u"
P = "w=0.6u l=0.06u ad=0.06p as=0.06p pd=1.4u ps=1.4u"
PORTS = "VDD VSS VNW VPW"

CELLS = f"""\
* cells of the same invention
.subckt inv A Y {PORTS}
mp Y A VDD VNW pch {P}
mn Y A VSS VPW nch {N}
.ends
.subckt nand2 A B Y {PORTS}
mp1 Y A VDD VNW pch {P}
mp2 Y B VDD VNW pch {P}
mn1 Y A m VPW nch {N}
mn2 m B VSS VPW nch {N}
.ends
.subckt nand3 A B C Y {PORTS}
mp1 Y A VDD VNW pch {P}
mp2 Y B VDD VNW pch {P}
mp3 Y C VDD VNW pch {P}
mn1 Y A m VPW nch {N}
mn2 m B k VPW nch {N}
mn3 k C VSS VPW nch {N}
.ends
.subckt latch G D Q {PORTS}
*.PININFO G:I D:I Q:O
xi1 G gn {PORTS} inv
mn1 D G s VPW nch {N}
mp1 D gn s VNW pch {P}
xi2 s t {PORTS} inv
xi3 t Q {PORTS} inv
mn2 Q gn s VPW nch {N}
mp2 Q G s VNW pch {P}
.ends
"""

COUNTS = "cell,count\ninv,100\nnand2,60\nlatch,20\n"


SIZE = "length_m = 1e-7, finger_width_m = 2e-6, diffusion_m = 1e-7"
HEADER = f"{{ model = 'pch', width_m = 2e-5, overdrive_v = %s, {SIZE} }}"
FOOTER = f"{{ model = 'nch', width_m = 1e-5, {SIZE} }}"

STUDY = f"""\
title = "small"
[process.tt]
files = ["cards.lib"]
[cells]
netlists = ["cells.spice"]
[grid]
process = ["tt"]
vdd_v = [{VDD_V}]
temp_c = [-40, 25, 125]
[[domain]]
name = "core"
counts = "counts.csv"
[[scheme]]
name = "powered"
[[scheme]]
name = "header"
header = {HEADER % 0.0}
[[scheme]]
name = "header +0.2 V"
header = {HEADER % 0.2}
[[scheme]]
name = "footer"
footer = {FOOTER}
[[scheme]]
name = "both"
header = {HEADER % 0.0}
footer = {FOOTER}
"""


def wide(inputs: int) -> str:
    """Text of a NAND of many inputs: a cell that takes a while."""
    pins = [f"A{i}" for i in range(inputs)]
    nodes = ["Y", *(f"n{i}" for i in range(1, inputs)), "VSS"]
    lines = [f".subckt wide {' '.join(pins)} Y {PORTS}"]
    lines += [f"mp{i} Y {pin} VDD VNW pch {P}" for i, pin in enumerate(pins)]
    lines += [f"mn{i} {nodes[i]} {pin} {nodes[i + 1]} VPW nch {N}" for i, pin in enumerate(pins)]
    return "\n".join([*lines, ".ends"]) + "\n"


def write(folder: Path, **texts: str) -> Path:
    """Write cards.lib, cells.spice, counts.csv and study.toml; the path of the study.

    `texts` replaces any of cards, cells, counts and study.
    """
    files = {"cards": "cards.lib", "cells": "cells.spice", "counts": "counts.csv", "study": "study.toml"}
    usual = {"cards": CARDS, "cells": CELLS, "counts": COUNTS, "study": STUDY}
    for key, name in files.items():
        (folder / name).write_text(texts.get(key, usual[key]), encoding="utf-8")
    return folder / "study.toml"
