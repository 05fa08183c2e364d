"""Slopes of devices, cells and blocks against differences of slightly different ones."""

from __future__ import annotations

from pathlib import Path

import hushrail
import numpy as np
import pytest
from hushrail import demo


def device(process: hushrail.Process, **changed: float) -> hushrail.Device:
    size = {"w": 0.6e-6, "l": 5e-8, "temp_c": 60.0} | changed
    return process.transistor("nlv", **size)


@pytest.mark.parametrize(("knob", "name", "step"), [(1, "l", 1e-12), (2, "w", 1e-11), (3, "temp_c", 1e-3)])
def test_slopes_of_a_device(knob: int, name: str, step: float) -> None:
    process = hushrail.Process.read(demo.CARDS, section="tt")
    at = {"vd": [0.05, 0.6, 1.1], "vg": [0.0, -0.2, 0.5], "vb": [0.0, -0.3, 0.1]}
    middle = {"l": 5e-8, "w": 0.6e-6, "temp_c": 60.0}[name]
    up = device(process, **{name: middle + step}).currents(**at)
    down = device(process, **{name: middle - step}).currents(**at)
    got = device(process).slopes(**at)[..., knob]
    # second-order differences: what is left is rounding, 1e-16 of the current over a step of 2e-5
    np.testing.assert_allclose(got[:, 0], (up - down)[:, 0] / (2 * step), rtol=2e-6)
    assert hushrail.KNOBS[knob].split("_")[0].startswith(name[0])


def test_points_do_not_know_what_made_them(tmp_path: Path) -> None:
    lines = ["vg_v,vd_v,vb_v,temp_c,id_a,ig_a,ib_a"]
    for vg in (0.0, 0.4, 0.8):
        for vd in (0.0, 0.4, 0.8):
            i = 1e-9 * np.exp(vg / 0.04) * (1 - np.exp(-vd / 0.0257))
            lines.append(f"{vg},{vd},0.0,25.0,{i:.15e},0,0")
    path = tmp_path / "points.csv"
    path.write_text("\n".join(lines) + "\n")
    table = hushrail.TableModel.read(path, polarity="n", w_m=1e-6, l_m=5e-8, oxide_m=2e-9)
    with pytest.raises(hushrail.RangeError, match="points do not know what made them"):
        table.device(w_m=1e-6, l_m=5e-8).slopes(vd=0.4, vg=0.0)


def test_cells_and_blocks_of_the_demo() -> None:
    """Hotter and wider leaks more, a higher threshold less, in every state and block."""
    calls: list[tuple[int, int]] = []
    table = hushrail.sensitivities(
        demo.STUDY, "inv_*", progress=lambda done, total: calls.append((done, total))
    )
    assert table.cells
    assert table.blocks
    assert not table.failures
    assert calls
    found = [(row.current_a, row.slopes) for row in table.cells]
    for current_a, s in found + [(row.current_a, row.slopes) for row in table.blocks]:
        assert current_a > 0
        assert s.threshold_v < 0 < s.width_m
        assert s.temperature_k > 0
        assert s.supply_v > 0
    assert hushrail.SensitivityTable.from_json(table.to_json()) == table
    frame = table.to_pandas()
    assert set(frame["kind"]) == {"cell", "block"}
    assert {f"dln_d_{name}" for name in hushrail.KNOBS} < set(frame.columns)
