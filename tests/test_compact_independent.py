"""The core's compact model against a second evaluation from the papers (``baselines/compact_numpy.py``)."""

from __future__ import annotations

import numpy as np
import pytest
from baselines import compact_numpy as cn
from hushrail import _core

CARD = {
    "vt0_v": 0.47,
    "slope_n": 1.5,
    "dibl_v_v": 0.09,
    "body_sqrt_v": 0.42,
    "phi_v": 0.88,
    "mobility_m2_vs": 0.028,
    "oxide_m": 1.8e-9,
    "length_m": 50e-9,
    "vt_temp_v_k": -5e-4,
    "mobility_exponent": -1.4,
    "theta_1_v": 0.3,
    "saturation_m_s": 1e5,
    "series_ohm_m": 2e-4,
    "gidl_a_s": 2e-4,
    "gidl_b_v_m": 2.1e9,
    "gidl_c_v3": 2e-4,
    "gidl_e_v": 0.8,
    "generation_a_m2": 1e-4,
    "generation_a_m": 1e-11,
    "diffusion_a_m2": 7e-9,
    "halo_m3": 3.2e24,
    "junction_depth_m": 25e-9,
    "overlap_m": 10e-9,
    "tunnel_barrier_v": 3.1,
    "tunnel_mass": 0.4,
    "tunnel_oxide_m": 1.8e-9,
}
W, L, AREA, PERIMETER = 0.8e-6, 60e-9, 0.12e-12, 1.9e-6


@pytest.mark.parametrize("temp_c", [-40.0, 27.0, 125.0])
def test_currents_equal_the_second_evaluation(temp_c: float) -> None:
    geometry = {"w": W, "l": L, "ad": AREA, "as": AREA, "pd": PERIMETER, "ps": PERIMETER}
    process = _core.Process.of_devices("compact", {"nc": _core.CompactModel("n", CARD)})
    device = process.transistor("nc", geometry, temp_c)
    vg, vd, vb = (
        np.ascontiguousarray(x.ravel())
        for x in np.meshgrid(
            np.linspace(-1.0, 1.2, 23), np.linspace(0.02, 1.2, 11), np.linspace(-1.2, 0.2, 6)
        )
    )
    d = cn.Device(CARD, W, L, AREA, PERIMETER, temp_c + 273.15)
    k = cn.constants(d)
    ids, gidl_d, gidl_s, junction_d, junction_s, gate_d, gate_s = cn.mechanisms(d, k, vg, vd, vb)
    got = device.by_mechanism(vd, vg, np.zeros_like(vg), vb)
    for what, value, want in [
        ("channel", got[:, 0, 0], ids),
        ("gidl at the drain", got[:, 1, 0], gidl_d),
        ("gidl at the source", got[:, 1, 2], gidl_s),
        ("gate to drain", got[:, 2, 0], -gate_d),
        ("gate to source", got[:, 2, 2], -gate_s),
        ("junction of the drain", got[:, 3, 0], junction_d),
        ("junction of the source", got[:, 3, 2], junction_s),
    ]:
        np.testing.assert_allclose(value, want, rtol=1e-9, atol=1e-32, err_msg=what)
        assert np.max(np.abs(want)) > 1e-29, what
