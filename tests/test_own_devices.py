"""Compact and tabulated devices in Python: the same as those a study names."""

from __future__ import annotations

import csv
import itertools
import pickle
from pathlib import Path
from typing import Any

import hushrail
import numpy as np
import pytest
import small_process
from hushrail import CompactModel, Process, RangeError, ReadError, TableModel

MODEL = CompactModel.generic("generic 65 nm n")
NUMBERS: dict[str, Any] = {
    "vt0_v": 0.4,
    "slope_n": 1.4,
    "dibl_v_v": 0.05,
    "body_sqrt_v": 0.4,
    "phi_v": 0.9,
    "mobility_m2_vs": 0.03,
    "oxide_m": 2e-9,
}


def test_a_compact_device_is_a_device() -> None:
    one = MODEL.device(w_m=1e-6, l_m=65e-9, temp_c=85.0)
    assert isinstance(one, hushrail.Device)
    assert (one.polarity, one.temp_c, one.oxide_m, one.has_gidl) == ("n", 85.0, 1.85e-9, True)
    four = MODEL.device(w_m=1e-6, l_m=65e-9, temp_c=85.0, m=4.0)
    at: dict[str, Any] = {"vd": [0.1, 1.1], "vg": [[0.0], [0.5]]}
    assert (four.currents(**at) == 4.0 * one.currents(**at)).all()
    with_junctions = MODEL.device(w_m=1e-6, l_m=65e-9, temp_c=85.0, ad_m2=1e-12, pd_m=4e-6)
    extra = with_junctions.currents(vd=1.1, vg=0.0)[0] - one.currents(vd=1.1, vg=0.0)[0]
    # generation of the area and the edge of the drain, at the least
    assert extra > MODEL.parameters["generation_a_m2"] * 1e-12


def test_numbers_are_those_given() -> None:
    bare = CompactModel("p", gidl_follows_gap=False, **NUMBERS)
    assert bare.polarity == "p"
    assert not bare.gidl_follows_gap
    assert {name: bare.parameters[name] for name in NUMBERS} == NUMBERS
    assert bare.parameters["nominal_c"] == 27.0
    assert "saturation_m_s" not in bare.parameters
    assert bare.replace(vt0_v=0.5).parameters["vt0_v"] == 0.5
    assert bare.replace(vt0_v=0.4) == bare
    assert len({bare, bare.replace(vt0_v=0.5), bare.replace(vt0_v=0.4)}) == 2
    assert pickle.loads(pickle.dumps(bare)) == bare
    table = {row.name: row for row in CompactModel.parameter_table()}
    assert table["mobility_m2_vs"].unit == "m²/(V·s)"
    assert table["mobility_m2_vs"].logarithmic
    assert not table["nominal_c"].fitted
    assert table.keys() == MODEL.parameters.keys()
    for name in CompactModel.generic_names():
        for number, x in CompactModel.generic(name).parameters.items():
            assert table[number].low <= x <= table[number].high
            assert table[number].spread > 0.0


@pytest.mark.parametrize("name", ["nx", "n.x 1"])
def test_the_text_of_a_study_reads_back_identical(name: str) -> None:
    odd = MODEL.replace(vt0_v=0.1 + 0.2, halo_m3=1e24 / 3.0, generation_a_m=1e-11 / 7.0)
    assert CompactModel.from_toml(odd.to_toml(name)) == odd
    assert CompactModel.from_toml('[device.a]\ngeneric = "generic 65 nm n"\n') == MODEL


@pytest.mark.parametrize(
    ("text", "wanted"),
    [
        ("[device.a", "not a table of a study"),
        (MODEL.to_toml("a") + MODEL.to_toml("b"), "the text has `a`, `b`; want one"),
        ('[device.a]\ngeneric = "generic 3 nm n"\n', "generic 3 nm n"),
        ('[device.a]\ncompact = { polarity = "n" }\n', "missing field"),
    ],
)
def test_text_that_is_no_device_is_refused(text: str, wanted: str) -> None:
    with pytest.raises((RangeError, ReadError)) as caught:
        CompactModel.from_toml(text)
    assert wanted in str(caught.value)


def test_impossible_models_are_refused() -> None:
    with pytest.raises(RangeError, match=r"`vt0_v` is missing; want -2\.0 to 3\.0 V"):
        CompactModel("n", **{k: x for k, x in NUMBERS.items() if k != "vt0_v"})
    with pytest.raises(RangeError, match="no `vt_v`; did you mean `vt0_v`"):
        MODEL.replace(vt_v=0.4)
    with pytest.raises(RangeError, match=r"`oxide_m` is 1\.8 m; want"):
        MODEL.replace(oxide_m=1.8)
    with pytest.raises(RangeError, match="`gidl_a_s` is NaN"):
        MODEL.replace(gidl_a_s=float("nan"))
    with pytest.raises(RangeError, match="polarity is `x`; want `n` or `p`"):
        CompactModel("x", **NUMBERS)
    with pytest.raises(RangeError, match="want a size above zero"):
        MODEL.device(w_m=0.0, l_m=1e-7)
    with pytest.raises(RangeError, match="temperature 400"):
        MODEL.device(w_m=1e-6, l_m=1e-7, temp_c=400.0)
    with pytest.raises(RangeError, match="m is 0; want a number of devices"):
        MODEL.device(w_m=1e-6, l_m=1e-7, m=0.0)
    with pytest.raises(RangeError, match="known: generic 130 nm n"):
        CompactModel.generic("generic 3 nm n")
    with pytest.raises(RangeError, match="want printable characters"):
        MODEL.to_toml('a"b')


def write_points(path: Path, model: CompactModel) -> Path:
    """A grid of points of a compact device of 1 µm."""
    device = model.device(w_m=1e-6, l_m=65e-9, temp_c=25.0)
    with path.open("w", encoding="utf-8", newline="") as file:
        writer = csv.writer(file)
        writer.writerow(["vg_v", "vd_v", "vb_v", "temp_c", "id_a", "ig_a", "ib_a"])
        for vg, vd, vb in itertools.product(
            np.linspace(-0.4, 1.2, 33), np.linspace(0.0, 1.2, 25), (-0.6, -0.3, 0.0)
        ):
            i = device.currents(vd=vd, vg=vg, vb=vb)
            writer.writerow([repr(float(x)) for x in (vg, vd, vb, 25.0, i[0], i[1], i[3])])
    return path


def test_points_make_a_device(tmp_path: Path) -> None:
    path = write_points(tmp_path / "points.csv", MODEL)
    table = TableModel.read(path, polarity="n", w_m=1e-6, oxide_m=1.85e-9, l_m=65e-9)
    assert table.range_v == {"vg": (-0.4, 1.2), "vd": (0.0, 1.2), "vb": (-0.6, 0.0)}
    assert "n-channel" in repr(table)
    device, origin = table.device(w_m=2e-6), MODEL.device(w_m=2e-6, l_m=65e-9)
    assert isinstance(device, hushrail.Device)
    vg = np.array([-0.2, 0.0, 0.3, 1.0])  # points of the table: met to the last digits of its logarithms
    assert device.currents(vd=1.0, vg=vg)[:, 0] == pytest.approx(
        origin.currents(vd=1.0, vg=vg)[:, 0], rel=1e-9
    )
    between = device.currents(vd=0.97, vg=vg + 0.02, vb=-0.1)[:, 0]
    assert between == pytest.approx(origin.currents(vd=0.97, vg=vg + 0.02, vb=-0.1)[:, 0], rel=0.02)
    with pytest.raises(RangeError, match="length"):
        table.device(w_m=1e-6, l_m=130e-9)
    with pytest.raises(RangeError, match="want `l_m`"):
        TableModel.read(path, polarity="n", w_m=1e-6, oxide_m=1.85e-9).device(w_m=1e-6)
    with pytest.raises(RangeError, match="temperature"):
        table.device(w_m=1e-6, temp_c=85.0)
    with pytest.raises(FileNotFoundError):
        TableModel.read(tmp_path / "none.csv", polarity="n", w_m=1e-6, oxide_m=2e-9)
    with pytest.raises(ReadError, match="width_m"):
        TableModel.read(path, polarity="n", w_m=0.0, oxide_m=2e-9)
    with pytest.raises(RangeError, match="polarity is `q`"):
        TableModel.read(path, polarity="q", w_m=1e-6, oxide_m=2e-9)


def test_a_process_of_own_devices(tmp_path: Path, process: Process) -> None:
    table = TableModel.read(
        write_points(tmp_path / "points.csv", MODEL), polarity="n", w_m=1e-6, oxide_m=1.85e-9
    )
    own = Process.of_devices({"nx": MODEL, "nt": table}, name="planned")
    assert (own.name, own.models) == ("planned", ("nx", "nt"))
    at = {"vd": 1.0, "vg": 0.0}
    made = own.transistor("nx", w=1e-6, l=65e-9)
    assert (made.currents(**at) == MODEL.device(w_m=1e-6, l_m=65e-9).currents(**at)).all()
    assert own.transistor("nt", w=1e-6, l=65e-9).currents(**at)[0] == pytest.approx(
        made.currents(**at)[0], rel=1e-6
    )
    # in the place of a card, the other left alone
    mixed = process.with_devices({"nch": MODEL})
    assert (mixed.transistor("nch", w=1e-6, l=65e-9).currents(**at) == made.currents(**at)).all()
    pch = {"model": "pch", "w": 1e-6, "l": 65e-9}
    low = {"vd": -1.0, "vg": 0.0}
    assert (mixed.transistor(**pch).currents(**low) == process.transistor(**pch).currents(**low)).all()  # type: ignore[arg-type]
    assert process.transistor("nch", w=1e-6, l=65e-9).currents(**at)[0] != made.currents(**at)[0]
    with pytest.raises(RangeError, match="no device was named"):
        Process.of_devices({})


def test_cells_are_solved_with_devices_that_python_wrote(tmp_path: Path) -> None:
    pch = CompactModel.generic("generic 65 nm p")
    text = (
        small_process.STUDY.replace('files = ["cards.lib"]\n', "") + MODEL.to_toml("nch") + pch.to_toml("pch")
    )
    table = hushrail.cells(small_process.write(tmp_path, study=text), "inv")
    assert not table.failures
    row = next(r for r in table.rows if r.state == "A=0 Y=1" and "V 25 °C" in r.corner)
    # the n-channel device is off, 0.4 µm wide and 60 nm long
    off = MODEL.device(w_m=4e-7, l_m=6e-8, temp_c=25.0).currents(vd=1.0, vg=0.0)[0]
    assert row.power_w == pytest.approx(off * 1.0, rel=0.1)
