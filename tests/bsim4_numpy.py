"""A second, simple evaluation of the published BSIM4 static equations, one function an equation.

Written for the tests from the BSIM4.8.0 manual (UC Berkeley, 2013), sections 2 to 6 and 10 to 13, in the
plain forms of the manual (no conjugate forms, no dual numbers). n-channel, ``vds >= 0``, one finger, no
stress, no polysilicon depletion.
Parameters come as a mapping of effective values (bins added), arrays broadcast.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

K_OVER_Q = 8.617087e-5  # V/K, the model's own
Q = 1.60219e-19  # C, the model's own
EPS0 = 8.85418e-12  # F/m, the model's own
EPS_SI = 1.03594e-10  # F/m, the model's own


def band_gap(t: float) -> float:
    """Band gap, eV (section 13)."""
    return 1.16 - 7.02e-4 * t * t / (t + 1108.0)


def intrinsic_density(t: float) -> float:
    """Intrinsic density, cm^-3 (section 13)."""
    return float(1.45e10 * (t / 300.15) ** 1.5 * np.exp(21.5565981 - band_gap(t) / (2.0 * K_OVER_Q * t)))


def charge_share(x: Array | float) -> Array:
    """``1/(2 cosh x - 2)``, the length law of the short-channel terms (section 2.3)."""
    return np.asarray(1.0 / (2.0 * np.cosh(x) - 2.0))


@dataclass(frozen=True)
class Sizes:
    """What depends on geometry and temperature only."""

    leff: float
    weff: float
    weffcj: float
    temp: float
    tnom: float
    vt: float
    phi: float
    vbi: float
    coxe: float
    coxp: float
    xdep0: float
    cdep0: float
    litl: float


def sizes(p: Mapping[str, float], w: float, length: float, temp_k: float) -> Sizes:
    """Effective sizes and temperature terms (sections 1.3, 2.1, 13)."""
    tnom = p["tnom"] + 273.15
    vt0 = K_OVER_Q * tnom
    ni = intrinsic_density(tnom)
    phi = 0.4 + vt0 * np.log(p["ndep"] / ni) + p["phin"]
    return Sizes(
        leff=length + p["xl"] - 2 * p["lint"],
        weff=w + p["xw"] - 2 * p["wint"],
        weffcj=w + p["xw"] - 2 * p["dwj"],
        temp=temp_k,
        tnom=tnom,
        vt=K_OVER_Q * temp_k,
        phi=float(phi),
        vbi=float(vt0 * np.log(p["nsd"] * p["ndep"] / ni**2)),
        coxe=p["epsrox"] * EPS0 / p["toxe"],
        coxp=p["epsrox"] * EPS0 / p["toxp"],
        xdep0=float(np.sqrt(2 * EPS_SI * phi / (Q * p["ndep"] * 1e6))),
        cdep0=float(np.sqrt(Q * EPS_SI * p["ndep"] * 1e6 / 2 / phi)),
        litl=float(np.sqrt(3.0 * p["xj"] * p["toxe"])),
    )


def body_voltage(p: Mapping[str, float], s: Sizes, vbs: Array) -> Array:
    """Body voltage between its limits (section 2.1)."""
    floor = -30.0
    if p["k2"] < 0:
        floor = min(max(0.9 * (s.phi - (0.5 * p["k1"] / p["k2"]) ** 2), -30.0), -3.0)
    floor = min(floor, p["vbm"])
    x = vbs - floor - 0.001
    low = floor + 0.5 * (x + np.sqrt(x * x - 0.004 * floor))
    top = 0.95 * s.phi
    y = top - low - 0.001
    return np.asarray(top - 0.5 * (y + np.sqrt(y * y + 0.004 * top)))


def threshold(p: Mapping[str, float], s: Sizes, vds: Array, vb: Array) -> Array:
    """Threshold voltage without DITS (section 2)."""
    sq, sq0 = np.sqrt(s.phi - vb), np.sqrt(s.phi)
    xdep = s.xdep0 * sq / sq0
    factor = np.sqrt(EPS_SI / (p["epsrox"] * EPS0) * p["toxe"])
    lt = factor * np.sqrt(xdep) * (1 + p["dvt2"] * vb)
    ltw = factor * np.sqrt(xdep) * (1 + p["dvt2w"] * vb)
    lt0 = factor * np.sqrt(s.xdep0)
    v0 = s.vbi - s.phi
    scale = p["toxe"] / p["toxm"]
    k1, k2 = p["k1"] * scale, p["k2"] * scale
    tr = s.temp / s.tnom - 1
    short = p["dvt0"] * charge_share(p["dvt1"] * s.leff / lt) * v0
    narrow_short = np.zeros_like(vb)
    if p["dvt0w"] != 0:
        narrow_short = p["dvt0w"] * charge_share(p["dvt1w"] * s.weff * s.leff / ltw) * v0
    dibl = p["eta0"] + p["etab"] * vb
    dibl = np.where(dibl < 1e-4, (2e-4 - dibl) / (3 - 2e4 * dibl), dibl)
    return np.asarray(
        p["vth0"]
        + (k1 * sq - p["k1"] * sq0) * np.sqrt(1 + p["lpeb"] / s.leff)
        - k2 * vb
        + k1 * (np.sqrt(1 + p["lpe0"] / s.leff) - 1) * sq0
        + (p["k3"] + p["k3b"] * vb) * p["toxe"] * s.phi / (s.weff + p["w0"])
        - short
        - narrow_short
        + (p["kt1"] + p["kt1l"] / s.leff + p["kt2"] * vb) * tr
        - dibl * charge_share(p["dsub"] * s.leff / lt0) * vds
    )


def slope_factor(p: Mapping[str, float], s: Sizes, vds: Array, vb: Array) -> Array:
    """Subthreshold slope factor (section 3.1)."""
    xdep = s.xdep0 * np.sqrt(s.phi - vb) / np.sqrt(s.phi)
    factor = np.sqrt(EPS_SI / (p["epsrox"] * EPS0) * p["toxe"])
    theta = charge_share(p["dvt1"] * s.leff / (factor * np.sqrt(xdep) * (1 + p["dvt2"] * vb)))
    x = p["nfactor"] * EPS_SI / xdep + (p["cdsc"] + p["cdscb"] * vb + p["cdscd"] * vds) * theta + p["cit"]
    return np.asarray(1 + x / s.coxe)


def overdrive(p: Mapping[str, float], s: Sizes, vgst: Array, n: Array) -> Array:
    """Effective gate overdrive (section 3.1)."""
    m = 0.5 + np.arctan(p["minv"]) / np.pi
    voff = p["voff"] * (1 + p["tvoff"] * (s.temp - s.tnom)) + p["voffl"] / s.leff
    nvt = n * s.vt
    top = nvt * np.log1p(np.exp(m * vgst / nvt))
    return np.asarray(top / (m + n * s.coxe / s.cdep0 * np.exp((voff - (1 - m) * vgst) / nvt)))


def at_temperature(p: Mapping[str, float], s: Sizes, name: str, coefficient: str) -> float:
    """A parameter with its linear temperature law (section 13); never negative for a resistance."""
    if p["tempmod"] == 0:
        return p[name] + p[coefficient] * (s.temp / s.tnom - 1)
    return p[name] * (1 + p[coefficient] * (s.temp - s.tnom))


def mobility(p: Mapping[str, float], s: Sizes, vg: Array, vb: Array, vth: Array, n: Array) -> Array:
    """Effective mobility of models 0 to 6 (section 5.2; 3 to 6 from memory of it), m^2/Vs."""
    ratio = s.temp / s.tnom
    power = p["tempmod"] == 3
    law = {"ua": "ua1", "ub": "ub1", "uc": "uc1", "ud": "ud1", "ucs": "ucste"}
    ua, ub, uc, ud, ucs = (
        p[k] * ratio ** p[c] if power else at_temperature(p, s, k, c) for k, c in law.items()
    )
    u0 = p["u0"] * ratio ** p["ute"] * (1 - p["up"] * np.exp(-s.leff / p["lp"]))
    # flat band from the threshold, as the manual defines it where the card gives none (n-channel: C0 = 2)
    flat = 2 * p["k1"] * np.sqrt(s.phi)
    model = p["mobmod"]
    if model == 3:
        zero = np.zeros(1)
        n0 = slope_factor(p, s, zero, zero)
        at_vth = overdrive(p, s, zero, n0)
        field = (vg + flat) / p["toxe"] * 1e-8 / 6
        return np.asarray(
            u0 / (1 + (ua + uc * vb) * field ** p["eu"] + ud / (0.5 + 0.5 * vg / at_vth) ** ucs)
        )
    gate = 2 * vth if model in (0, 1) else flat
    charge = vth if model in (0, 1, 2) else flat
    field = (vg + gate) / p["toxe"]
    coulomb = ud * (charge * p["toxe"] / (vg + 2 * np.sqrt(charge**2 + 1e-4))) ** 2
    if model in (0, 4):
        rest = (ua + uc * vb) * field + ub * field**2
    elif model in (1, 5):
        rest = (ua * field + ub * field**2) * (1 + uc * vb)
    else:
        rest = (ua + uc * vb) * field ** p["eu"]
    scattering = rest + coulomb
    # where a card lets it fall below -0.8 the published form goes on along a hyperbola
    with np.errstate(divide="ignore"):
        folded = (0.6 + scattering) / (7 + 10 * scattering)
    return np.asarray(u0 / np.where(scattering >= -0.8, 1 + scattering, folded))


def end_resistance(p: Mapping[str, float], s: Sizes, end: str, vg: Array, vb: Array) -> Array:
    """Resistance outside the channel at ``end`` ("s" or "d") for rdsMod 1, one finger (section 7.1), Ohm."""
    per_width = (s.weffcj * 1e6) ** p["wr"]
    r0, least = (at_temperature(p, s, f"r{end}{k}", "prt") / per_width for k in ("w", "wmin"))
    x = vg - p["vfbsdoff"]
    t = 1 / (1 + p["prwg"] * 0.5 * (x + np.sqrt(x * x + 1e-4))) - p["prwb"] * vb
    return np.asarray(least + 0.5 * r0 * (t + np.sqrt(t * t + 0.01)))


def saturation_factor(p: Mapping[str, float], vg: Array) -> Array:
    """Non-saturation factor between A2 and 1 (section 5.5)."""
    if p["a1"] == 0:
        return p["a2"] + np.zeros_like(vg)
    if p["a1"] > 0:
        rest = 1 - p["a2"]
        t = rest - p["a1"] * vg - 1e-4
        return np.asarray(p["a2"] + rest - 0.5 * (t + np.sqrt(t * t + 4e-4 * rest)))
    t = p["a2"] + p["a1"] * vg - 1e-4
    return np.asarray(0.5 * (t + np.sqrt(t * t + 4e-4 * p["a2"])))


def gate_behind_depletion(p: Mapping[str, float], s: Sizes, vgs: Array, vfb: float | None) -> Array:
    """Gate voltage behind the depletion of a polysilicon gate (section 1.2)."""
    if not 1e18 < p["ngate"] < 1e25:
        return vgs
    if vfb is None:
        vfb = p["vth0"] - s.phi - p["k1"] * np.sqrt(s.phi)
    over = np.maximum(vgs - vfb - s.phi, 0.0)
    scale = Q * EPS_SI * p["ngate"] * 1e6 / s.coxe**2
    drop = scale * (np.sqrt(1 + 2 * over / scale) - 1)
    lost = 0.5 * drop**2 / scale
    # the loss is held below the band gap
    held = 1.12 - 0.5 * (1.12 - lost - 0.05 + np.sqrt((1.12 - lost - 0.05) ** 2 + 0.224))
    return np.asarray(np.where(over > 0, vgs - held, vgs))


def channel(
    p: Mapping[str, float], s: Sizes, vgs: Array, vds: Array, vbs: Array, vfb: float | None = None
) -> Array:
    """Channel current, with the resistance inside it (rdsMod 0) or without (rdsMod 1), A (section 5)."""
    vb = body_voltage(p, s, vbs)
    vth = threshold(p, s, vds, vb)
    n = slope_factor(p, s, vds, vb)
    if p["dvtp0"] > 0:
        vt = s.vt if p["tempmod"] < 2 else K_OVER_Q * s.tnom
        vth = vth - n * vt * np.log(s.leff / (s.leff + p["dvtp0"] * (1 + np.exp(-p["dvtp1"] * vds))))
    vg = overdrive(p, s, vgs - vth, n)
    tr = s.temp / s.tnom - 1
    sq, sq0 = np.sqrt(s.phi - vb), np.sqrt(s.phi)
    xdep = s.xdep0 * sq / sq0
    weff = s.weff - 2 * (p["dwg"] * vg + p["dwb"] * (sq - sq0))
    per_width = (s.weffcj * 1e6) ** p["wr"]
    t2 = 1 / (1 + p["prwg"] * vg) + p["prwb"] * (sq - sq0)
    rds = np.zeros_like(vg)
    if p["rdsmod"] == 0:
        r0, least = (at_temperature(p, s, k, "prt") / per_width for k in ("rdsw", "rdswmin"))
        rds = least + 0.5 * r0 * (t2 + np.sqrt(t2 * t2 + 0.01))
    scale = p["toxe"] / p["toxm"]
    t1 = 0.5 * p["k1"] * scale * np.sqrt(1 + p["lpeb"] / s.leff) / sq + p["k2"] * scale
    t1 = t1 - p["k3b"] * p["toxe"] * s.phi / (s.weff + p["w0"])
    t5 = s.leff / (s.leff + 2 * np.sqrt(p["xj"] * xdep))
    abulk = 1 + t1 * (p["a0"] * t5 + p["b0"] / (s.weff + p["b1"])) - t1 * p["ags"] * p["a0"] * t5**3 * vg
    abulk = np.where(abulk < 0.1, (0.2 - abulk) / (3 - 20 * abulk), abulk) / (1 + p["keta"] * vb)
    v2 = vg + 2 * s.vt
    mu = mobility(p, s, vg, vb, vth, n)
    vsat = p["vsat"] - p["at"] * tr if p["tempmod"] == 0 else p["vsat"] * (1 - p["at"] * (s.temp - s.tnom))
    wv = weff * vsat * s.coxe
    esat_l = 2 * vsat / mu * s.leff
    lam = saturation_factor(p, vg)
    a = 2 * abulk * (abulk * wv * rds - 1 + 1 / lam)
    b = v2 * (2 / lam - 1) + abulk * esat_l + 3 * v2 * abulk * wv * rds
    c = v2 * (esat_l + 2 * v2 * wv * rds)
    with np.errstate(divide="ignore", invalid="ignore"):
        vdsat = np.where(a == 0, c / b, (b - np.sqrt(b * b - 2 * a * c)) / a)
    t1 = vdsat - vds - p["delta"]
    vdseff = vdsat - 0.5 * (t1 + np.sqrt(t1 * t1 + 4 * p["delta"] * vdsat))
    diff = vds - vdseff
    # flat band from the threshold, as the manual defines it where the card gives none
    vtfb = p["k1"] * sq0 if vfb is None else max(p["vth0"] - vfb - s.phi, 0.0)
    centroid = 1.9e-9 / (1 + ((vg + 4 * vtfb) / (2e8 * p["toxp"])) ** 0.7)
    coxeff = s.coxp * EPS_SI / (EPS_SI + s.coxp * centroid)
    beta = mu * coxeff * weff / s.leff
    g = beta * vg * (1 - abulk * vdseff / (2 * v2)) / (1 + vdseff / esat_l)
    idl = g / (1 + g * rds)
    lt0 = np.sqrt(EPS_SI / (p["epsrox"] * EPS0) * p["toxe"] * s.xdep0)
    rout = p["pdiblc1"] * charge_share(p["drout"] * s.leff / lt0) + p["pdiblc2"]
    va_dibl = (v2 - v2 * abulk * vdsat / (v2 + abulk * vdsat)) / rout / (1 + p["pdiblcb"] * vb)
    va_sat = (esat_l + vdsat + 2 * wv * rds * vg * (1 - 0.5 * abulk * vdsat / v2)) / (
        2 / lam - 1 + wv * rds * abulk
    )
    gate_help = p["pvag"] * vg / esat_l
    va_dibl = va_dibl * (1 + gate_help)
    rough = 1 / (1 + p["fprout"] * np.sqrt(s.leff) / v2)
    cclm = (
        rough * (1 + gate_help) * (1 + rds * idl) * (s.leff + vdsat * mu / (2 * vsat)) / (p["pclm"] * s.litl)
    )
    i = idl * (1 + diff / va_dibl)
    if p["pdits"] > 0:
        i = i * (1 + diff * p["pdits"] / rough / (1 + (1 + p["pditsl"] * s.leff) * np.exp(p["pditsd"] * vds)))
    i = i * (1 + np.log1p(cclm * diff / va_sat) / cclm)
    if p["pscbe2"] > 0:
        with np.errstate(divide="ignore"):
            scbe = p["pscbe2"] / s.leff * np.exp(-p["pscbe1"] * s.litl / diff)
        i = i * (1 + diff * scbe)
    return np.asarray(i * vdseff)


def gidl(p: Mapping[str, float], s: Sizes, vgs: Array, vds: Array, vbs: Array) -> Array:
    """Gate-induced drain leakage, gidlMod 0, A (section 6.2)."""
    x = (vds - vgs - p["egidl"]) / (3 * p["toxe"])
    vdb = vds - vbs
    with np.errstate(divide="ignore", over="ignore", invalid="ignore"):
        i = p["agidl"] * s.weffcj * x * np.exp(-p["bgidl"] / x) * vdb**3 / (p["cgidl"] + vdb**3)
    return np.asarray(np.where((x > 0) & (vdb > 0), i, 0.0))


def gate_edge(p: Mapping[str, float], s: Sizes, v: Array, side: str, polarity: str = "n") -> Array:
    """Tunnelling through one overlap, A out of the gate; ``v`` is gate minus diffusion (section 4.2)."""
    vfbsd = (
        K_OVER_Q * s.tnom * np.log(p["ngate"] / p["nsd"]) + p["vfbsdoff"] if p["ngate"] > 0 else p["vfbsdoff"]
    )
    away = np.sqrt((v - vfbsd) ** 2 + 1e-4)
    t = p["toxe"] * p["poxedge"]
    ratio = (p["toxref"] / t) ** p["ntox"] / t**2
    a, b, c = p["aig" + side], p["big" + side], p["cig" + side]
    prefactor, barrier = (4.97232e-7, 7.45669e11) if polarity == "n" else (3.42537e-7, 1.16645e12)
    return np.asarray(
        prefactor
        * s.weff
        * p["dlcig" if side == "s" else "dlcigd"]
        * ratio
        * v
        * away
        * np.exp(-barrier * t * (a - b * away) * (1 + c * away))
    )


def junction(p: Mapping[str, float], s: Sizes, area: float, perimeter: float, v: Array) -> Array:
    """Drain junction, body to diffusion: diffusion and trap-assisted current, A (sections 10, 11, 13)."""
    vt0 = K_OVER_Q * s.tnom
    x = band_gap(s.tnom) / vt0 - band_gap(s.temp) / s.vt + p["xtid"] * np.log(s.temp / s.tnom)
    isat = (area * p["jsd"] + (perimeter - s.weffcj) * p["jswd"] + s.weffcj * p["jswgd"]) * np.exp(
        x / p["njd"]
    )
    i = isat * np.expm1(v / (p["njd"] * s.vt))
    ratio = s.temp / s.tnom - 1
    edge = s.weffcj * (1 + np.sqrt(p["jtweff"] / s.weffcj) if p["jtweff"] > 0 else 1)
    for size, end in ((area, ""), (perimeter - s.weffcj, "sw"), (edge, "swg")):
        heat = np.exp(p[f"xts{end}d"] * ratio * band_gap(s.tnom) / s.vt)
        slope = p[f"njts{end}d"] * (1 + p[f"tnjts{end}d"] * ratio) * vt0
        vts = p[f"vts{end}d"]
        i = i - p[f"jts{end}d"] * size * heat * np.expm1(-v / slope * vts / (vts - v))
    return np.asarray(i)
