"""Devices: laws every bias obeys, shapes, and what is refused."""

from __future__ import annotations

import hushrail
import numpy as np
import pytest
import scipy.constants as codata
from hushrail import Device, Process
from numpy.typing import NDArray

JUNCTIONS = {"ad": 4e-14, "as_": 4e-14, "pd": 1e-6, "ps": 1e-6}
MODELS = ["nch", "pch"]


def device(process: Process, model: str, temp_c: float = 25.0) -> Device:
    return process.transistor(model, w=4e-7, l=6e-8, temp_c=temp_c, **JUNCTIONS)


def random_biases(n: int, reach_v: float = 1.3) -> dict[str, NDArray[np.float64]]:
    rng = np.random.default_rng(20261201)
    return {name: rng.uniform(-reach_v, reach_v, n) for name in ("vd", "vg", "vs", "vb")}


def largest(currents: NDArray[np.float64]) -> NDArray[np.float64]:
    most: NDArray[np.float64] = np.abs(currents).max(axis=-1, keepdims=True)
    return most


@pytest.mark.parametrize("model", MODELS)
@pytest.mark.parametrize("temp_c", [-40.0, 25.0, 125.0])
def test_terminal_currents_add_up_to_zero(process: Process, model: str, temp_c: float) -> None:
    currents = device(process, model, temp_c).currents(**random_biases(2000))
    # four roundings of the largest one
    assert np.all(np.abs(currents.sum(axis=-1, keepdims=True)) <= 1e-15 * largest(currents))


@pytest.mark.parametrize("model", MODELS)
def test_no_voltage_no_current(process: Process, model: str) -> None:
    level = np.linspace(-1.5, 1.5, 31)
    assert not device(process, model).currents(vd=level, vg=level, vs=level, vb=level).any()


@pytest.mark.parametrize("model", MODELS)
def test_drain_and_source_may_change_places(process: Process, model: str) -> None:
    d, at = device(process, model), random_biases(2000)
    one = d.currents(**at)
    other = d.currents(vd=at["vs"], vg=at["vg"], vs=at["vd"], vb=at["vb"])[..., [2, 1, 0, 3]]
    # voltage differences round at 2e-16 V, some 1e-14 of an exponential
    assert np.all(np.abs(one - other) <= 1e-12 * largest(one))


@pytest.mark.parametrize("model", MODELS)
def test_mechanisms_add_up_to_the_currents(process: Process, model: str) -> None:
    d, at = device(process, model), random_biases(500)
    parts = d.by_mechanism(**at)
    assert parts.shape == (500, len(hushrail.MECHANISMS), len(hushrail.TERMINALS))
    assert np.all(np.abs(parts.sum(axis=1) - d.currents(**at)) <= 1e-14 * largest(d.currents(**at)))
    assert not parts[:, hushrail.MECHANISMS.index("floor")].any()


@pytest.mark.parametrize("model", MODELS)
def test_slopes_are_those_of_the_currents(process: Process, model: str) -> None:
    d, at = device(process, model), random_biases(300)
    exact = d.conductances(**at)
    for k, name in enumerate(at):
        # 1e-5 V is some 4e-4 of a thermal voltage: central differences are off by its square, 1e-7 or so
        up, down = at | {name: at[name] + 1e-5}, at | {name: at[name] - 1e-5}
        measured = (d.currents(**up) - d.currents(**down)) / 2e-5
        scale = np.abs(exact).max(axis=(-1, -2))[:, None]
        # where |vgs| or |vds| is below the step a smoothing of the model may turn within it
        assert np.median(np.abs(measured - exact[..., k]) / scale) < 1e-9
        assert np.all(np.abs(measured - exact[..., k]) <= 1e-5 * scale), name


def test_slopes_along_a_common_shift_vanish(process: Process) -> None:
    exact = device(process, "nch").conductances(**random_biases(300))
    scale = np.abs(exact).max(axis=(-1, -2))
    assert np.all(np.abs(exact.sum(axis=-1)) <= 1e-14 * scale[:, None])


def test_thermal_voltage_is_that_of_the_si(process: Process) -> None:
    """A junction's currents at V and -V have the ratio -exp(V/φt); φt = kT/e from SciPy's CODATA values."""
    for temp_c in (-40.0, 25.0, 125.0):
        d = device(process, "nch", temp_c)
        v = 0.1
        at = {"vg": 0.0, "vs": 0.0, "vb": 0.0}
        forward, backward = d.by_mechanism(vd=[-v, v], **at)[:, hushrail.MECHANISMS.index("junction"), 0]
        measured_v = v / np.log(-forward / backward)
        wanted_v = codata.k * codata.convert_temperature(temp_c, "Celsius", "Kelvin") / codata.e
        # BSIM4 keeps k/q = 8.617087e-5 V/K of its first years, 3e-5 below today's
        assert measured_v == pytest.approx(wanted_v, rel=4e-5)


def test_off_current_grows_with_temperature_and_falls_below_the_rail(process: Process) -> None:
    off = [device(process, "nch", t).currents(vd=1.0, vg=0.0)[0] for t in (-40, 25, 125)]
    assert off[0] < off[1] < off[2]
    gate = np.linspace(0.0, -0.8, 81)
    drain = device(process, "nch").currents(vd=1.0, vg=gate)[:, 0]
    best = int(drain.argmin())
    assert 0 < best < 80, "channel current falls, gidl rises: there is an optimum overdrive"
    parts = device(process, "nch").by_mechanism(vd=1.0, vg=gate[[0, -1]])[:, :, 0]
    assert hushrail.MECHANISMS[int(parts[0].argmax())] == "channel"
    assert hushrail.MECHANISMS[int(parts[1].argmax())] == "gidl"


def test_biases_broadcast(process: Process) -> None:
    d = device(process, "nch")
    assert d.currents(vd=1.0, vg=0.0).shape == (4,)
    assert d.currents(vd=[0.1, 1.0], vg=0.0).shape == (2, 4)
    drain, gate = np.array([0.1, 0.5, 1.0])[:, None], np.linspace(0, 1, 5)
    grid = d.currents(vd=drain, vg=gate, vb=np.float32(-0.5))
    assert grid.shape == (3, 5, 4)
    one = d.currents(vd=0.5, vg=gate[3], vb=-0.5)
    assert (grid[1, 3] == one).all()
    assert d.conductances(vd=drain, vg=gate).shape == (3, 5, 4, 4)
    assert d.by_mechanism(vd=drain, vg=gate).shape == (3, 5, 5, 4)
    assert d.currents(vd=np.zeros((0, 3)), vg=0.0).shape == (0, 3, 4)
    every_other = np.linspace(0, 1, 10)[::2]
    assert (d.currents(vd=every_other, vg=0)[2] == d.currents(vd=every_other[2], vg=0)).all()


def test_large_arrays_are_those_of_their_parts(process: Process) -> None:
    d, at = device(process, "nch"), random_biases(250_001)
    whole = d.currents(**at)
    tail = {name: x[-3:] for name, x in at.items()}
    assert (whole[-3:] == d.currents(**tail)).all()


def test_devices_in_parallel_carry_so_many_times_the_current(process: Process) -> None:
    one = process.transistor("nch", w=1e-6, l=1e-7).currents(vd=1.0, vg=0.0)
    four = process.transistor("nch", w=1e-6, l=1e-7, m=4).currents(vd=1.0, vg=0.0)
    assert (four == 4 * one).all()


def test_what_a_device_says_of_itself(process: Process) -> None:
    d = device(process, "pch", 85)
    assert (d.polarity, d.temp_c, d.model, d.has_gidl) == ("p", 85.0, "pch", True)
    assert d.oxide_m == pytest.approx(2.1e-9)
    assert "p-channel" in repr(d)
    assert process.models == ("nch", "pch")
    assert "2 models" in repr(process)
    assert process.effective("nch", w=4e-7, l=6e-8)["vth0"] == pytest.approx(0.42)


@pytest.mark.parametrize(
    ("change", "wanted"),
    [
        ({"model": "nhc"}, "model `nhc` is not defined; did you mean `nch`?"),
        ({"w": -1e-6}, "-1.000e-6 m; want a size above zero"),
        ({"w": float("nan")}, "want a size above zero"),
        ({"w": 1.0}, "want a transistor below 2 cm"),
        ({"l": 1e-8}, "no bin covers it; the nearest is L 0.0500 to 10.0000"),
        ({"nf": 1.5}, "want a whole number of fingers"),
        ({"m": 0}, "want a number of devices above zero"),
        ({"temp_c": 400.0}, "temperature 400 °C is out of range; want -100 to 300 °C"),
        ({"temp_c": float("nan")}, "out of range"),
    ],
)
def test_impossible_devices_are_refused(process: Process, change: dict[str, object], wanted: str) -> None:
    given: dict[str, object] = {"model": "nch", "w": 1e-6, "l": 1e-7} | change
    model = str(given.pop("model"))
    with pytest.raises(hushrail.RangeError) as caught:
        process.transistor(model, **given)  # type: ignore[arg-type]
    assert wanted in str(caught.value)
    assert "request" not in str(caught.value), "no file is concerned"


def test_impossible_biases_are_refused(process: Process) -> None:
    d = device(process, "nch")
    with pytest.raises(hushrail.RangeError, match=r"vg holds nan; want finite voltages"):
        d.currents(vd=1.0, vg=[0.0, float("nan")])
    with pytest.raises(hushrail.RangeError, match=r"vd \(3,\), vg \(2,\)"):
        d.currents(vd=[1.0, 1.0, 1.0], vg=[0.0, 0.0])
    with pytest.raises(ValueError, match="could not convert"):
        d.currents(vd="high", vg=0.0)
    with pytest.raises(hushrail.RangeError, match="no file of cards"):
        Process.read([])
