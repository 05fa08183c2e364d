//! The numbers of a compact card by name: unit, meaning, range, and how much technologies differ in them.

use super::card::{CompactCard, CompactError, wrong};
use crate::device::Polarity;
use crate::device::dual::Real;
use crate::read::source::nearest;

/// What is known of one number of a card.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Row {
    /// Name, as in a study.
    pub name: &'static str,
    /// Unit; empty for plain numbers.
    pub unit: &'static str,
    /// Lowest value that can be: wide enough for any silicon, tight enough to catch a wrong unit.
    pub low: f64,
    /// Highest value that can be.
    pub high: f64,
    /// How far two technologies typically lie apart; for numbers that span decades in their natural logarithm. Who knows
    /// a number no better than this knows nothing of it. Common practice, no source.
    pub spread: f64,
    /// Whether the number spans decades.
    pub logarithmic: bool,
    /// Whether a fit may set it. Temperature and length of reference say where the others hold; they are choices.
    pub fitted: bool,
    /// What it is.
    pub meaning: &'static str,
}

/// A field that may be left out, or may not.
trait Slot {
    fn get(&self) -> Option<f64>;
    fn put(&mut self, v: f64);
}

impl Slot for f64 {
    fn get(&self) -> Option<f64> {
        Some(*self)
    }
    fn put(&mut self, v: f64) {
        *self = v;
    }
}

impl Slot for Option<f64> {
    fn get(&self) -> Option<f64> {
        *self
    }
    fn put(&mut self, v: f64) {
        *self = Some(v);
    }
}

macro_rules! params {
    ($($id:ident $field:ident $unit:literal $low:literal $high:literal $spread:literal $log:ident $fit:ident $meaning:literal;)*) => {
        /// One number of a card.
        #[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
        pub enum Param {
            $(#[doc = $meaning] $id),*
        }

        impl Param {
            /// All, in the order of a card.
            pub const ALL: &'static [Self] = &[$(Self::$id),*];
        }

        /// One row for each of [`Param::ALL`].
        pub const ROWS: [Row; Param::ALL.len()] = [$(Row {
            name: stringify!($field), unit: $unit, low: $low, high: $high, spread: $spread,
            logarithmic: params!(@flag $log), fitted: params!(@flag $fit), meaning: $meaning,
        }),*];

        impl CompactCard {
            fn slot(&self, p: Param) -> &dyn Slot {
                match p { $(Param::$id => &self.$field),* }
            }
            fn slot_mut(&mut self, p: Param) -> &mut dyn Slot {
                match p { $(Param::$id => &mut self.$field),* }
            }
        }
    };
    (@flag log) => { true };
    (@flag lin) => { false };
    (@flag fit) => { true };
    (@flag set) => { false };
}

params! {
    Vt0 vt0_v "V" -2.0 3.0 0.1 lin fit "Threshold without drain and body voltage";
    SlopeN slope_n "" 1.0 5.0 0.2 lin fit "Slope factor in weak inversion at threshold";
    Dibl dibl_v_v "V/V" 0.0 0.5 0.05 lin fit "Threshold lost per volt between drain and source";
    Body body_sqrt_v "√V" 0.0 2.0 0.2 lin fit "Body-effect coefficient";
    Phi phi_v "V" 0.5 1.1 0.1 lin fit "Surface potential at threshold";
    Mobility mobility_m2_vs "m²/(V·s)" 1e-4 0.2 1.0 log fit "Mobility at threshold";
    Oxide oxide_m "m" 0.5e-9 100e-9 0.3 log fit "Electrical oxide thickness";
    Nominal nominal_c "°C" -60.0 200.0 10.0 lin set "Temperature the numbers hold at";
    Length length_m "m" 5e-9 1e-3 1.0 log set "Channel length at which threshold and barrier lowering hold";
    VtTemp vt_temp_v_k "V/K" -5e-3 2e-3 0.5e-3 lin fit "Threshold change with temperature";
    MobilityExponent mobility_exponent "" -3.0 1.0 0.5 lin fit "Exponent of T in the mobility";
    Theta theta_1_v "1/V" 0.0 10.0 0.3 lin fit "Loss of mobility per volt of gate overdrive";
    Saturation saturation_m_s "m/s" 1e4 1e6 0.5 log fit "Saturation velocity";
    Series series_ohm_m "Ω·m" 0.0 0.1 1.0 log fit "Resistance of source and drain together times width";
    GidlA gidl_a_s "S" 0.0 1.0 2.3 log fit "GIDL prefactor";
    GidlB gidl_b_v_m "V/m" 1e8 1e10 0.3 log fit "GIDL field";
    GidlC gidl_c_v3 "V³" 1e-9 1e4 2.3 log fit "GIDL body factor";
    GidlE gidl_e_v "V" 0.0 5.0 0.3 lin fit "GIDL band bending";
    GenerationArea generation_a_m2 "A/m²" 0.0 1e3 2.3 log fit "Generation current of a junction over its area";
    GenerationEdge generation_a_m "A/m" 0.0 1e-2 2.3 log fit "Generation current of a junction over its perimeter";
    Diffusion diffusion_a_m2 "A/m²" 0.0 1e3 2.3 log fit "Saturation current of diffusion over the area";
    Halo halo_m3 "1/m³" 0.0 1e26 1.0 log fit "Doping of the body against the drain at the gate edge";
    JunctionDepth junction_depth_m "m" 0.0 1e-6 1.0 log fit "Depth of the junction wall that tunnels";
    Overlap overlap_m "m" 0.0 1e-6 1.0 log fit "Gate over diffusion at each edge";
    TunnelBarrier tunnel_barrier_v "V" 1.0 6.0 0.5 lin fit "Barrier of the oxide for the carriers of the channel";
    TunnelMass tunnel_mass "" 0.05 2.0 0.3 log fit "Tunnelling mass in the oxide, in free electron masses";
    TunnelOxide tunnel_oxide_m "m" 0.5e-9 100e-9 0.3 log fit "Thickness carriers tunnel through";
}

/// How many there are.
pub const COUNT: usize = ROWS.len();

impl Param {
    /// What is known of it.
    pub fn row(self) -> &'static Row {
        &ROWS[self as usize]
    }

    /// By its name.
    ///
    /// # Errors
    /// No such number; with the nearest name.
    pub fn find(name: &str) -> Result<Self, CompactError> {
        let all = Self::ALL.iter().copied();
        all.clone().find(|p| p.row().name == name).ok_or_else(|| CompactError::Parameter {
            name: name.to_owned(),
            nearest: nearest(name, all.map(|p| p.row().name)),
        })
    }
}

impl CompactCard {
    /// A number of the card; nothing when it was left out.
    pub fn get(&self, p: Param) -> Option<f64> {
        self.slot(p).get()
    }

    /// Sets a number of the card; [`check`](Self::check) judges it.
    pub fn set(&mut self, p: Param, v: f64) {
        self.slot_mut(p).put(v);
    }

    /// A card of named numbers; those left out are as in a study.
    ///
    /// # Errors
    /// A name that is unknown, a number that is needed and missing, or [`check`](Self::check)'s.
    pub fn from_numbers<'a>(
        polarity: Polarity,
        numbers: impl IntoIterator<Item = (&'a str, f64)>,
        gidl_follows_gap: bool,
    ) -> Result<Self, CompactError> {
        let mut card = Self::bare(polarity);
        card.gidl_follows_gap = gidl_follows_gap;
        for (name, v) in numbers {
            card.set(Param::find(name)?, v);
        }
        // the bare card holds NaN where a study must give a number
        if let Some(p) = Param::ALL.iter().find(|p| {
            Self::bare(polarity).get(**p).is_some_and(f64::is_nan) && card.get(**p).is_some_and(f64::is_nan)
        }) {
            return Err(wrong(p.row().name, "missing".into(), p.row().wanted()));
        }
        card.check()?;
        Ok(card)
    }

    /// Least slope factor that the depletion layer leaves, `1 + γ/(2·√φ)`, and its slopes to γ and φ.
    pub fn least_slope(&self) -> (f64, f64, f64) {
        let root = self.phi_v.sqrt();
        let extra = self.body_sqrt_v / (2.0 * root);
        (1.0 + extra, 0.5 / root, -0.5 * extra / self.phi_v)
    }
}

impl Row {
    /// The range in words.
    pub(super) fn wanted(&self) -> String {
        let unit = if self.unit.is_empty() { String::new() } else { format!(" {}", self.unit) };
        format!("want {:?} to {:?}{unit}", self.low, self.high)
    }
}

/// The numbers of a card as numbers of any kind, such as with derivatives to some of them.
#[derive(Debug, Clone)]
pub struct Values<P> {
    /// Channel type.
    pub polarity: Polarity,
    /// Whether the GIDL field follows the band gap.
    pub gidl_follows_gap: bool,
    /// Temperature the numbers hold at, K.
    pub nominal_k: f64,
    numbers: [Option<P>; COUNT],
}

impl<P: Real> Values<P> {
    /// Those of a card; `of` makes each number.
    pub fn new(card: &CompactCard, of: impl Fn(Param, f64) -> P) -> Self {
        let mut numbers = [None; COUNT];
        for &p in Param::ALL {
            numbers[p as usize] = card.get(p).map(|v| of(p, v));
        }
        Self {
            polarity: card.polarity,
            gidl_follows_gap: card.gidl_follows_gap,
            nominal_k: card.nominal_k(),
            numbers,
        }
    }

    /// A number; zero when it was left out.
    pub fn get(&self, p: Param) -> P {
        self.given(p).unwrap_or_else(|| P::of(0.0))
    }

    /// A number, if it was given.
    pub fn given(&self, p: Param) -> Option<P> {
        self.numbers[p as usize]
    }
}
