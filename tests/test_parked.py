"""States from connections and the search of a parked vector."""

from __future__ import annotations

import csv
import re
from pathlib import Path

import hushrail
import pytest
from conftest import Run
from hushrail import parked
from test_open_data import CARDS, DATA

NETLIST = """
module top (a, b, g, y);
  input a, b, g; output y;
  wire m, q;
  nand2 u1 (.A(a), .B(b), .Y(m));
  latch u2 (.D(m), .G(g), .Q(q));
  inv u3 (.A(q), .Y(y));
endmodule
"""


@pytest.fixture
def study(small: Path) -> Path:
    (small.parent / "top.v").write_text(NETLIST, encoding="utf-8")
    text = small.read_text(encoding="utf-8").replace('counts = "counts.csv"', 'verilog = ["top.v"]')
    assert "top.v" in text
    head, scheme, rest = text.partition("[[scheme]]")
    small.write_text(head + "[domain.parked]\nnets = { g = 0, a = 1 }\n\n" + scheme + rest, encoding="utf-8")
    return small


def test_states_follow_from_what_is_held(study: Path) -> None:
    found = parked.states(study)
    assert found.nets["a"] == 1.0
    assert found.nets["m"] == 0.5  # b is not given
    c = found.certainty
    assert (c.known, c.probable, c.assumed, c.opaque) == (0, 0, 3, 0)
    text = study.read_text(encoding="utf-8").replace("a = 1 }", "a = 0 }\nregisters = { u2 = 1 }")
    study.write_text(text, encoding="utf-8")
    found = parked.states(study)
    assert (found.nets["m"], found.nets["y"]) == (1.0, 0.0)
    assert found.cells["inv"] == {"A=1 Y=0": 1.0}
    # b still is not given, so that the state of u1 is not known; a decides its output all the same
    assert (found.certainty.known, found.certainty.assumed) == (2, 1)
    result = hushrail.estimate(study)
    assert result.domains[0].certainty == found.certainty
    assert not result.failures


def test_the_search_finds_the_least_of_all_vectors(study: Path, run: Run) -> None:
    found = parked.search(study, registers=True, flips=100)
    assert set(found.nets) == {"b"}
    assert set(found.registers) == {"u2"}
    assert found.bound_w <= found.power_w <= found.random_mean_w
    assert found.certainty.known == 3
    every = []
    for b in (0, 1):
        for kept in (0, 1):
            text = study.read_text(encoding="utf-8")
            study.write_text(
                text.replace("a = 1 }", f"a = 1, b = {b} }}\nregisters = {{ u2 = {kept} }}"), "utf-8"
            )
            first = hushrail.estimate(study).points[0]
            every.append(first.ungated_power_w)
            study.write_text(text, encoding="utf-8")
    assert found.power_w == pytest.approx(min(every), rel=1e-9)
    done = run("park", study, "--registers", "--csv", "out.csv")
    assert done.returncode == 0, done.stderr
    assert "[domain.parked.registers]" in done.stdout
    assert "register,u2," in (study.parent / "out.csv").read_text(encoding="utf-8")


def test_names_that_are_not_there(study: Path, run: Run) -> None:
    text = study.read_text(encoding="utf-8")
    study.write_text(text.replace("{ g = 0", "{ gg = 0"), encoding="utf-8")
    with pytest.raises(hushrail.ReadError, match="net `gg` is not in the netlist"):
        parked.states(study)
    study.write_text(text, encoding="utf-8")
    assert "did you mean" in run("park", study, "--domain", "cor").stderr
    assert run("park", study, "--flips", "-1").returncode == 2


NETLISTS = DATA.parent / "netlists"
PREFIX = "sky130_fd_sc_hd__"
OPEN = """\
[process.tt]
files = [{cards}]
[models]
nfet_01v8 = "sky130_fd_pr__nfet_01v8"
pfet_01v8_hvt = "sky130_fd_pr__pfet_01v8_hvt"
special_nfet_01v8 = "sky130_fd_pr__special_nfet_01v8"
nwell_psub = "sky130_fd_pr__model__parasitic__diode_ps2nw"
diode_pw2nd_05v5 = "sky130_fd_pr__diode_pw2nd_05v5"
diode_pw2nd = "sky130_fd_pr__diode_pw2nd_05v5"
[cells]
netlists = ["{data}/netlists/geometry.spice"]
[[corner]]
name = "tt"
process = "tt"
vdd_v = 1.8
temp_c = 100
[[domain]]
name = "fpu"
verilog = ["{netlist}"]
[domain.policy]
"*__fill*" = "zero"
"*__tap*" = "zero"
"*decap*" = "zero"
[domain.parked]
nets = {{ {nets} }}
registers = {{ "*" = {kept} }}
[[scheme]]
name = "on"
"""


def _published() -> dict[str, tuple[list[str], dict[str, str]]]:
    """Inputs and output functions of combinational cells as the kit publishes them."""
    cells = {}
    with (DATA / "cells.csv").open(encoding="utf-8", newline="") as file:
        for row in csv.DictReader(file):
            if row["sequential"]:
                continue
            inputs, outputs = [], {}
            for pin in row["pins"].split("; "):
                name, _, kind = pin.partition(":")
                if kind.startswith("input"):
                    inputs.append(name)
                elif "=" in kind:
                    function = kind.split("=", 1)[1].split(" three_state")[0]
                    words = re.sub(r"!", " not ", function).replace("&", " and ").replace("|", " or ")
                    outputs[name] = words
            if outputs:
                cells[PREFIX + row["cell"]] = (inputs, outputs)
    return cells


def _by_name(master: str, pins: set[str]) -> tuple[list[str], dict[str, str]] | None:
    """The function a cell's name states, for cells whose published function is kept apart from the data.

    Delays repeat; and, or, nand, nor of all inputs; ``a211o``: AND within a letter, OR between letters;
    ``o211a`` the other way; a pin ``_N`` is inverted and an output ``Y`` too (naming rule of the kit, as
    published functions show).
    """
    inputs = sorted(p for p in pins if re.fullmatch(r"[A-D]\d?(_N)?", p))
    out = next((p for p in ("X", "Y") if p in pins), None)
    short = master.removeprefix(PREFIX)
    if out is None or not inputs:
        return None
    words = {p: f"(not {p})" if p.endswith("_N") else p for p in inputs}
    if "dly" in short:
        return inputs, {out: words[inputs[0]]}
    if simple := re.match(r"(n?and|n?or)\d", short):
        glue = " and " if simple[1].endswith("and") else " or "
        whole = glue.join(words.values())
    elif re.match(r"[ao]\d", short):
        inner, outer = (" and ", " or ") if short[0] == "a" else (" or ", " and ")
        letters = dict.fromkeys(p[0] for p in inputs)
        groups = [inner.join(words[p] for p in inputs if p[0] == letter) for letter in letters]
        whole = outer.join(f"({g})" for g in groups)
    else:
        return None
    return inputs, {out: f"not ({whole})" if out == "Y" else whole}


@pytest.mark.skipif(not NETLISTS.is_dir(), reason="skipped: no open netlists at ../shared/data/netlists")
@pytest.mark.parametrize(("bit", "kept"), [(0, 0), (1, 1)])
def test_states_of_a_real_netlist_are_those_of_the_published_functions(
    tmp_path: Path, bit: int, kept: int
) -> None:
    """Every net of `tt_um_fpu`, evaluated again in Python from published functions and names."""
    cards = ", ".join(f'"{(DATA / path).as_posix()}"' for path in CARDS)
    netlist = NETLISTS / "tt_um_fpu.v"
    study = tmp_path / "study.toml"
    ports = {"clk": 0, "ena": 1, "rst_n": 1}
    ports |= {f"{bus}[{k}]": (bit + k) % 2 for bus in ("ui_in", "uio_in") for k in range(8)}
    nets = ", ".join(f'"{name}" = {value}' for name, value in ports.items())
    study.write_text(
        OPEN.format(cards=cards, data=DATA.as_posix(), netlist=netlist.as_posix(), nets=nets, kept=kept),
        "utf-8",
    )
    found = parked.states(study)
    cells = _published()
    text = netlist.read_text(encoding="utf-8")
    values: dict[str, bool] = {name: bool(value) for name, value in ports.items()}
    todo = []
    for match in re.finditer(r"^ *(sky130_fd_sc_hd__\w+) +(\S+) +\((.*?)\);", text, re.M | re.S):
        master, pins = match[1], dict(re.findall(r"\.(\w+)\s*\(\s*([^()]*?)\s*\)", match[3]))
        pins = {pin: net.lstrip("\\").strip() for pin, net in pins.items()}
        if "dfxtp" in master or "dfrtp" in master or "dfstp" in master:
            values[pins["Q"]] = bool(kept)
        elif master in cells:
            todo.append((master, pins))
        elif named := _by_name(master, set(pins)):
            cells[master] = named
            todo.append((master, pins))
        elif "conb" in master:
            values |= {pins[p]: p == "HI" for p in ("HI", "LO") if p in pins}
    assert len(todo) > 5000
    while todo:
        waiting = []
        for master, pins in todo:
            inputs, outputs = cells[master]
            if all(pins[p] in values for p in inputs):
                names = {p: values[pins[p]] for p in inputs}
                for pin, function in outputs.items():
                    if pin in pins:
                        values[pins[pin]] = bool(eval(function, {"__builtins__": {}}, names))
            else:
                waiting.append((master, pins))
        if len(waiting) == len(todo):
            break
        todo = waiting
    compared = 0
    for net, value in values.items():
        got = found.nets.get(net)
        if got is not None:
            assert got == float(value), net
            compared += 1
    assert compared > 8000
    assert found.certainty.known > 0.9 * (found.certainty.known + found.certainty.assumed)


@pytest.mark.skipif(not NETLISTS.is_dir(), reason="skipped: no open netlists at ../shared/data/netlists")
def test_the_search_beats_random_vectors_on_a_real_netlist(tmp_path: Path) -> None:
    """Inputs and scan-loaded registers of `tt_um_fpu`: 5 % below the best of 64 random vectors."""
    cards = ", ".join(f'"{(DATA / path).as_posix()}"' for path in CARDS)
    netlist = NETLISTS / "tt_um_fpu.v"
    text = OPEN.format(cards=cards, data=DATA.as_posix(), netlist=netlist.as_posix(), nets="clk = 0", kept=0)
    study = tmp_path / "study.toml"
    study.write_text(text.replace('registers = { "*" = 0 }\n', ""), "utf-8")
    found = parked.search(study, registers=True, flips=300)
    assert found.bound_w < found.power_w < 0.95 * found.random_least_w
    assert found.registers
    assert "clk" not in found.nets
    assert parked.search(study, registers=True, flips=300) == found
