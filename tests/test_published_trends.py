"""Trends that the literature reports, looked for in what hushrail computes.

Each needs a real process or a network of switches, so bands are wide; the sources stand beside the checks.
Values marked "memory" were not looked up again.
"""

from __future__ import annotations

from pathlib import Path

import hushrail
import numpy as np
import pytest
from hushrail.awake import Load, keep, row
from scipy.optimize import brentq, least_squares
from test_open_data import CARDS, DATA

SKY130 = pytest.mark.skipif(not DATA.is_dir(), reason="skipped: no open data at ../shared/data/sky130")


@SKY130
def test_saturation_current_follows_a_power_below_two() -> None:
    """About 1.3 for short n-channels, towards 2 for long ones.

    Sakurai and Newton, JSSC 25 (1990) 584 (memory).
    """
    process = hushrail.Process.read(DATA / "cards" / "continuous_tt.spice")
    vg = np.linspace(0.9, 1.8, 10)

    def alpha(length_m: float) -> float:
        device = process.transistor("sky130_fd_pr__nfet_01v8", w=1e-6, l=length_m, temp_c=25.0)
        drain = np.abs(device.currents(vg=vg, vd=1.8, vs=0.0, vb=0.0)[..., 0])
        fit = least_squares(
            lambda x: np.log(x[0] * (vg - x[1]) ** x[2]) - np.log(drain),
            [1e-4, 0.5, 1.3],
            x_scale=[1e-4, 1, 1],
        )
        assert np.abs(fit.fun).max() < 0.05
        return float(fit.x[2])

    short, long = alpha(0.15e-6), alpha(1.5e-6)
    assert short == pytest.approx(1.3, rel=0.10)
    assert short < long < 2.05


def test_a_network_of_switches_is_smaller_than_one_switch_for_each_row() -> None:
    """Rows that are not busy together share a network's switches.

    Savings up to about 50 % against a switch for each cluster: Long and He, DAC 2003 (memory). Here the rows
    are eight, two of them busy at a time, 10 mA each, on a rail of 0.2 ohm a row; 50 mV may be lost.
    """
    rows, busy_a, idle_a, budget_v, segment_ohm = 8, 10e-3, 1e-3, 0.05, 0.2

    def worst(ohm: float) -> float:
        patterns = ((k, (k + 4) % rows) for k in range(4))
        lost = []
        for busy in patterns:
            loads = [Load.constant(busy_a if k in busy else idle_a) for k in range(rows)]
            lost.append(row(loads, range(rows), vdd_v=1.0, segment_ohm=segment_ohm, ohm=ohm).worst_v)
        return max(lost)

    alone_ohm = budget_v / busy_a
    shared_ohm = brentq(lambda r: worst(r) - budget_v, alone_ohm, 20 * alone_ohm, rtol=1e-6)
    saving = 1.0 - alone_ohm / shared_ohm  # width goes as 1/R
    assert 0.3 < saving < 0.75


SRAM = """\
.subckt sram6t bl blb wl vpwr vgnd vpb vnb
*.PININFO bl:I blb:I wl:I vpwr:P vgnd:G vpb:P vnb:G
xpl q qb vpwr vpb pfet_01v8_hvt w=0.42 l=0.15
xpr qb q vpwr vpb pfet_01v8_hvt w=0.42 l=0.15
xnl q qb vgnd vnb nfet_01v8 w=0.65 l=0.15
xnr qb q vgnd vnb nfet_01v8 w=0.65 l=0.15
xal bl wl q vnb nfet_01v8 w=0.42 l=0.15
xar blb wl qb vnb nfet_01v8 w=0.42 l=0.15
.ends
"""

STUDY = """\
[process.tt]
files = [{cards}]
[models]
nfet_01v8 = "sky130_fd_pr__nfet_01v8"
pfet_01v8_hvt = "sky130_fd_pr__pfet_01v8_hvt"
[cells]
netlists = ["sram.spice"]
scale_m = 1e-6
[cells.rails]
supply = ["vpwr"]
ground = ["vgnd"]
nwell = ["vpb"]
pwell = ["vnb"]
[[corner]]
name = "room"
process = "tt"
vdd_v = 1.8
temp_c = 25
[[domain]]
name = "memory"
counts = "counts.csv"
[domain.states.sram6t]
"bl & blb & !wl" = 1.0
[[scheme]]
name = "on"
"""


@SKY130
def test_a_memory_keeps_its_state_at_a_sixth_of_the_supply(tmp_path: Path) -> None:
    """Below 300 mV, with over 90 % of the leakage power saved, for a 4 kB memory in 0.13 um.

    Qin, Cao, Markovic, Vladimirescu and Rabaey, ISQED 2004 (abstract). The six-transistor cell is
    this test's own.
    """
    cards = ", ".join(f'"{(DATA / path).as_posix()}"' for path in CARDS[:2])
    (tmp_path / "sram.spice").write_text(SRAM, encoding="utf-8")
    (tmp_path / "counts.csv").write_text("cell,count\nsram6t,32768\n", encoding="utf-8")
    study = tmp_path / "study.toml"
    study.write_text(STUDY.format(cards=cards), encoding="utf-8")
    inputs = {"wl": False, "bl": True, "blb": True}
    found = keep(study, "sram6t", inputs=inputs, domain="memory")
    assert not found.failures
    level = found.levels[0]
    assert 0.05 < level.span_v < 0.3
    assert level.leak_a is not None
    assert level.full_leak_a is not None
    power, full = level.leak_a * level.span_v, level.full_leak_a * 1.8
    assert 1.0 - power / full > 0.9
