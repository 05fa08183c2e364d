"""The core's BSIM4 against a second evaluation written from the published equations (``bsim4_numpy.py``)."""

from __future__ import annotations

import importlib.util
import sys
from pathlib import Path

import numpy as np
import pytest
from hushrail import _core
from scipy.optimize import brentq

_spec = importlib.util.spec_from_file_location("bsim4_numpy", Path(__file__).with_name("bsim4_numpy.py"))
assert _spec is not None
assert _spec.loader is not None
b4 = importlib.util.module_from_spec(_spec)
sys.modules["bsim4_numpy"] = b4
_spec.loader.exec_module(b4)

CARD = """
* invented, for this test: every mechanism on that the second evaluation has
.model nt nmos level=54 version=4.5 binunit=1
+ toxe=2.1n toxm=2n toxp=1.9n xj=60n ndep=2e18 nsd=1e20 vth0=0.36
+ k1=0.45 k2=-0.02 k3=3 k3b=0.4 w0=1u lpe0=30n lpeb=-10n
+ dvt0=1.5 dvt1=0.6 dvt2=-0.03 dvt0w=0.2 dvt1w=1.2e6
+ dvt2w=-0.03 dvtp0=2n dvtp1=0.3 voff=-0.11 voffl=-1e-9 minv=0.1
+ nfactor=1.4 eta0=0.06 etab=-0.04 dsub=0.5 cit=1e-4 cdsc=2e-4
+ cdscb=1e-5 cdscd=3e-5 lint=3n wint=4n dwg=1n dwb=2n
+ u0=0.032 ua=1e-9 ub=1.5e-18 uc=-3e-11 vsat=9e4 a0=1.1 ags=0.3 b0=20n b1=10n keta=-0.03 a1=0 a2=0.9
+ rdsw=140 rdswmin=20 prwg=0.1 prwb=0.1 wr=1 pclm=0.8 pdiblc1=0.3 pdiblc2=0.004 pdiblcb=-0.05 drout=0.5
+ pscbe1=5e8 pscbe2=1e-7 pdits=0.05 pditsd=0.2 pditsl=1e5 delta=0.01
+ agidl=2e-5 bgidl=1.9e9 cgidl=1e-3 egidl=0.7
+ igcmod=1 dlcig=9n aigc=0.5 aigsd=1.2e-2 bigsd=2e-3
+ cigsd=0.05 toxref=2n poxedge=1.1 ntox=1.2 vfbsdoff=0.02 pigcd=1
+ jss=3e-5 jsws=2e-12 jswgs=4e-12 njs=1.1 xtis=2.5 ijthsfwd=10
+ kt1=-0.2 kt1l=1e-9 kt2=0.02 ute=-1.3 at=2e4 prt=10
+ rsh=9 ua1=5e-10 ub1=-1e-18 uc1=2e-11 tvoff=1e-3
"""
RSH = 9.0
W, L, AREA, PERIMETER = 0.8e-6, 70e-9, 0.12e-12, 1.9e-6


@pytest.fixture(scope="module")
def process(tmp_path_factory: pytest.TempPathFactory) -> _core.Process:
    path = tmp_path_factory.mktemp("cards") / "nt.lib"
    path.write_text(CARD)
    return _core.Process.read("tt", [str(path)])


def grid() -> tuple[np.ndarray, ...]:
    vg, vd, vb = np.meshgrid(
        np.linspace(-1.0, 1.2, 23), np.linspace(0.02, 1.2, 11), np.linspace(-1.2, 0.2, 6)
    )
    return tuple(np.ascontiguousarray(x.ravel()) for x in (vg, vd, vb))


MODES = [
    "mobmod=1 uc=-0.03 uc1=0.01 ud=1e14 ud1=1e13",
    "mobmod=2 eu=1.5 ua=1e-15 ua1=0 uc=1e-17 uc1=0 ud=1e14",
    "mobmod=3 eu=1.4 ua=0.4 ua1=0.1 uc=0.02 uc1=0 ud=0.6 ud1=0.1 ucs=1.2 ucste=0.3",
    "mobmod=4 ud=1e14 up=0.2 lp=50n",
    "mobmod=5 uc=-0.03 uc1=0 ud=1e14",
    "mobmod=6 eu=1.5 ua=1e-15 ua1=0 uc=1e-17 uc1=0 ud=1e14",
    "tempmod=1 ua1=1e-3 ub1=2e-3 uc1=1e-3 at=1e-3 prt=1e-3",
    "tempmod=2 ua1=1e-3 ub1=2e-3 uc1=1e-3 at=1e-3 prt=1e-3",
    "tempmod=3 mobmod=3 eu=1.4 ua=0.4 uc=0.02 ud=0.6 ua1=0.3 uc1=0.5 ud1=-0.4 ucste=0.3 at=1e-3 prt=0",
]


def with_mode(mode: str, path: Path) -> _core.Process:
    """The card with some values replaced."""
    names = {word.split("=")[0] for word in mode.split()}
    kept = [w for w in CARD.split() if w.split("=")[0] not in names]
    head = kept.index("level=54")
    path.write_text(
        "* invented\n"
        + " ".join([*kept[kept.index(".model") : head], *kept[head:], mode]).replace(" + ", " ")
    )
    return _core.Process.read("tt", [str(path)])


@pytest.mark.parametrize("mode", MODES)
@pytest.mark.parametrize("temp_c", [-40.0, 125.0])
def test_channel_modes_equal_the_second_evaluation(mode: str, temp_c: float, tmp_path: Path) -> None:
    process = with_mode(mode, tmp_path / "mode.lib")
    params = {"w": W, "l": L}
    p = process.effective("nt", params)
    s = b4.sizes(p, W, L, temp_c + 273.15)
    vg, vd, vb = grid()
    got = process.transistor("nt", params, temp_c).by_mechanism(vd, vg, np.zeros_like(vg), vb)
    np.testing.assert_allclose(got[:, 0, 0], b4.channel(p, s, vg, vd, vb), rtol=4e-9, atol=1e-30)


def test_series_resistance_equals_a_root_of_the_second_evaluation(tmp_path: Path) -> None:
    """rdsMod 1 against SciPy's ``brentq`` on the channel alone (no gate, junction or GIDL current)."""
    mode = "rdsmod=1 rsw=70 rdw=110 rswmin=15 rdwmin=10 prwg=0.1 prwb=0.05 ngate=0"
    mode += " agidl=0 igcmod=0 jss=0 jsws=0 jswgs=0"
    process = with_mode(mode, tmp_path / "mode.lib")
    params = {"w": W, "l": L, "nrs": 0.7, "nrd": 0.4}
    p = process.effective("nt", params)
    s = b4.sizes(p, W, L, 273.15 + 60)
    device = process.transistor("nt", params, 60.0)
    one = np.ones(1)
    for vg in (0.2, 0.5, 0.8, 1.2):
        for vd in (0.01, 0.3, 1.2):
            for vb in (-1.0, 0.0):

                def inner(i: float, vg: float = vg, vd: float = vd, vb: float = vb) -> tuple[float, float]:
                    lost_s, lost_d = 0.0, 0.0
                    # resistances depend on the inner voltages: a contraction, R times the slope is below 1
                    for _ in range(200):
                        gs, bs = (vg - lost_s) * one, (vb - lost_s) * one
                        gd, bd = (vg - vd + lost_d) * one, (vb - vd + lost_d) * one
                        lost_s = i * (float(b4.end_resistance(p, s, "s", gs, bs)[0]) + RSH * 0.7)
                        lost_d = i * (float(b4.end_resistance(p, s, "d", gd, bd)[0]) + RSH * 0.4)
                    return lost_s, lost_d

                def lack(i: float, vg: float = vg, vd: float = vd, vb: float = vb) -> float:
                    a, b = inner(i)
                    return float(b4.channel(p, s, (vg - a) * one, (vd - a - b) * one, (vb - a) * one)[0]) - i

                top = float(b4.channel(p, s, vg * one, vd * one, vb * one)[0])
                want = brentq(lack, 0.3 * top, top, xtol=1e-24, rtol=1e-12)
                got = device.by_mechanism(vd * one, vg * one, 0 * one, vb * one)[0, 0, 0]
                assert got == pytest.approx(want, rel=2e-9), (vg, vd, vb)
                assert top > got


@pytest.mark.parametrize("temp_c", [-40.0, 27.0, 125.0])
def test_currents_equal_the_second_evaluation(process: _core.Process, temp_c: float) -> None:
    params = {"w": W, "l": L}
    p = process.effective("nt", params)
    s = b4.sizes(p, W, L, temp_c + 273.15)
    junctions = {"ad": AREA, "as": AREA, "pd": PERIMETER, "ps": PERIMETER}
    device = process.transistor("nt", params | junctions, temp_c)
    vg, vd, vb = grid()
    zero = np.zeros_like(vg)
    got = device.by_mechanism(vd, vg, zero, vb)
    channel = b4.channel(p, s, vg, vd, vb)
    # the plain forms of the manual lose digits where Vdseff nearly equals Vds; 1e-9 is their own noise
    np.testing.assert_allclose(got[:, 0, 0], channel, rtol=2e-9, atol=1e-30)
    np.testing.assert_allclose(got[:, 1, 0], b4.gidl(p, s, vg, vd, vb), rtol=1e-11, atol=1e-33)
    # AIGC is set so high that nothing tunnels to the channel: what is left is the edges
    edge_d = b4.gate_edge(p, s, vg - vd, "d")
    edge_s = b4.gate_edge(p, s, vg, "s")
    np.testing.assert_allclose(got[:, 2, 1], edge_d + edge_s, rtol=1e-10, atol=1e-28)
    np.testing.assert_allclose(got[:, 2, 0], -edge_d, rtol=1e-10, atol=1e-28)
    body_to_drain = b4.junction(p, s, AREA, PERIMETER, vb - vd)
    np.testing.assert_allclose(got[:, 3, 0], -body_to_drain, rtol=1e-11, atol=1e-33)
