"""Cells of the leakage table against the same circuits solved outside.

Node voltages come from scipy.optimize.root on Kirchhoff's current law, written here once more from the
netlist; only the device law is hushrail's.
"""

from __future__ import annotations

from pathlib import Path
from typing import TypeAlias

import hushrail
import numpy as np
import pytest
import scipy.optimize
import small_process
from numpy.typing import NDArray

VDD_V = small_process.VDD_V
SIZES = {
    "nch": {"w": 4e-7, "l": 6e-8, "ad": 4e-14, "as_": 4e-14, "pd": 1e-6, "ps": 1e-6},
    "pch": {"w": 6e-7, "l": 6e-8, "ad": 6e-14, "as_": 6e-14, "pd": 1.4e-6, "ps": 1.4e-6},
}

Transistor: TypeAlias = tuple[str, str, str, str]  # model, drain, gate, source


def nand(inputs: str) -> list[Transistor]:
    nodes = ["Y", *(f"n{i}" for i in range(1, len(inputs))), "VSS"]
    up: list[Transistor] = [("pch", "Y", pin, "VDD") for pin in inputs]
    return up + [("nch", nodes[i], pin, nodes[i + 1]) for i, pin in enumerate(inputs)]


class Circuit:
    """Transistors between named nodes, wells on the rails."""

    def __init__(
        self, process: hushrail.Process, temp_c: float, parts: list[Transistor], pins: dict[str, float]
    ) -> None:
        self.parts = parts
        self.held = {"VDD": VDD_V, "VSS": 0.0} | pins
        inside = [part[1] for part in parts] + [part[3] for part in parts]
        self.free = list(dict.fromkeys(node for node in inside if node not in self.held))
        self.devices = {
            model: process.transistor(model, temp_c=temp_c, **size) for model, size in SIZES.items()
        }

    def at(self, x: NDArray[np.float64]) -> tuple[dict[str, float], NDArray[np.float64], NDArray[np.float64]]:
        """Current into the parts at every held node and well, imbalance of the free nodes, and its slopes."""
        v = self.held | dict(zip(self.free, map(float, x), strict=True))
        into = dict.fromkeys([*self.held, "VNW", "VPW"], 0.0)
        balance, slopes = np.zeros(len(x)), np.zeros((len(x), len(x)))
        for model, *nodes in self.parts:
            well = "VPW" if model == "nch" else "VNW"
            bias = {
                "vd": v[nodes[0]],
                "vg": v[nodes[1]],
                "vs": v[nodes[2]],
                "vb": 0.0 if model == "nch" else VDD_V,
            }
            currents = self.devices[model].currents(**bias)
            conductances = self.devices[model].conductances(**bias)
            for i, node in enumerate([*nodes, well]):
                if node in self.free:
                    row = self.free.index(node)
                    balance[row] += currents[i]
                    for j, other in enumerate(nodes):
                        if other in self.free:
                            slopes[row, self.free.index(other)] += conductances[i, j]
                else:
                    into[node] += currents[i]
        return into, balance, slopes

    def solve(self, start: NDArray[np.float64]) -> dict[str, float]:
        """Currents at the held nodes and wells, the free ones balanced by SciPy."""
        _, _, slopes = self.at(start)
        scale = 1.0 / np.abs(slopes).max(axis=1)
        found = scipy.optimize.root(
            lambda x: self.at(x)[1] * scale,
            start,
            jac=lambda x: self.at(x)[2] * scale[:, None],
            method="hybr",
            options={"xtol": 1e-15, "maxfev": 2000},
        )
        # root() may say that it cannot do better than the last digit; judge by the balance itself
        into, balance, _ = self.at(found.x)
        assert np.abs(balance).max() < 1e-7 * max(map(abs, into.values())), found.message
        return into


CIRCUITS = {
    "inv": (nand("A"), ["A"]),
    "nand2": (nand("AB"), ["A", "B"]),
    "nand3": (nand("ABC"), ["A", "B", "C"]),
}


@pytest.mark.parametrize("temp_c", [-40.0, 25.0, 125.0])
@pytest.mark.parametrize("cell", list(CIRCUITS))
def test_cells_agree_with_an_outside_solution(
    process: hushrail.Process, small: Path, cell: str, temp_c: float
) -> None:
    parts, pins = CIRCUITS[cell]
    table = hushrail.cells(small, cell)
    rows = [row for row in table.rows if row.corner.endswith(f" {temp_c:.0f} °C")]
    assert len(rows) == 2 ** len(pins)
    for row in rows:
        bits = dict(word.split("=") for word in row.state.split())
        held = {pin: VDD_V * int(bits[pin]) for pin in pins}
        circuit = Circuit(process, temp_c, parts, held)
        start = np.array([VDD_V * int(bits["Y"])] + [0.05] * (len(circuit.free) - 1))
        # internal nodes above the topmost off device follow the output
        for i, pin in enumerate(pins[:-1]):
            if int(bits[pin]) and all(int(bits[p]) for p in pins[: i + 1]):
                start[i + 1] = max(VDD_V * int(bits["Y"]) - 0.35, 0.0)
        into = circuit.solve(start)
        supplies = into["VDD"] + into["VNW"] + sum(into[pin] for pin in pins if held[pin] > 0.0)
        # 1e-6: on devices lose their nanovolts to the spacing of numbers near 1 V
        assert row.power_w == pytest.approx(VDD_V * supplies, rel=1e-6), row.state
        for port, wanted in row.ports.items():
            assert wanted == pytest.approx(into[port], rel=1e-6, abs=1e-6 * supplies), (row.state, port)


def test_a_stack_of_two_leaks_less_than_one(small: Path) -> None:
    power = {row.state: row.power_w for row in hushrail.cells(small, "nand2").rows if " 25 °C" in row.corner}
    assert power["A=0 B=0 Y=1"] < 0.5 * min(power["A=0 B=1 Y=1"], power["A=1 B=0 Y=1"])
