"""Studies through the Python API: what comes out, in which forms, and how long work behaves."""

from __future__ import annotations

import os
import pickle
import signal
import subprocess
import sys
import threading
import time
from pathlib import Path

import hushrail
import numpy as np
import pytest
import small_process
from conftest import environment
from hushrail import Estimate


@pytest.fixture(scope="module")
def result(tmp_path_factory: pytest.TempPathFactory) -> Estimate:
    return hushrail.estimate(small_process.write(tmp_path_factory.mktemp("estimate")))


@pytest.fixture
def long(tmp_path: Path) -> Path:
    """A study whose leakage table takes many seconds: a wide cell at many temperatures."""
    temps = ", ".join(str(t) for t in range(60, 140))
    study = small_process.STUDY.replace("temp_c = [-40, 25, 125]", f"temp_c = [{temps}]")
    return small_process.write(tmp_path, cells=small_process.CELLS + small_process.wide(9), study=study)


def test_every_point_is_there_in_order(result: Estimate) -> None:
    assert (result.title, len(result.points), result.failures) == ("small", 5 * 3, ())
    assert result.schemes == ("powered", "header", "header +0.2 V", "footer", "both")
    assert [c.temp_c for c in result.corners] == [-40, 25, 125]
    keys = [(p.scheme, p.corner) for p in result.points]
    assert keys == [(s, c.name) for s in result.schemes for c in result.corners]
    (domain,) = result.domains
    assert (domain.name, domain.instances, domain.computed, domain.uncovered) == ("core", 180, 180, ())
    assert not result.stopped


def test_numbers_hang_together(result: Estimate) -> None:
    for p in result.points:
        rest = p.asleep
        # what mechanisms and overhead dissipate is what the supplies deliver, to the digits of the balance
        assert sum(rest.shares.values()) * small_process.VDD_V == pytest.approx(p.power_w, rel=1e-8)
        above = [s for s in rest.supplies if s.voltage_v > 0.0]
        assert sum(s.current_a for s in above) == pytest.approx(p.current_a, rel=1e-12)
        assert sum(s.power_w for s in rest.supplies) == pytest.approx(p.power_w, rel=1e-12)
        # what all supplies give and take adds up to nothing
        assert abs(sum(s.current_a for s in rest.supplies)) <= 1e-8 * p.current_a
        assert p.saving == pytest.approx(1.0 - p.power_w / p.ungated_power_w, abs=1e-15)
        assert 0.0 <= rest.virtual_ground_v < rest.virtual_supply_v <= small_process.VDD_V
        if p.scheme == "powered":
            assert p.power_w == p.ungated_power_w
        else:
            assert p.power_w < 0.1 * p.ungated_power_w


def test_a_powered_domain_draws_what_its_cells_draw(result: Estimate, small: Path) -> None:
    table = hushrail.cells(small)
    counts = {"inv": 100, "nand2": 60, "latch": 20}
    for corner in result.corners:
        total = 0.0
        for cell, n in counts.items():
            powers = [r.power_w for r in table.rows if (r.cell, r.corner) == (cell, corner.name)]
            total += n * float(np.mean(powers))
        power_w = result.point("core", "powered", corner.name).power_w
        assert power_w == pytest.approx(total, rel=1e-9)


def test_points_are_found_by_name(result: Estimate) -> None:
    corner = result.corners[1].name
    p = result.point("core", "header", corner)
    assert (p.domain, p.scheme, p.corner) == ("core", "header", corner)
    assert p.holds
    assert result.find("core", "header", "elsewhere") is None
    with pytest.raises(hushrail.RangeError, match="`heater` is not in the estimate; want one of `powered`"):
        result.point("core", "heater", corner)


def test_failures_are_listed_and_stand_nowhere_else(tmp_path: Path) -> None:
    # the switch has no bin: its schemes fail, the others do not
    study = small_process.STUDY.replace("length_m = 1e-7", "length_m = 1e-8", 1)
    result = hushrail.estimate(small_process.write(tmp_path, study=study))
    assert {f.scheme for f in result.failures} == {"header"}
    assert len(result.points) == 4 * 3
    corner = result.corners[0].name
    assert result.find("core", "header", corner) is None
    with pytest.raises(hushrail.SolveError, match="no bin covers it"):
        result.point("core", "header", corner)
    with pytest.raises(hushrail.SolveError, match="give `fill`"):
        result.to_xarray()
    filled = result.to_xarray(fill=float("nan"))
    assert np.isnan(filled.power_w.sel(scheme="header")).all()
    assert np.isfinite(filled.power_w.sel(scheme="powered")).all()
    assert len(result.to_pandas()) == 4 * 3


def test_limits_are_held_against(tmp_path: Path) -> None:
    study = small_process.STUDY + "[limits]\noxide_v = 1.1\nstandby_a = 1.0\n"
    result = hushrail.estimate(small_process.write(tmp_path, study=study))
    assert {(p.scheme, check.limit) for p, check in result.broken} == {("header +0.2 V", "oxide_v")}
    assert {p.scheme for p in result.points if not p.holds} == {"header +0.2 V"}


def test_json_goes_out_and_back(result: Estimate) -> None:
    text = result.to_json()
    assert Estimate.from_json(text) == result
    assert Estimate.from_json(result.to_json(indent=2)).to_json() == text
    assert pickle.loads(pickle.dumps(result)) == result


def test_json_has_every_key_of_the_core(small: Path) -> None:
    import json

    from hushrail import _core

    text = _core.estimate(str(small))
    assert json.loads(Estimate.from_json(text).to_json()) == json.loads(text)
    table = _core.cell_table(str(small))
    assert json.loads(hushrail.LeakageTable.from_json(table).to_json()) == json.loads(table)


@pytest.mark.parametrize(
    ("text", "wanted"),
    [
        ("{", "x.json:1:2: not JSON"),
        ("[]", "x.json: `the whole` is []; want an object"),
        ("{}", "want an object with the key `format`"),
    ],
)
def test_other_json_is_refused(text: str, wanted: str) -> None:
    with pytest.raises(hushrail.ReadError) as caught:
        Estimate.from_json(text, "x.json")
    assert wanted in str(caught.value)
    assert caught.value.path == "x.json"


def test_other_forms_of_json_are_refused(result: Estimate) -> None:
    text = result.to_json()
    for change, wanted in [
        (('"version": 1', '"version": 7'), "version 7; want `hushrail-estimate` version 1"),
        (('"stopped": false', '"stopped": 0'), "`stopped` is 0; want true or false"),
        (('"vdd_v": 1.0', '"vdd_v": "1"'), '`corners[0].vdd_v` is "1"; want a number'),
    ]:
        with pytest.raises(hushrail.ReadError) as caught:
            Estimate.from_json(text.replace(*change))
        assert wanted in str(caught.value)
    assert Estimate.from_json(text.replace('"title"', '"more": 1, "title"')) == result


def test_pandas_rows_are_the_points(result: Estimate) -> None:
    frame = result.to_pandas()
    assert list(frame.power_w) == [p.power_w for p in result.points]
    assert list(frame.channel_a) == [p.asleep.mechanisms.channel for p in result.points]
    assert set(frame.temp_c) == {-40.0, 25.0, 125.0}
    supplies = result.to_pandas("supplies").groupby(["scheme", "corner"]).power_w.sum()
    p = result.points[4]
    assert supplies[p.scheme, p.corner] == pytest.approx(p.power_w, rel=1e-12)
    assert set(result.to_pandas("cells").master) == {"inv", "nand2", "latch"}
    assert "header channel" in set(result.to_pandas("paths").path)
    with pytest.raises(hushrail.RangeError, match="want points, supplies, paths or cells"):
        result.to_pandas("volts")  # type: ignore[arg-type]


def test_xarray_is_labelled(result: Estimate) -> None:
    data = result.to_xarray()
    assert dict(data.sizes) == {"domain": 1, "scheme": 5, "corner": 3, "mechanism": 5}
    p = result.points[7]
    at = {"domain": p.domain, "scheme": p.scheme, "corner": p.corner}
    assert float(data.power_w.sel(at)) == p.power_w
    assert float(data.virtual_supply_v.sel(at)) == p.asleep.virtual_supply_v
    assert float(data.by_mechanism_a.sel(at).sel(mechanism="channel")) == p.asleep.mechanisms.channel
    assert float(data.temp_c.sel(corner=p.corner)) == 125.0 or p.corner != result.corners[2].name


def test_same_bits_for_any_number_of_threads(small: Path) -> None:
    program = "import sys; from hushrail import _core; sys.stdout.write(_core.estimate(sys.argv[1]))"

    def text(threads: int) -> str:
        return subprocess.run(
            [sys.executable, "-c", program, str(small)],
            env=environment({"RAYON_NUM_THREADS": str(threads)}),
            capture_output=True,
            text=True,
            encoding="utf-8",
            check=True,
        ).stdout

    one = text(1)
    assert len(one) > 10_000
    assert text(2) == one
    assert text(5) == one


def test_progress_counts_up_to_the_total(long: Path) -> None:
    seen: list[tuple[int, int]] = []
    table = hushrail.cells(long, "nand*", progress=lambda done, total: seen.append((done, total)))
    assert len(table.corners) == 80
    assert seen, "called at least once"
    assert {total for _, total in seen} == {160}
    assert [done for done, _ in seen] == sorted(done for done, _ in seen)


def test_an_exception_in_progress_ends_the_work(long: Path) -> None:
    class EnoughError(Exception):
        pass

    def progress(done: int, total: int) -> None:
        raise EnoughError(f"{done} of {total}")

    start = time.monotonic()
    with pytest.raises(EnoughError, match="of 80"):
        hushrail.cells(long, "wide", progress=progress)
    assert time.monotonic() - start < 2.0


def test_other_threads_run_during_a_long_call(long: Path) -> None:
    ticks = 0
    stop = threading.Event()

    def tick() -> None:
        nonlocal ticks
        while not stop.wait(0.001):
            ticks += 1

    class EnoughError(Exception):
        pass

    start = time.monotonic()

    def progress(done: int, total: int) -> None:
        if time.monotonic() - start > 0.5:
            raise EnoughError

    thread = threading.Thread(target=tick)
    thread.start()
    try:
        with pytest.raises(EnoughError):
            hushrail.cells(long, "wide", progress=progress)
    finally:
        stop.set()
        thread.join()
    # a thousand a second when nothing holds it up; a busy machine gives less, a held lock gives ten or so
    assert ticks > 60


@pytest.mark.skipif(os.name != "posix", reason="sends SIGINT")
@pytest.mark.parametrize(
    "program",
    [
        ["-c", "import sys, hushrail; print('ready', flush=True); hushrail.cells(sys.argv[1], 'wide')"],
        ["-m", "hushrail", "cells", "--cell", "wide"],
    ],
    ids=["api", "command"],
)
def test_ctrl_c_ends_a_long_run_at_once(long: Path, program: list[str]) -> None:
    process = subprocess.Popen(
        [sys.executable, *program, str(long)],
        env=environment(),
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        preexec_fn=lambda: signal.signal(signal.SIGINT, signal.default_int_handler),
    )
    # long enough to be in the middle of the work
    time.sleep(1.5)
    assert process.poll() is None, "still at work"
    start = time.monotonic()
    process.send_signal(signal.SIGINT)
    _, said = process.communicate(timeout=20)
    assert time.monotonic() - start < 2.0
    if program[0] == "-m":
        assert process.returncode == 130
        assert said == "interrupted\n"
    else:
        assert "KeyboardInterrupt" in said
