"""The compact model's published equations as vectorised NumPy: a second evaluation and the yardstick
of speed.

Written from the sources that the model names, in plain forms (no dual numbers, no lanes): charge-
based channel and pinch-off voltage (Enz, Krummenacher, Vittoz, Analog Integr. Circuits Signal
Process. 8 (1995) 83-114; Bucher et al., EKV 2.6 manual), barrier lowering and its length law (Liu
et al., IEEE T-ED 40 (1993) 86-95), velocity saturation (Caughey and Thomas, Proc. IEEE 55 (1967)
2192), GIDL (BSIM4.8.0 manual, section 6.2), junctions (Sah, Noyce, Shockley, Proc. IRE 45 (1957)
1228; band-to-band tunnelling as in Roy et al., Proc. IEEE 91 (2003) 305), direct tunnelling
(Schuegraf and Hu, IEEE T-ED 41 (1994) 761). n-channel; voltages are arrays of one shape.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

Q = 1.602176634e-19  # C
K_OVER_Q = 1.380649e-23 / Q  # V/K
HBAR = 1.054571817e-34  # J s
M0 = 9.1093837015e-31  # kg
EPS_OX = 3.9 * 8.8541878128e-12  # F/m
EPS_SI = 1.03594e-10  # F/m, the BSIM4 model's own


@dataclass(frozen=True)
class Device:
    """One transistor at one temperature."""

    card: Mapping[str, float]
    width_m: float
    length_m: float
    area_m2: float
    perimeter_m: float
    temp_k: float


@dataclass(frozen=True)
class Constants:
    """What depends on geometry and temperature only."""

    vt: float
    phi: float
    linear: float
    dibl: float
    vt0: float
    flat: float
    specific: float
    loss: float
    most: float
    charge: float
    gidl_b: float
    diffusion: float
    generation: float
    built_in: float
    tunnel_scale: float
    tunnel_b: float
    field_sq: float
    tunnel_built_in: float


def band_gap(t: float) -> float:
    """Band gap, eV."""
    return 1.16 - 7.02e-4 * t * t / (t + 1108.0)


def sharing(length: float, tox: float, phi: float, gamma: float) -> float:
    """Length law of charge sharing."""
    cox = EPS_OX / tox
    depth = 2 * EPS_SI * np.sqrt(phi) / (gamma * cox)
    natural = np.sqrt(EPS_SI * depth / cox)
    return float(np.exp(-length / (2 * natural)) + 2 * np.exp(-length / natural))


def constants(d: Device) -> Constants:
    """Temperature and length laws."""
    c, t = d.card, d.temp_k
    tn = c.get("nominal_c", 27.0) + 273.15
    vt, vtn, eg, egn = K_OVER_Q * t, K_OVER_Q * tn, band_gap(t), band_gap(tn)
    r = t / tn
    gamma = c["body_sqrt_v"]
    linear = c["slope_n"] - gamma / (2 * np.sqrt(c["phi_v"]))
    phi = c["phi_v"] * r - 3 * vt * np.log(r) - egn * r + eg
    scale = sharing(d.length_m, c["oxide_m"], c["phi_v"], gamma) / sharing(
        c["length_m"], c["oxide_m"], c["phi_v"], gamma
    )
    dibl = c["dibl_v_v"] * scale
    vt0 = c["vt0_v"] + c["vt_temp_v_k"] * (t - tn) + (egn - c["phi_v"]) * (c["dibl_v_v"] - dibl)
    n = linear + gamma / (2 * np.sqrt(phi))
    cox = EPS_OX / c["oxide_m"]
    mu = c["mobility_m2_vs"] * r ** c["mobility_exponent"]
    vsat = c["saturation_m_s"] * (1 - 3.3e4 / 8e4 * (r - 1))
    x = egn / vtn - eg / vt
    mass = 0.2 * M0
    ni = 1.45e10 * (t / 300.15) ** 1.5 * np.exp(21.5565981 - eg / (2 * 8.617087e-5 * t)) * 1e6
    a = np.sqrt(2 * mass) * Q**3 / (4 * np.pi**3 * HBAR**2)
    return Constants(
        vt=vt,
        phi=phi,
        linear=linear,
        dibl=dibl,
        vt0=vt0,
        flat=linear * phi + gamma * np.sqrt(phi),
        specific=2 * n * mu * cox * d.width_m / d.length_m * vt**2,
        loss=(c["theta_1_v"] + mu * cox * c["series_ohm_m"] / d.length_m) * n * vt,
        most=d.width_m * cox * vsat * 2 * n * vt,
        charge=2 * n * vt,
        gidl_b=c["gidl_b_v_m"] * (eg / egn) ** 1.5,
        diffusion=c["diffusion_a_m2"] * r**3 * np.exp(x) * d.area_m2,
        generation=(c["generation_a_m2"] * d.area_m2 + c["generation_a_m"] * d.perimeter_m)
        * r**1.5
        * np.exp(x / 2),
        built_in=(eg + phi) / 2,
        tunnel_scale=d.width_m * c["junction_depth_m"] * a / np.sqrt(eg * Q),
        tunnel_b=4 * np.sqrt(2 * mass * Q) * eg**1.5 / (3 * HBAR),
        field_sq=2 * Q * c["halo_m3"] / EPS_SI,
        tunnel_built_in=eg / 2 + vt * np.log(c["halo_m3"] / ni),
    )


def softplus(x: Array) -> Array:
    """``ln(1 + exp(x))``."""
    return np.asarray(np.maximum(x, 0.0) + np.log1p(np.exp(-np.abs(x))))


def channel(d: Device, k: Constants, vgs: Array, vds: Array, vbs: Array) -> tuple[Array, Array, Array]:
    """Current, and the inversion charge in volts at source and drain, for ``vds >= 0``."""
    gamma, v2 = d.card["body_sqrt_v"], 2 * k.vt
    vg, vs, vd = vgs - vbs, -vbs, vds - vbs
    # the smaller of vd and vs, smooth: half of their sum less vds*tanh(vds/vt)
    e4 = np.exp(-2 * vds / k.vt)
    lower = vs + vds * e4 / (1 + e4)
    rest = k.linear - 1 - 2 * k.dibl
    drive = vg - k.vt0 + k.dibl * (vd + vs) + rest * lower
    above = v2 * softplus((drive + k.flat) / v2)
    root = 2 * above / (np.sqrt(4 * k.linear * above + gamma**2) + gamma)
    vp = root**2 - k.phi
    a, b = (vp - vs) / v2, (vp - vd) / v2
    qd = np.log1p(np.exp(b))
    diff = np.log1p(-np.exp(a) * np.expm1(-vds / v2) / (1 + np.exp(b)))
    qs = qd + diff
    i = k.specific * diff * (2 * qd + diff) / (1 + k.loss * (2 * qd + diff))
    i = i / np.sqrt(1 + (i / (k.most * (qs + 1e-280))) ** 2)
    return i, k.charge * qs, k.charge * qd


def gidl(d: Device, k: Constants, vdg: Array, vdb: Array) -> Array:
    """Current from a diffusion into the body."""
    c = d.card
    x = (vdg - c["gidl_e_v"]) / (3 * c["oxide_m"])
    with np.errstate(divide="ignore", over="ignore", invalid="ignore"):
        i = c["gidl_a_s"] * d.width_m * x * np.exp(-k.gidl_b / x) * vdb**3 / (c["gidl_c_v3"] + vdb**3)
    return np.asarray(np.where((x > 0) & (vdb > 0), i, 0.0))


def junction(k: Constants, v: Array) -> Array:
    """Current from body to diffusion at the forward voltage ``v``."""
    open_ = 1 - v / k.built_in
    width = np.sqrt((open_ + np.sqrt(open_**2 + (4 * k.vt / k.built_in) ** 2)) / 2)
    field = np.sqrt(k.field_sq * (np.maximum(-v, 0.0) + k.tunnel_built_in))
    return np.asarray(
        k.diffusion * np.expm1(v / k.vt)
        + k.generation * np.expm1(v / (2 * k.vt)) * width
        + k.tunnel_scale * v * field * np.exp(-k.tunnel_b / field)
    )


def gate(d: Device, k: Constants, v: Array, charge: Array) -> Array:
    """Current from the gate into one end; ``v`` is gate minus diffusion."""
    c = d.card
    barrier, thick = c["tunnel_barrier_v"], c["tunnel_oxide_m"]
    a = Q**2 / (16 * np.pi**2 * HBAR * barrier) / thick**2
    b = 4 * np.sqrt(2 * c["tunnel_mass"] * M0 * Q) * barrier**1.5 / (3 * HBAR) * thick / barrier

    def transmission(u: Array) -> Array:
        z = u / barrier
        s = np.sqrt(np.maximum(1 - z, 0.0))
        with np.errstate(divide="ignore"):
            h = np.where(z < 1, (1 + s + s * s) / (1 + s), 1 / z)
        return np.asarray(np.exp(-b * h))

    depletion = c["body_sqrt_v"] * np.sqrt(k.phi)
    edge = d.width_m * c["overlap_m"] * a * v * np.abs(v) * transmission(np.abs(v))
    half = d.width_m * d.length_m / 2
    return np.asarray(edge + half * a * v * charge * transmission(charge + depletion))


def mechanisms(
    d: Device, k: Constants, vgs: Array, vds: Array, vbs: Array
) -> tuple[Array, Array, Array, Array, Array, Array, Array]:
    """Channel; then of drain and source: GIDL, junctions, gate; A, for ``vds >= 0``."""
    ids, source_v, drain_v = channel(d, k, vgs, vds, vbs)
    return (
        ids,
        gidl(d, k, vds - vgs, vds - vbs),
        gidl(d, k, -vgs, -vbs),
        -junction(k, vbs - vds),
        -junction(k, vbs),
        gate(d, k, vgs - vds, drain_v),
        gate(d, k, vgs, source_v),
    )
