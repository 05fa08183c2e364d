//! Devices: terminal currents by mechanism, with exact derivatives, behind one trait.

pub mod bsim4;
pub mod bulk;
pub mod compact;
pub mod diode;
pub mod dual;
pub mod in_series;
pub mod lanes;
pub mod process;
pub mod range;
pub mod root;
pub mod sensitivity;
pub mod spec;
pub mod table;

use serde::{Deserialize, Serialize};

use dual::{Dual, Number, Real};
use range::Outside;

/// Channel type.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, Serialize, Deserialize)]
pub enum Polarity {
    /// n-channel.
    N,
    /// p-channel.
    P,
}

impl Polarity {
    /// +1 for n-channel, −1 for p-channel.
    pub fn sign(self) -> f64 {
        if self == Self::N { 1.0 } else { -1.0 }
    }
}

/// Where current comes from.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Mechanism {
    /// Drain-source current: subthreshold when off (impact ionisation included).
    Channel,
    /// Gate-induced drain (and source) leakage into the body.
    Gidl,
    /// Tunnelling through the gate oxide.
    Gate,
    /// Drain, source and well junctions.
    Junction,
    /// Conductance added on request only.
    Floor,
}

impl Mechanism {
    /// All, in report order.
    pub const ALL: [Self; 5] = [Self::Channel, Self::Gidl, Self::Gate, Self::Junction, Self::Floor];
    /// Lower-case name.
    pub fn name(self) -> &'static str {
        match self {
            Self::Channel => "channel",
            Self::Gidl => "gidl",
            Self::Gate => "gate",
            Self::Junction => "junction",
            Self::Floor => "floor",
        }
    }
}

/// Terminal voltages seen from the source terminal, V. Differences, not absolute values, so that a nanovolt across an
/// on device keeps all its digits.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Bias<R> {
    /// Gate to source.
    pub vgs: R,
    /// Drain to source.
    pub vds: R,
    /// Body to source.
    pub vbs: R,
}

impl<R: Number> Bias<R> {
    /// All voltages the other way.
    #[must_use]
    #[inline(always)]
    pub fn reversed(self) -> Self {
        Self { vgs: -self.vgs, vds: -self.vds, vbs: -self.vbs }
    }

    /// The bias seen from the drain where `mask` says so.
    #[must_use]
    #[inline(always)]
    pub fn exchanged(self, mask: R::Mask) -> Self {
        Self {
            vgs: R::select(mask, self.vgs - self.vds, self.vgs),
            vds: R::select(mask, -self.vds, self.vds),
            vbs: R::select(mask, self.vbs - self.vds, self.vbs),
        }
    }
}

impl Bias<f64> {
    /// From four absolute voltages.
    pub fn from_terminals(vd: f64, vg: f64, vs: f64, vb: f64) -> Self {
        Self { vgs: vg - vs, vds: vd - vs, vbs: vb - vs }
    }
    /// With derivatives with respect to vgs, vds, vbs.
    pub fn dual(self) -> Bias<Dual<3>> {
        Bias {
            vgs: Dual::variable(self.vgs, 0),
            vds: Dual::variable(self.vds, 1),
            vbs: Dual::variable(self.vbs, 2),
        }
    }
}

/// Derivatives to (vgs, vds, vbs) as derivatives to the voltages of drain, gate, source and body.
pub fn per_terminal(d: [f64; 3]) -> [f64; 4] {
    [d[1], d[0], -(d[0] + d[1] + d[2]), d[2]]
}

/// Currents along the branches of a device, A.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Branches<R> {
    /// Drain to source, channel.
    pub channel_ds: R,
    /// Drain to body, impact ionisation.
    pub impact_db: R,
    /// Source to body, impact ionisation when drain and source change places.
    pub impact_sb: R,
    /// Drain to body, GIDL.
    pub gidl_db: R,
    /// Source to body, GISL.
    pub gidl_sb: R,
    /// Drain to body through the junction.
    pub junction_db: R,
    /// Source to body through the junction.
    pub junction_sb: R,
    /// Gate to drain.
    pub gate_gd: R,
    /// Gate to source.
    pub gate_gs: R,
    /// Gate to body.
    pub gate_gb: R,
}

/// Terminals of a device, in the order of every array.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Terminal {
    /// Drain.
    Drain = 0,
    /// Gate.
    Gate = 1,
    /// Source.
    Source = 2,
    /// Body.
    Body = 3,
}

impl<R: Number> Branches<R> {
    /// The same current in every branch.
    pub fn all(z: R) -> Self {
        Self {
            channel_ds: z,
            impact_db: z,
            impact_sb: z,
            gidl_db: z,
            gidl_sb: z,
            junction_db: z,
            junction_sb: z,
            gate_gd: z,
            gate_gs: z,
            gate_gb: z,
        }
    }

    /// Applies a function to every branch.
    #[must_use]
    #[inline(always)]
    pub fn map<S>(self, f: impl Fn(R) -> S) -> Branches<S> {
        Branches {
            channel_ds: f(self.channel_ds),
            impact_db: f(self.impact_db),
            impact_sb: f(self.impact_sb),
            gidl_db: f(self.gidl_db),
            gidl_sb: f(self.gidl_sb),
            junction_db: f(self.junction_db),
            junction_sb: f(self.junction_sb),
            gate_gd: f(self.gate_gd),
            gate_gs: f(self.gate_gs),
            gate_gb: f(self.gate_gb),
        }
    }

    /// The branches in the order of the fields.
    #[inline(always)]
    pub fn into_array(self) -> [R; 10] {
        [
            self.channel_ds,
            self.impact_db,
            self.impact_sb,
            self.gidl_db,
            self.gidl_sb,
            self.junction_db,
            self.junction_sb,
            self.gate_gd,
            self.gate_gs,
            self.gate_gb,
        ]
    }

    /// All currents the other way.
    #[must_use]
    #[inline(always)]
    pub fn reversed(self) -> Self {
        Self {
            channel_ds: -self.channel_ds,
            impact_db: -self.impact_db,
            impact_sb: -self.impact_sb,
            gidl_db: -self.gidl_db,
            gidl_sb: -self.gidl_sb,
            junction_db: -self.junction_db,
            junction_sb: -self.junction_sb,
            gate_gd: -self.gate_gd,
            gate_gs: -self.gate_gs,
            gate_gb: -self.gate_gb,
        }
    }

    /// Drain and source exchanged where `mask` says so.
    #[must_use]
    #[inline(always)]
    pub fn exchanged(self, mask: R::Mask) -> Self {
        Self {
            channel_ds: R::select(mask, -self.channel_ds, self.channel_ds),
            impact_db: R::select(mask, self.impact_sb, self.impact_db),
            impact_sb: R::select(mask, self.impact_db, self.impact_sb),
            gidl_db: R::select(mask, self.gidl_sb, self.gidl_db),
            gidl_sb: R::select(mask, self.gidl_db, self.gidl_sb),
            junction_db: R::select(mask, self.junction_sb, self.junction_db),
            junction_sb: R::select(mask, self.junction_db, self.junction_sb),
            gate_gd: R::select(mask, self.gate_gs, self.gate_gd),
            gate_gs: R::select(mask, self.gate_gd, self.gate_gs),
            gate_gb: self.gate_gb,
        }
    }

    /// Currents into drain, gate, source and body, summed over mechanisms. They add up to zero.
    pub fn terminals(self) -> [R; 4] {
        let db = self.impact_db + self.gidl_db + self.junction_db;
        let sb = self.impact_sb + self.gidl_sb + self.junction_sb;
        [
            self.channel_ds + db - self.gate_gd,
            self.gate_gd + self.gate_gs + self.gate_gb,
            -self.channel_ds + sb - self.gate_gs,
            -db - sb - self.gate_gb,
        ]
    }

    /// Currents into drain, gate, source and body of one mechanism.
    pub fn terminals_of(self, m: Mechanism) -> [R; 4] {
        let z = Self::all(self.channel_ds.like(0.0));
        let part = match m {
            Mechanism::Channel => Self {
                channel_ds: self.channel_ds,
                impact_db: self.impact_db,
                impact_sb: self.impact_sb,
                ..z
            },
            Mechanism::Gidl => Self { gidl_db: self.gidl_db, gidl_sb: self.gidl_sb, ..z },
            Mechanism::Gate => {
                Self { gate_gd: self.gate_gd, gate_gs: self.gate_gs, gate_gb: self.gate_gb, ..z }
            }
            Mechanism::Junction => Self { junction_db: self.junction_db, junction_sb: self.junction_sb, ..z },
            Mechanism::Floor => z,
        };
        part.terminals()
    }
}

impl<R: Real> Branches<R> {
    /// No current anywhere.
    pub fn zero() -> Self {
        Self::all(R::of(0.0))
    }

    /// Sum of the magnitudes of all branches, A: the yardstick of rounding.
    pub fn gross(self) -> f64 {
        let b = self.map(|i| i.val().abs());
        b.channel_ds
            + (b.impact_db + b.impact_sb)
            + (b.gidl_db + b.gidl_sb)
            + (b.junction_db + b.junction_sb)
            + (b.gate_gd + b.gate_gs + b.gate_gb)
    }

    /// From the branches in the order of the fields.
    pub fn from_array(a: [R; 10]) -> Self {
        let [
            channel_ds,
            impact_db,
            impact_sb,
            gidl_db,
            gidl_sb,
            junction_db,
            junction_sb,
            gate_gd,
            gate_gs,
            gate_gb,
        ] = a;
        Self {
            channel_ds,
            impact_db,
            impact_sb,
            gidl_db,
            gidl_sb,
            junction_db,
            junction_sb,
            gate_gd,
            gate_gs,
            gate_gb,
        }
    }
}

/// A device ready to evaluate at one temperature: card, geometry and temperature are already in it.
///
/// Implement it to bring a model of your own; everything to the right of this room speaks only this trait.
pub trait Device: Send + Sync + std::fmt::Debug {
    /// Channel type.
    fn polarity(&self) -> Polarity;
    /// Branch currents at a bias, A.
    fn branches(&self, bias: Bias<f64>) -> Branches<f64>;
    /// Branch currents at many biases, A; `out` must be as long as `biases`.
    ///
    /// Cards and compact devices evaluate several points at once in the vector registers of the machine, within 1e-12 of
    /// [`branches`](Device::branches); see [`bulk`]. Every point has the same bits wherever it stands and whatever stands
    /// beside it.
    ///
    /// # Panics
    /// When the lengths differ.
    fn branches_many(&self, biases: &[Bias<f64>], out: &mut [Branches<f64>]) {
        assert_eq!(biases.len(), out.len(), "one result for each bias");
        for (b, o) in biases.iter().zip(out) {
            *o = self.branches(*b);
        }
    }
    /// Branch currents with derivatives with respect to vgs, vds, vbs.
    fn branches_dual(&self, bias: Bias<Dual<3>>) -> Branches<Dual<3>>;
    /// Whether current can flow through the gate at all.
    fn has_gate_current(&self) -> bool;
    /// Whether gate-induced drain leakage is modelled; without it no optimum overdrive can be found.
    fn has_gidl(&self) -> bool;
    /// Electrical oxide thickness, m, for stress.
    fn oxide_m(&self) -> f64;
    /// Thermal voltage the device works at, V.
    fn thermal_voltage(&self) -> f64;
    /// What a bias asks of the device beyond what its model rests on; `None` for a model without stated range.
    fn outside(&self, _bias: Bias<f64>) -> Option<Outside> {
        None
    }
}

/// Drawn geometry of one transistor, SI units; `m` devices in parallel are counted outside.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Geometry<P = f64> {
    /// Total width of all fingers, m.
    pub width_m: P,
    /// Length, m.
    pub length_m: P,
    /// Number of fingers.
    pub fingers: P,
    /// Gate to diffusion edge on one side, m; zero switches stress off.
    pub sa_m: P,
    /// Gate to diffusion edge on the other side, m.
    pub sb_m: P,
    /// Spacing of fingers, m.
    pub sd_m: P,
    /// Area of the drain, m².
    pub ad_m2: P,
    /// Area of the source, m².
    pub as_m2: P,
    /// Perimeter of the drain, m.
    pub pd_m: P,
    /// Perimeter of the source, m.
    pub ps_m: P,
    /// Squares of diffusion in series with the drain.
    pub drain_squares: P,
    /// Squares of diffusion in series with the source.
    pub source_squares: P,
    /// Well-proximity integrals SCA, SCB, SCC.
    pub well_proximity: (P, P, P),
    /// Threshold shift of this instance, V.
    pub delvto_v: P,
    /// Factor on the mobility of this instance.
    pub mobility_factor: P,
}

impl Geometry<f64> {
    /// A transistor of one finger without stress and without junctions.
    pub fn new(width_m: f64, length_m: f64) -> Self {
        Self {
            width_m,
            length_m,
            fingers: 1.0,
            sa_m: 0.0,
            sb_m: 0.0,
            sd_m: 0.0,
            ad_m2: 0.0,
            as_m2: 0.0,
            pd_m: 0.0,
            ps_m: 0.0,
            drain_squares: 0.0,
            source_squares: 0.0,
            well_proximity: (0.0, 0.0, 0.0),
            delvto_v: 0.0,
            mobility_factor: 1.0,
        }
    }
    /// The same numbers as constants of another kind.
    pub fn lift<P: Real>(&self) -> Geometry<P> {
        let f = P::of;
        Geometry {
            width_m: f(self.width_m),
            length_m: f(self.length_m),
            fingers: f(self.fingers),
            sa_m: f(self.sa_m),
            sb_m: f(self.sb_m),
            sd_m: f(self.sd_m),
            ad_m2: f(self.ad_m2),
            as_m2: f(self.as_m2),
            pd_m: f(self.pd_m),
            ps_m: f(self.ps_m),
            drain_squares: f(self.drain_squares),
            source_squares: f(self.source_squares),
            well_proximity: (f(self.well_proximity.0), f(self.well_proximity.1), f(self.well_proximity.2)),
            delvto_v: f(self.delvto_v),
            mobility_factor: f(self.mobility_factor),
        }
    }
}
