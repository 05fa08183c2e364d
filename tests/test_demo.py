"""The demonstration stands on its own data; the whole of it runs as a step of the gate."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import hushrail
import pytest
from conftest import environment
from hushrail import demo


def test_the_drawn_switch_is_the_study_s_header() -> None:
    tomllib = pytest.importorskip("tomllib", reason="skipped: reading TOML needs Python 3.11")
    study = tomllib.loads(demo.STUDY.read_text(encoding="utf-8"))
    header = next(each["header"] for each in study["scheme"] if "header" in each)
    w, d = demo.FINGER["w"], header["diffusion_m"]
    assert (demo.MODEL, demo.FINGER["l"]) == (header["model"], header["length_m"])
    assert w == header["finger_width_m"]
    assert demo.FINGER["m"] * w == pytest.approx(header["width_m"])
    # each diffusion is shared by two fingers; its perimeter includes the gate's edge
    assert demo.FINGER["ad"] == demo.FINGER["as_"] == pytest.approx(w * d / 2)
    assert demo.FINGER["pd"] == demo.FINGER["ps"] == pytest.approx(d + w)
    assert study["grid"]["vdd_v"] == [demo.VDD_V]


def test_the_demo_shows_an_optimum_that_moves_with_temperature() -> None:
    process = hushrail.Process.read(demo.CARDS, section="tt")
    from hushrail import plot

    best = []
    for temp_c in demo.TEMPS_C:
        over, total, _ = plot.off_currents(
            process, demo.MODEL, demo.OVERDRIVE_V, vdd_v=demo.VDD_V, temp_c=temp_c, **demo.FINGER
        )
        best.append(float(over[total.argmin()]))
    assert 0.0 < best[0] < best[1] < best[2] < demo.OVERDRIVE_V[-1]


def test_a_folder_that_is_not_there_is_said_before_any_work(tmp_path: Path) -> None:
    done = subprocess.run(
        [sys.executable, "-m", "hushrail.demo", "--out", str(tmp_path / "nowhere")],
        capture_output=True,
        text=True,
        env=environment(),
        check=False,
        timeout=20,
    )
    assert done.returncode == 2
    assert "no such folder" in done.stderr


def test_every_part_of_a_scheme_has_an_example() -> None:
    """The catalogue names every key that a scheme or a switch may have, and its books balance."""
    text = demo.CATALOGUE.read_text(encoding="utf-8")
    keys = "header footer stacked overdrive_v well_bias_v body_to_gate nwell_bias_v pwell_bias_v header_clamp"
    keys += " footer_clamp held_supply_v parked zigzag changes models lengthen_m stack powered added"
    keys += (
        " overhead_a pump_efficiency share boost_v awake_well_bias_v awake_nwell_bias_v awake_pwell_bias_v"
    )
    keys += " nwell"
    for key in keys.split():
        assert f"{key} =" in text, key
    result = hushrail.estimate(demo.CATALOGUE)
    assert not result.failures
    for p in result.points:
        total = sum(p.asleep.mechanisms) * 1.1 + p.asleep.overhead_w
        assert abs(total - p.power_w) <= 2e-6 * p.power_w, p.scheme
    shown = demo.catalogue(result, 100)
    assert all(scheme in shown for scheme in result.schemes)
