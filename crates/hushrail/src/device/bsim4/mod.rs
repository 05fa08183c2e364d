//! BSIM4 static currents from the published equations (versions 4.0 to 4.8).
//!
//! The order of the work: [`values`] turns the card into numbers for one geometry, [`prepare`] does what depends on
//! temperature, and [`Bsim4`] evaluates the bias equations with plain or dual numbers from the same text.

pub mod channel;
pub mod gate;
pub mod gidl;
pub mod junction;
pub mod layout;
pub mod limits;
pub mod material;
pub mod mobility;
pub mod poly;
pub mod prepare;
pub mod series;
pub mod silicon;
pub mod stress;
pub mod table;
pub mod threshold;
pub mod values;

use super::dual::{Dual, Over, Real};
use super::range::Outside;
use super::{Bias, Branches, Device, Polarity};
use channel::Channel;
use gate::GateCurrents;
use limits::Limits;
use prepare::Prepared;
use threshold::Threshold;

/// A BSIM4 transistor at one temperature.
#[derive(Debug, Clone)]
pub struct Bsim4 {
    /// All constants of the instance.
    pub prepared: Prepared<f64>,
    /// Largest voltages its card states.
    pub limits: Limits,
}

/// Branch currents at a bias, whatever the kind of number.
pub fn branches<P: Real, R: Over<P>>(p: &Prepared<P>, bias: Bias<R>) -> Branches<R> {
    match &p.series {
        None => inner_branches(p, bias),
        Some(s) => series::through(p, s, bias, |b| inner_branches(p, b)),
    }
}

/// Branch currents between the ends of the channel.
fn inner_branches<P: Real, R: Over<P>>(p: &Prepared<P>, bias: Bias<R>) -> Branches<R> {
    let flip = |x: R| if p.polarity == Polarity::P { -x } else { x };
    let (vgs, vds, vbs) = (flip(bias.vgs), flip(bias.vds), flip(bias.vbs));
    let exchanged = vds.val() < 0.0;
    let (vgs_f, vds_f, vbs_f) = if exchanged { (vgs - vds, -vds, vbs - vds) } else { (vgs, vds, vbs) };
    let th = Threshold::at(p, vgs_f, vds_f, vbs_f);
    let ch = Channel::at(p, &th, vds_f);
    let mut b = Branches { channel_ds: ch.ids, impact_db: ch.impact, ..Branches::zero() };

    // the physical drain keeps its own GIDL and edge parameters whichever way the channel runs
    let (dg_ids, sg_ids) = if exchanged { (&p.gisl, &p.gidl) } else { (&p.gidl, &p.gisl) };
    if let Some(g) = dg_ids {
        b.gidl_db = gidl::current(p, g, vds_f, th.vgs_eff, vds_f - vbs_f);
    }
    if let Some(g) = sg_ids {
        // the gate-source edge sees the gate without drain: effective gate minus source
        b.gidl_sb = gidl::current(p, g, R::of(0.0), th.vgs_eff, -vbs_f);
    }
    if let Some(t) = &p.tunnel {
        let g = GateCurrents::at(p, t, exchanged, &th, &ch, vgs_f, vds_f);
        b.gate_gs = g.gs;
        b.gate_gd = g.gd;
        b.gate_gb = g.gb;
    }
    if exchanged {
        b = b.exchanged();
    }
    b.junction_sb = -p.source.current(vbs);
    b.junction_db = -p.drain.current(vbs - vds);
    if p.polarity == Polarity::P { b.map(|x| -x) } else { b }
}

impl Device for Bsim4 {
    fn polarity(&self) -> Polarity {
        self.prepared.polarity
    }
    fn branches(&self, bias: Bias<f64>) -> Branches<f64> {
        branches(&self.prepared, bias)
    }
    fn branches_dual(&self, bias: Bias<Dual<3>>) -> Branches<Dual<3>> {
        branches(&self.prepared, bias)
    }
    fn has_gate_current(&self) -> bool {
        self.prepared.tunnel.is_some()
    }
    fn has_gidl(&self) -> bool {
        self.prepared.gidl.is_some()
    }
    fn oxide_m(&self) -> f64 {
        self.prepared.toxe
    }
    fn thermal_voltage(&self) -> f64 {
        self.prepared.vt
    }
    fn outside(&self, bias: Bias<f64>) -> Option<Outside> {
        self.limits.outside(self.prepared.polarity, bias)
    }
}
