//! What depends on geometry and temperature only, computed once per device and corner.

use super::junction::{JunctionSide, Junctions};
use super::poly::effective_gate;
use super::silicon::{EPS_SI, MODEL_EPS0, MODEL_KB_OVER_Q, MODEL_Q, intrinsic_density, theta};
use super::stress::Stress;
use super::table::Id;
use super::values::{Card, Values};
use crate::device::dual::Over;
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
    pub mobmod: i64,
    pub gidlmod: i64,
    pub vt: P,
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
    pub u0: P,
    pub ua: P,
    pub ub: P,
    pub uc: P,
    pub ud: P,
    pub eu: P,
    pub vtfbphi1: P,
    pub vtfbphi2: P,
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
    pub gidl: Option<Gidl<P>>,
    pub gisl: Option<Gidl<P>>,
    pub tunnel: Option<Tunnel<P>>,
    pub source: JunctionSide<P>,
    pub drain: JunctionSide<P>,
}

impl<P: Over<P>> Prepared<P> {
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
        let ni = P::of(intrinsic_density(tnom));

        let (toxe, toxp) = (v[Id::Toxe], v[Id::Toxp]);
        let eps_ox = v[Id::Epsrox] * MODEL_EPS0;
        let (coxe, coxp) = (eps_ox / toxe, eps_ox / toxp);
        let factor1 = (toxe * EPS_SI / eps_ox).sqrt();

        let (ndep, nsd) = (v[Id::Ndep], v[Id::Nsd]);
        let phi = vtm0 * (ndep / ni).ln() + v[Id::Phin] + 0.4;
        let sqrt_phi = phi.sqrt();
        let xdep0 = (P::of(2.0 * EPS_SI) / (ndep * (MODEL_Q * 1e6))).sqrt() * sqrt_phi;
        let litl = (v[Id::Xj] * toxe * 3.0).sqrt();
        let vbi = vtm0 * (nsd * ndep / ni.sq()).ln();
        let cdep0 = (ndep * (MODEL_Q * EPS_SI * 1e6 / 2.0) / phi).sqrt();

        // body-effect coefficients: given, or from the doping
        let (mut k1, mut k2) = (v[Id::K1], v[Id::K2]);
        if !card.has(Id::K1)
            && !card.has(Id::K2)
            && (card.has(Id::Gamma1) || card.has(Id::Gamma2) || card.has(Id::Nsub))
        {
            let gamma = |id: Id, n: P| if card.has(id) { v[id] } else { n.sqrt() * 5.753e-12 / coxe };
            let (g1, g2) = (gamma(Id::Gamma1, ndep), gamma(Id::Gamma2, v[Id::Nsub]));
            let vbx = if card.has(Id::Vbx) {
                -v[Id::Vbx].abs()
            } else {
                -(phi - ndep * 7.7348e-4 * v[Id::Xt].sq()).abs()
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
        let linear = |p: Id, p1: Id| if over_t { v[p] * (v[p1] * del_t + 1.0) } else { v[p] + v[p1] * tr };
        let u0 = v[Id::U0]
            * ratio.pow(v[Id::Ute])
            * (v[Id::Ku0we] * wpe + 1.0)
            * stress.mobility
            * g.mobility_factor;
        let vsat =
            if over_t { v[Id::Vsat] * (-(v[Id::At] * del_t) + 1.0) } else { v[Id::Vsat] - v[Id::At] * tr };
        let per_width = (size.weffcj * 1e6).pow(v[Id::Wr]);
        let rdsw =
            if over_t { v[Id::Rdsw] * (v[Id::Prt] * del_t + 1.0) } else { v[Id::Rdsw] + v[Id::Prt] * tr };
        let rdswmin = if over_t { v[Id::Rdswmin] * (v[Id::Prt] * del_t + 1.0) } else { v[Id::Rdswmin] };
        let floor0 = |x: P| if x.val() < 0.0 { P::of(0.0) } else { x };

        let voff = v[Id::Voff] * (v[Id::Tvoff] * del_t + 1.0);
        let vtfb = vth0 - vfb - phi;
        let ngate = v[Id::Ngate];
        let poly = (ngate.val() > 1e18 && ngate.val() < 1e25)
            .then(|| (vfb + phi, ngate * (1e6 * MODEL_Q * EPS_SI) / coxe.sq()));

        let gidl_of = |ids: [Id; 7]| {
            let [a, b, c, e, r, k, f] = ids.map(|id| v[id]);
            let on = a.val() > 0.0 && b.val() > 0.0 && (c.val() > 0.0 || card.flag(Id::Gidlmod) == 1);
            on.then_some(Gidl { a, b, c, e, r, k, f })
        };
        let gidl = gidl_of([Id::Agidl, Id::Bgidl, Id::Cgidl, Id::Egidl, Id::Rgidl, Id::Kgidl, Id::Fgidl]);
        let gisl = gidl_of([Id::Agisl, Id::Bgisl, Id::Cgisl, Id::Egisl, Id::Rgisl, Id::Kgisl, Id::Fgisl]);

        let igc = card.flag(Id::Igcmod);
        let igb = card.flag(Id::Igbmod) == 1;
        let tunnel = (igc != 0 || igb).then(|| {
            let n = card.polarity == Polarity::N;
            let (a, b) = if n { (4.97232e-7, 7.45669e11) } else { (3.42537e-7, 1.16645e12) };
            let ntox = v[Id::Ntox];
            let thick = |t: P| (v[Id::Toxref] / t).pow(ntox) / t.sq();
            let edge_t = toxe * v[Id::Poxedge];
            let (area, edge) = (weff * leff * thick(toxe), weff * thick(edge_t));
            let vfbsd = if ngate.val() > 0.0 { vtm0 * (ngate / nsd).ln() } else { P::of(0.0) };
            let vfbsdoff = v[Id::Vfbsdoff] * (v[Id::Tvfbsdoff] * del_t + 1.0);
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
                vfbsd: vfbsd + vfbsdoff,
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
        Self {
            polarity: card.polarity,
            nf: g.fingers,
            version: card.base(Id::Version),
            mobmod: card.flag(Id::Mobmod),
            gidlmod: card.flag(Id::Gidlmod),
            vt,
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
            nfactor_eps: nfactor * EPS_SI,
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
            rds0: floor0(rdsw) / per_width,
            rdswmin: floor0(rdswmin) / per_width,
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
            u0,
            ua: linear(Id::Ua, Id::Ua1),
            ub: linear(Id::Ub, Id::Ub1),
            uc: linear(Id::Uc, Id::Uc1),
            ud: linear(Id::Ud, Id::Ud1),
            eu: v[Id::Eu],
            vtfbphi1: vtfbphi(if card.polarity == Polarity::N { 2.0 } else { 2.5 }),
            vtfbphi2: vtfbphi(4.0),
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
            gidl,
            gisl,
            tunnel,
            source: junctions.source,
            drain: junctions.drain,
        }
    }
}
