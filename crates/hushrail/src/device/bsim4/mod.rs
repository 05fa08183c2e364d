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

use super::bulk::{RowLaw, Width, sweep};
use super::dual::{Dual, Over, Real};
use super::lanes::Lanes;
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
pub fn branches<P: Real, R: Over<P> + Real>(p: &Prepared<P>, bias: Bias<R>) -> Branches<R> {
    match &p.series {
        None => inner_branches(p, bias),
        Some(s) => series::through(p, s, bias, |b| inner_branches(p, b)),
    }
}

/// Branch currents between the ends of the channel.
#[inline(always)]
fn inner_branches<P: Real, R: Over<P>>(p: &Prepared<P>, bias: Bias<R>) -> Branches<R> {
    let mirrored = p.polarity == Polarity::P;
    let bias = if mirrored { bias.reversed() } else { bias };
    let exchanged = bias.vds.below(0.0);
    let Bias { vgs, vds, vbs } = bias.exchanged(exchanged);
    let th = Threshold::at(p, vgs, vds, vbs);
    let ch = Channel::at(p, &th, vds);
    let zero = vds.like(0.0);
    let mut b =
        Branches { channel_ds: ch.ids, impact_db: ch.impact, ..Branches::all(zero) }.exchanged(exchanged);

    // the physical drain keeps its own GIDL and edge parameters whichever way the channel runs; the end that is the source
    // of the channel sees the gate without drain: effective gate minus source
    let (far_body, near_body) = (vds - vbs, -vbs);
    if let Some(g) = &p.gidl {
        let (vd, vdb) = (R::select(exchanged, zero, vds), R::select(exchanged, near_body, far_body));
        b.gidl_db = gidl::current(p, g, vd, th.vgs_eff, vdb);
    }
    if let Some(g) = &p.gisl {
        let (vs, vsb) = (R::select(exchanged, vds, zero), R::select(exchanged, far_body, near_body));
        b.gidl_sb = gidl::current(p, g, vs, th.vgs_eff, vsb);
    }
    if let Some(t) = &p.tunnel {
        let g = GateCurrents::at(p, t, exchanged, &th, &ch, vgs, vds);
        b.gate_gs = g.gs;
        b.gate_gd = g.gd;
        b.gate_gb = g.gb;
    }
    b.junction_sb = -p.source.current(bias.vbs);
    b.junction_db = -p.drain.current(bias.vbs - bias.vds);
    if mirrored { b.reversed() } else { b }
}

impl RowLaw for Bsim4 {
    #[inline(always)]
    fn row<S: pulp::Simd>(&self, bias: Bias<Lanes<S>>) -> Branches<Lanes<S>> {
        inner_branches(&self.prepared, bias)
    }
}

impl Bsim4 {
    /// [`Device::branches_many`] with vectors of a width that is asked for.
    ///
    /// With resistances outside the channel every point is an iteration of its own and is evaluated alone.
    ///
    /// # Panics
    /// When the lengths differ.
    pub fn branches_with(&self, biases: &[Bias<f64>], out: &mut [Branches<f64>], width: Width) {
        if self.prepared.series.is_none() {
            return sweep(self, biases, out, width);
        }
        assert_eq!(biases.len(), out.len(), "one result for each bias");
        for (b, o) in biases.iter().zip(out) {
            *o = self.branches(*b);
        }
    }
}

impl Device for Bsim4 {
    fn polarity(&self) -> Polarity {
        self.prepared.polarity
    }
    fn branches(&self, bias: Bias<f64>) -> Branches<f64> {
        branches(&self.prepared, bias)
    }
    fn branches_many(&self, biases: &[Bias<f64>], out: &mut [Branches<f64>]) {
        self.branches_with(biases, out, Width::Machine);
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
