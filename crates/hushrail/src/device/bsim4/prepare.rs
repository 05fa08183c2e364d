//! What depends on geometry and temperature only, computed once per device and corner.

use super::junction::{JunctionSide, Junctions};
use super::material::Material;
use super::mobility::Mobility;
use super::poly::effective_gate;
use super::series::{EndResistance, Series};
use super::silicon::{EPS_SI, MODEL_EPS0, MODEL_KB_OVER_Q, MODEL_Q, theta};
use super::stress::Stress;
use super::table::Id;
use super::threshold::Threshold;
use super::values::{Card, Values};
use crate::device::dual::{Over, Real};
use crate::device::{Geometry, Polarity};

/// The gate-tunnelling constants of one device.
#[derive(Debug, Clone)]
#[expect(missing_docs, reason = "symbols of the manual, section 4")]
pub struct Tunnel<P> {
    pub igc: i64,
    pub igb: bool,
    pub a_channel: P,
    pub b_channel: P,
    pub a_edge_s: P,
    pub a_edge_d: P,
    pub b_edge: P,
    pub a_bulk_acc: P,
    pub b_bulk_acc: P,
    pub a_bulk_inv: P,
    pub b_bulk_inv: P,
    pub vfbsd: P,
    pub aigc: P,
    pub bigc: P,
    pub cigc: P,
    pub edge_s: [P; 3],
    pub edge_d: [P; 3],
    pub acc: [P; 3],
    pub inv: [P; 3],
    pub vt_nigc: P,
    pub vt_nigbacc: P,
    pub vt_nigbinv: P,
    pub eigbinv: P,
    /// PIGCD when the card gives it.
    pub pigcd: Option<P>,
    pub toxe: P,
    /// What the effective gate voltage lacks to zero at zero bias, V.
    pub rest_v: P,
}

/// GIDL (or GISL) constants of one device.
#[derive(Debug, Clone)]
#[expect(missing_docs, reason = "symbols of the manual, section 6.2")]
pub struct Gidl<P> {
    pub a: P,
    pub b: P,
    pub c: P,
    pub e: P,
    pub r: P,
    pub k: P,
    pub f: P,
}

/// Everything the bias-dependent equations need.
#[derive(Debug, Clone)]
#[expect(missing_docs, reason = "symbols of the manual; the equations that use them name them")]
pub struct Prepared<P> {
    pub polarity: Polarity,
    pub nf: P,
    pub version: f64,
    pub gidlmod: i64,
    pub vt: P,
    /// Thermal voltage in the drain-induced threshold shift of long devices, V.
    pub vt_dits: P,
    pub phi: P,
    pub sqrt_phi: P,
    pub v0: P,
    pub xdep0_over: P,
    pub factor1: P,
    pub coxe: P,
    pub coxp: P,
    pub toxe: P,
    pub toxp: P,
    pub leff: P,
    pub weff: P,
    pub weffcj: P,
    pub litl: P,
    pub vbsc: P,
    pub dvt0: P,
    pub dvt1l: P,
    pub dvt2: P,
    pub dvt0w: P,
    pub dvt1wl: P,
    pub dvt2w: P,
    pub t1_const: P,
    pub kt2_tr: P,
    pub narrow: P,
    pub lpe_vb: P,
    pub k1: P,
    pub k1ox: P,
    pub k2ox: P,
    pub k3: P,
    pub k3b: P,
    pub vth0: P,
    pub eta0: P,
    pub etab: P,
    pub theta0vb0: P,
    pub theta_rout: P,
    pub nfactor_eps: P,
    pub cdsc: P,
    pub cdscb: P,
    pub cdscd: P,
    pub cit: P,
    pub dvtp0: P,
    pub dvtp1: P,
    pub dvtp2: P,
    pub dvtp4: P,
    pub mstar: P,
    pub voffcbn: P,
    pub coxe_over_cdep0: P,
    pub poly: Option<(P, P)>,
    pub dwg: P,
    pub dwb: P,
    pub rds0: P,
    pub rdswmin: P,
    pub prwg: P,
    pub prwb: P,
    pub a0: P,
    pub ags: P,
    pub b0: P,
    pub b1: P,
    pub keta: P,
    pub a1: P,
    pub a2: P,
    pub xj: P,
    pub mobility: Mobility<P>,
    pub vtfbphi2: P,
    pub centroid: P,
    pub centroid_power: P,
    pub eps_sub: f64,
    pub lambda: P,
    /// Ballistic velocity at the source, m/s, when the card limits it.
    pub source_velocity: Option<P>,
    pub vsat: P,
    pub delta: P,
    pub fprout: P,
    pub pvag: P,
    pub pclm: P,
    pub pdiblcb: P,
    pub pdits: P,
    pub pditsl: P,
    pub pditsd: P,
    pub pscbe1: P,
    pub pscbe2: P,
    pub alpha: P,
    pub beta0: P,
    pub vfbzb: P,
    /// `3·toxe`, or `EOT·EPSRSUB/3.9`, m.
    pub gidl_reach: P,
    /// VFBSD where the material is described, else 0, V.
    pub gidl_vfbsd: P,
    pub gidl: Option<Gidl<P>>,
    pub gisl: Option<Gidl<P>>,
    pub tunnel: Option<Tunnel<P>>,
    pub source: JunctionSide<P>,
    pub drain: JunctionSide<P>,
    /// Resistance outside the channel, when there is any.
    pub series: Option<Series<P>>,
}

impl<P: Real + Over<P>> Prepared<P> {
    /// Works everything out for `card` at geometry `g` and temperature `temp_k`.
    ///
    /// Source: BSIM4.8.0 manual, sections 2, 3, 5, 13 (temperature), 14 (stress), 15.
    pub fn new(card: &Card, values: &Values<P>, g: &Geometry<P>, temp_k: P) -> Self {
        let v = values;
        let size = v.size;
        let (leff, weff) = (size.leff, size.weff);
        let sign = card.polarity.sign();
        let tnom = card.base(Id::Tnom) + 273.15;
        let vtm0 = P::of(MODEL_KB_OVER_Q * tnom);
        let vt = temp_k * MODEL_KB_OVER_Q;
        let ratio = temp_k / tnom;
        let tr = ratio - 1.0;
        let del_t = temp_k - tnom;
        let material = Material::of(card);
        let eps_sub = material.permittivity;
        let described = card.flag(Id::Mtrlmod) == 1;
        let ni = P::of(material.intrinsic(tnom));

        let (toxe, toxp) = (v[Id::Toxe], v[Id::Toxp]);
        let eps_ox = v[Id::Epsrox] * MODEL_EPS0;
        let (coxe, coxp) = (eps_ox / toxe, eps_ox / toxp);
        let factor1 = (toxe * eps_sub / eps_ox).sqrt();

        let (ndep, nsd) = (v[Id::Ndep], v[Id::Nsd]);
        let phi = vtm0 * (ndep / ni).ln() + v[Id::Phin] + 0.4;
        let sqrt_phi = phi.sqrt();
        let xdep0 = (P::of(2.0 * eps_sub) / (ndep * (MODEL_Q * 1e6))).sqrt() * sqrt_phi;
        let over_oxide = if described { P::of(eps_sub) / eps_ox } else { P::of(3.0 * 3.9) / v[Id::Epsrox] };
        let litl = (v[Id::Xj] * toxe * over_oxide).sqrt();
        let vbi = vtm0 * (nsd * ndep / ni.sq()).ln();
        let cdep0 = (ndep * (MODEL_Q * eps_sub * 1e6 / 2.0) / phi).sqrt();

        // body-effect coefficients: given, or from the doping
        let (mut k1, mut k2) = (v[Id::K1], v[Id::K2]);
        if !card.has(Id::K1)
            && !card.has(Id::K2)
            && (card.has(Id::Gamma1) || card.has(Id::Gamma2) || card.has(Id::Nsub))
        {
            let gamma = |id: Id, n: P| {
                if card.has(id) { v[id] } else { n.sqrt() * (5.753e-12 * (eps_sub / EPS_SI).sqrt()) / coxe }
            };
            let (g1, g2) = (gamma(Id::Gamma1, ndep), gamma(Id::Gamma2, v[Id::Nsub]));
            let vbx = if card.has(Id::Vbx) {
                -v[Id::Vbx].abs()
            } else {
                -(phi - ndep * (7.7348e-4 * EPS_SI / eps_sub) * v[Id::Xt].sq()).abs()
            };
            let vbm = -v[Id::Vbm].abs();
            let t2 = (phi * (phi - vbm)).sqrt() - phi;
            k2 = (g1 - g2) * ((phi - vbx).sqrt() - sqrt_phi) / (t2 + vbm);
            k1 = g2 - k2 * 2.0 * (phi - vbm).sqrt();
        }
        let (vth0_plain, vfb) = if card.has(Id::Vth0) {
            let vth0 = v[Id::Vth0] * sign;
            (vth0, if card.has(Id::Vfb) { v[Id::Vfb] } else { vth0 - phi - k1 * sqrt_phi })
        } else if card.has(Id::Vfb) {
            (v[Id::Vfb] + phi + k1 * sqrt_phi, v[Id::Vfb])
        } else {
            (P::of(-1.0) + phi + k1 * sqrt_phi, P::of(-1.0))
        };

        // a threshold shift of the instance moves the flat band with it
        let vfb = vfb + g.delvto_v * sign;
        let stress = Stress::of(v, g, tr);
        let (sca, scb, scc) = g.well_proximity;
        let wpe =
            if card.flag(Id::Wpemod) == 1 { sca + v[Id::Web] * scb + v[Id::Wec] * scc } else { P::of(0.0) };
        let vth0 = vth0_plain + (stress.dvth0 + v[Id::Kvth0we] * wpe + g.delvto_v) * sign;
        let k2 = k2 + stress.dk2 + v[Id::K2we] * wpe;
        let eta0 = v[Id::Eta0] + stress.deta0;
        let (eta0, nfactor) = (eta0 + v[Id::Teta0] * tr, v[Id::Nfactor] + v[Id::Tnfactor] * tr);

        let scale = toxe / v[Id::Toxm];
        let (k1ox, k2ox) = (k1 * scale, k2 * scale);
        let vbsc = {
            let raw = if k2.val() < 0.0 {
                let t0 = k1 * 0.5 / k2;
                let x = (phi - t0.sq()) * 0.9;
                if x.val() > -3.0 {
                    P::of(-3.0)
                } else if x.val() < -30.0 {
                    P::of(-30.0)
                } else {
                    x
                }
            } else {
                P::of(-30.0)
            };
            if raw.val() > v[Id::Vbm].val() { v[Id::Vbm] } else { raw }
        };

        let lt0 = factor1 * xdep0.sqrt();
        let lpe0_root = (v[Id::Lpe0] / leff + 1.0).sqrt();
        let narrow = toxe * phi / (weff + v[Id::W0]);
        let kt = v[Id::Kt1] + v[Id::Kt1l] / leff;
        let t1_const = k1ox * (lpe0_root - 1.0) * sqrt_phi + kt * tr;
        let dvt1l = v[Id::Dvt1] * leff;
        let dvt1wl = v[Id::Dvt1w] * weff * leff;
        // flat-band voltage at zero bias, for the oxide voltage
        let v0 = vbi - phi;
        let narrow_short0 =
            if v[Id::Dvt0w].val() == 0.0 { P::of(0.0) } else { v[Id::Dvt0w] * theta(dvt1wl / lt0) * v0 };
        let short0 = v[Id::Dvt0] * theta(dvt1l / lt0) * v0;
        let vfbzb = vth0 - narrow_short0 - short0 + v[Id::K3] * narrow + t1_const - phi - k1 * sqrt_phi;

        let over_t = card.flag(Id::Tempmod) != 0;
        // models 1 and 2 scale with the distance from TNOM, model 3 with a power of the ratio, model 0 adds
        let linear = |p: Id, p1: Id| match card.flag(Id::Tempmod) {
            0 => v[p] + v[p1] * tr,
            3 => v[p] * ratio.pow(v[p1]),
            _ => v[p] * (v[p1] * del_t + 1.0),
        };
        let with_heat =
            |p: Id| if over_t { v[p] * (v[Id::Prt] * del_t + 1.0) } else { v[p] + v[Id::Prt] * tr };
        let u0 = v[Id::U0]
            * ratio.pow(v[Id::Ute])
            * (v[Id::Ku0we] * wpe + 1.0)
            * stress.mobility
            * g.mobility_factor
            * (-(v[Id::Up] * (-(leff / v[Id::Lp])).exp()) + 1.0);
        let vsat =
            if over_t { v[Id::Vsat] * (-(v[Id::At] * del_t) + 1.0) } else { v[Id::Vsat] - v[Id::At] * tr };
        let per_width = (size.weffcj * 1e6).pow(v[Id::Wr]);
        let floor0 = |x: P| if x.val() < 0.0 { P::of(0.0) } else { x };

        let voff = v[Id::Voff] * (v[Id::Tvoff] * del_t + 1.0);
        let vtfb = vth0 - vfb - phi;
        let ngate = v[Id::Ngate];
        // a described gate without permittivity is metal
        let eps_gate = if described { card.base(Id::Epsrgate) * MODEL_EPS0 } else { EPS_SI };
        let poly = (eps_gate > 0.0 && ngate.val() > 1e18 && ngate.val() < 1e25)
            .then(|| (vfb + phi, ngate * (1e6 * MODEL_Q * eps_gate) / coxe.sq()));

        let gidl_of = |ids: [Id; 7]| {
            let [a, b, c, e, r, k, f] = ids.map(|id| v[id]);
            let on = a.val() > 0.0 && b.val() > 0.0 && (c.val() > 0.0 || card.flag(Id::Gidlmod) == 1);
            on.then_some(Gidl { a, b, c, e, r, k, f })
        };
        let gidl = gidl_of([Id::Agidl, Id::Bgidl, Id::Cgidl, Id::Egidl, Id::Rgidl, Id::Kgidl, Id::Fgidl]);
        let gisl = gidl_of([Id::Agisl, Id::Bgisl, Id::Cgisl, Id::Egisl, Id::Rgisl, Id::Kgisl, Id::Fgisl]);

        let gap0 = material.gap(tnom);
        let vfbsd = if described {
            let band = vtm0 * (nsd / ni).ln();
            let edge = if band.val() < 0.5 * gap0 { band } else { P::of(0.5 * gap0) };
            (-(-(edge * sign) + (card.base(Id::Easub) + 0.5 * gap0)) + card.base(Id::Phig)) * sign
        } else if ngate.val() > 0.0 {
            vtm0 * (ngate / nsd).ln()
        } else {
            P::of(0.0)
        };
        let vfbsd_gidl = if described { vfbsd } else { P::of(0.0) };
        let vfbsd = vfbsd + v[Id::Vfbsdoff] * (v[Id::Tvfbsdoff] * del_t + 1.0);

        let igc = card.flag(Id::Igcmod);
        let igb = card.flag(Id::Igbmod) == 1;
        let tunnel = (igc != 0 || igb).then(|| {
            let n = card.polarity == Polarity::N;
            let (a, b) = if n { (4.97232e-7, 7.45669e11) } else { (3.42537e-7, 1.16645e12) };
            let ntox = v[Id::Ntox];
            let thick = |t: P| (v[Id::Toxref] / t).pow(ntox) / t.sq();
            let edge_t = toxe * v[Id::Poxedge];
            let (area, edge) = (weff * leff * thick(toxe), weff * thick(edge_t));
            Tunnel {
                igc,
                igb,
                a_channel: area * a,
                b_channel: -(toxe * b),
                a_edge_s: edge * v[Id::Dlcig] * a,
                a_edge_d: edge * v[Id::Dlcigd] * a,
                b_edge: -(edge_t * b),
                a_bulk_acc: area * 4.97232e-7,
                b_bulk_acc: toxe * -7.45669e11,
                a_bulk_inv: area * 3.75956e-7,
                b_bulk_inv: toxe * -9.82222e11,
                vfbsd,
                aigc: v[Id::Aigc],
                bigc: v[Id::Bigc],
                cigc: v[Id::Cigc],
                edge_s: [v[Id::Aigs], v[Id::Bigs], v[Id::Cigs]],
                edge_d: [v[Id::Aigd], v[Id::Bigd], v[Id::Cigd]],
                acc: [v[Id::Aigbacc], v[Id::Bigbacc], v[Id::Cigbacc]],
                inv: [v[Id::Aigbinv], v[Id::Bigbinv], v[Id::Cigbinv]],
                vt_nigc: vt * v[Id::Nigc],
                vt_nigbacc: vt * v[Id::Nigbacc],
                vt_nigbinv: vt * v[Id::Nigbinv],
                eigbinv: v[Id::Eigbinv],
                pigcd: card.has(Id::Pigcd).then_some(v[Id::Pigcd]),
                toxe,
                rest_v: -effective_gate::<P, P>(poly, P::of(0.0)),
            }
        });

        let junctions = Junctions::of(card, v, g, temp_k, tnom);
        let vtfbphi = |f: f64| floor0(vtfb * f);
        let outside = card.flag(Id::Rdsmod) == 1;
        let end = |overlap: Id, least: Id, squares: P| {
            let part =
                |id: Id| if outside { floor0(with_heat(id)) / per_width / g.fingers } else { P::of(0.0) };
            EndResistance {
                overlap_ohm: part(overlap),
                least_ohm: part(least),
                diffusion_ohm: squares * v[Id::Rsh],
            }
        };
        let series = Series {
            source: end(Id::Rsw, Id::Rswmin, g.source_squares),
            drain: end(Id::Rdw, Id::Rdwmin, g.drain_squares),
            prwg: v[Id::Prwg],
            prwb: v[Id::Prwb],
            vfbsd,
        };
        let resists = |e: &EndResistance<P>| (e.overlap_ohm + e.least_ohm + e.diffusion_ohm).val() > 0.0;
        let series = (resists(&series.source) || resists(&series.drain)).then_some(series);

        let mut made = Self {
            polarity: card.polarity,
            nf: g.fingers,
            version: card.base(Id::Version),
            gidlmod: card.flag(Id::Gidlmod),
            vt,
            vt_dits: if card.flag(Id::Tempmod) >= 2 { vtm0 } else { vt },
            phi,
            sqrt_phi,
            v0,
            xdep0_over: xdep0 / sqrt_phi,
            factor1,
            coxe,
            coxp,
            toxe,
            toxp,
            leff,
            weff,
            weffcj: size.weffcj,
            litl,
            vbsc,
            dvt0: v[Id::Dvt0],
            dvt1l,
            dvt2: v[Id::Dvt2],
            dvt0w: v[Id::Dvt0w],
            dvt1wl,
            dvt2w: v[Id::Dvt2w],
            t1_const,
            kt2_tr: v[Id::Kt2] * tr,
            narrow,
            lpe_vb: (v[Id::Lpeb] / leff + 1.0).sqrt(),
            k1,
            k1ox,
            k2ox,
            k3: v[Id::K3],
            k3b: v[Id::K3b],
            vth0,
            eta0,
            etab: v[Id::Etab],
            theta0vb0: theta(v[Id::Dsub] * leff / lt0),
            theta_rout: v[Id::Pdiblc1] * theta(v[Id::Drout] * leff / lt0) + v[Id::Pdiblc2],
            nfactor_eps: nfactor * eps_sub,
            cdsc: v[Id::Cdsc],
            cdscb: v[Id::Cdscb],
            cdscd: v[Id::Cdscd],
            cit: v[Id::Cit],
            dvtp0: v[Id::Dvtp0],
            dvtp1: v[Id::Dvtp1],
            dvtp2: v[Id::Dvtp5]
                + if v[Id::Dvtp2].val() == 0.0 { P::of(0.0) } else { v[Id::Dvtp2] / leff.pow(v[Id::Dvtp3]) },
            dvtp4: v[Id::Dvtp4],
            mstar: v[Id::Minv].atan() / std::f64::consts::PI + 0.5,
            voffcbn: voff + v[Id::Voffl] / leff,
            coxe_over_cdep0: coxe / cdep0,
            poly,
            dwg: v[Id::Dwg],
            dwb: v[Id::Dwb],
            rds0: if outside { P::of(0.0) } else { floor0(with_heat(Id::Rdsw)) / per_width },
            rdswmin: if outside { P::of(0.0) } else { floor0(with_heat(Id::Rdswmin)) / per_width },
            prwg: v[Id::Prwg],
            prwb: v[Id::Prwb],
            a0: v[Id::A0],
            ags: v[Id::Ags],
            b0: v[Id::B0],
            b1: v[Id::B1],
            keta: v[Id::Keta],
            a1: v[Id::A1],
            a2: v[Id::A2],
            xj: v[Id::Xj],
            mobility: Mobility {
                model: card.flag(Id::Mobmod),
                u0,
                ua: linear(Id::Ua, Id::Ua1),
                ub: linear(Id::Ub, Id::Ub1),
                uc: linear(Id::Uc, Id::Uc1),
                ud: linear(Id::Ud, Id::Ud1),
                eu: v[Id::Eu],
                ucs: linear(Id::Ucs, Id::Ucste),
                vtfbphi1: vtfbphi(if card.polarity == Polarity::N { 2.0 } else { 2.5 }),
                gate_shift: if described {
                    P::of(2.0 * sign * (card.base(Id::Phig) - card.base(Id::Easub) - 0.5 * gap0 + 0.45))
                } else {
                    P::of(0.0)
                },
                vgsteff_vth: P::of(1.0),
            },
            vtfbphi2: vtfbphi(4.0),
            centroid: v[Id::Ados] * 1.9e-9,
            centroid_power: v[Id::Bdos] * 0.7,
            eps_sub,
            lambda: if card.has(Id::Lambda) { v[Id::Lambda] } else { P::of(0.0) },
            source_velocity: (card.has(Id::Vtl) && v[Id::Vtl].val() > 0.0).then(|| {
                // back-scattering r = L/(XN·L + LC); the limit is VTL·(1 − r)/(1 + r)
                let r = leff / (v[Id::Xn] * leff + v[Id::Lc]);
                v[Id::Vtl] * (-r + 1.0) / (r + 1.0)
            }),
            vsat: vsat * stress.velocity,
            delta: v[Id::Delta],
            fprout: v[Id::Fprout],
            pvag: v[Id::Pvag],
            pclm: v[Id::Pclm],
            pdiblcb: v[Id::Pdiblcb],
            pdits: v[Id::Pdits],
            pditsl: v[Id::Pditsl],
            pditsd: v[Id::Pditsd],
            pscbe1: v[Id::Pscbe1],
            pscbe2: v[Id::Pscbe2],
            alpha: v[Id::Alpha0] + v[Id::Alpha1] * leff,
            beta0: v[Id::Beta0],
            vfbzb,
            gidl_reach: if described { toxe * (card.base(Id::Epsrsub) / 3.9) } else { toxe * 3.0 },
            gidl_vfbsd: vfbsd_gidl,
            gidl,
            gisl,
            tunnel,
            source: junctions.source,
            drain: junctions.drain,
            series,
        };
        if made.mobility.model == 3 {
            let th = Threshold::at(&made, P::of(0.0), P::of(0.0), P::of(0.0));
            let nvt = th.n * vt;
            let below = th.n * made.coxe_over_cdep0 * (made.voffcbn / nvt).exp();
            made.mobility.vgsteff_vth = nvt * std::f64::consts::LN_2 / (below + made.mstar);
        }
        if described && !card.has(Id::Toxp) {
            made.set_physical_oxide(P::of(card.base(Id::Vddeot)) * sign, eps_ox, eps_sub);
        }
        made
    }

    /// Physical oxide under an equivalent one: `TOXP = EOT − (3.9/EPSRSUB)·Xdc` at the voltage where EOT was measured, by
    /// fixed-point iteration, on the size and at the temperature of the device itself.
    ///
    /// Source: BSIM4.8.0 manual, section 1.2 (from memory of it).
    fn set_physical_oxide(&mut self, at_v: P, eps_ox: P, eps_sub: f64) {
        let zero = P::of(0.0);
        let vgsteff = Threshold::at(self, at_v, zero, zero).vgsteff;
        for _ in 0..50 {
            let field = (vgsteff + self.vtfbphi2) / (self.toxp * 2e8);
            let depth = self.centroid / ((field.ln() * self.centroid_power).exp() + 1.0);
            let next = self.toxe - depth * (eps_ox / eps_sub);
            let next = if next.val() > 0.1 * self.toxe.val() { next } else { self.toxe * 0.1 };
            self.toxp = next;
        }
        self.coxp = eps_ox / self.toxp;
    }
}
