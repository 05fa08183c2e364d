//! How the currents of a device answer to its own making: exact derivatives to threshold, length, width, temperature and
//! oxide thickness, from the same equations with dual numbers in the parameters.

use serde::{Deserialize, Serialize};

use super::bsim4::table::Id;
use super::bsim4::values::Values;
use super::dual::{Dual, Real};
use super::process::{CardOf, Process, Request};
use super::spec::DeviceModel;
use super::{Bias, Geometry, bsim4, compact};
use crate::physics::Kelvin;
use crate::read::deck::Note;
use crate::read::source::ReadError;

/// What is varied.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Knob {
    /// Magnitude of the threshold, V.
    Threshold,
    /// Drawn length, m.
    Length,
    /// Drawn width, m.
    Width,
    /// Temperature, K.
    Temperature,
    /// Electrical and physical oxide thickness together, m.
    Oxide,
}

impl Knob {
    /// All, in the order of every array of derivatives.
    pub const ALL: [Self; KNOBS] =
        [Self::Threshold, Self::Length, Self::Width, Self::Temperature, Self::Oxide];
    /// Lower-case name with its unit.
    pub fn name(self) -> &'static str {
        match self {
            Self::Threshold => "threshold_v",
            Self::Length => "length_m",
            Self::Width => "width_m",
            Self::Temperature => "temperature_k",
            Self::Oxide => "oxide_m",
        }
    }
}

/// Number of knobs.
pub const KNOBS: usize = 5;

/// The constants of either model.
#[derive(Debug, Clone)]
enum Prepared {
    Bsim4(Box<bsim4::prepare::Prepared<Dual<KNOBS>>>),
    Compact(Box<compact::prepare::Prepared<Dual<KNOBS>>>),
}

/// A device whose parameters carry derivatives to the knobs.
#[derive(Debug, Clone)]
pub struct Varied {
    prepared: Prepared,
    /// Devices in parallel.
    pub count: f64,
}

fn knob(k: Knob, v: f64) -> Dual<KNOBS> {
    Dual::variable(v, k as usize)
}

fn varied_geometry(g: &Geometry, sign: f64) -> Geometry<Dual<KNOBS>> {
    let mut dual: Geometry<Dual<KNOBS>> = g.lift();
    dual.length_m = knob(Knob::Length, g.length_m);
    dual.width_m = knob(Knob::Width, g.width_m);
    dual.delvto_v = knob(Knob::Threshold, 0.0) * sign + g.delvto_v;
    dual
}

impl Process {
    /// Makes a transistor whose currents know their derivatives to the [`Knob`]s.
    ///
    /// # Errors
    /// As for [`Process::transistor`].
    pub fn varied(
        &self,
        request: &Request,
        temp: Kelvin,
        notes: &mut Vec<Note>,
    ) -> Result<Varied, ReadError> {
        if let Some(model) = self.own_model(request) {
            let made = self.transistor(request, temp, notes)?;
            let DeviceModel::Compact(card) = model else {
                return Err(ReadError::Syntax {
                    at: request.at.clone(),
                    found: format!("`{}` is a table of points", request.model),
                    wanted: "want a card or a compact device: points do not know what made them".into(),
                });
            };
            return Ok(Varied::compact(card, &made.geometry, temp, made.count));
        }
        let CardOf { card, geometry, count, diffusions } = self.card(request, temp.celsius(), notes)?;
        let mut dual = varied_geometry(&geometry, card.polarity.sign());
        let values = Values::at(&card, &dual, |id, v| {
            if matches!(id, Id::Toxe | Id::Toxp) { knob(Knob::Oxide, v) } else { Dual::of(v) }
        })
        .map_err(|(what, size)| ReadError::Range {
            at: request.at.clone(),
            name: format!("{what} of model `{}`", request.model),
            value: format!("{size:.3e} m"),
            wanted: "want a drawn size well above the offsets of the card".into(),
        })?;
        // diffusions that the card draws get wider with the device
        diffusions.fill(&card, &mut dual, values.size.weffcj);
        let prepared =
            bsim4::prepare::Prepared::new(&card, &values, &dual, knob(Knob::Temperature, temp.get()));
        Ok(Varied { prepared: Prepared::Bsim4(Box::new(prepared)), count })
    }
}

impl Varied {
    /// A compact transistor.
    pub fn compact(card: &compact::CompactCard, g: &Geometry, temp: Kelvin, count: f64) -> Self {
        let dual = varied_geometry(g, card.polarity.sign());
        let oxide = knob(Knob::Oxide, card.oxide_m);
        let values = compact::params::Values::new(card, |p, v| match p {
            compact::Param::Oxide => oxide,
            // thicker or thinner along with the electrical thickness
            compact::Param::TunnelOxide => oxide * (v / card.oxide_m),
            _ => Dual::of(v),
        });
        let temp_k = knob(Knob::Temperature, temp.get());
        let prepared = compact::prepare::Prepared::new(&values, &dual, temp_k);
        Self { prepared: Prepared::Compact(Box::new(prepared)), count }
    }

    /// Currents into drain, gate, source and body with derivatives to the knobs, A and A per unit; the bias is kept.
    pub fn terminals(&self, bias: Bias<f64>) -> [Dual<KNOBS>; 4] {
        let lift = |x: f64| Dual::<KNOBS>::of(x);
        let b = Bias { vgs: lift(bias.vgs), vds: lift(bias.vds), vbs: lift(bias.vbs) };
        let branches = match &self.prepared {
            Prepared::Bsim4(p) => bsim4::branches(p, b),
            Prepared::Compact(p) => compact::branches(p, b),
        };
        branches.terminals().map(|t| t * self.count)
    }

    /// d ln|Id| / d knob at a bias; `None` where no current flows.
    pub fn log_slopes(&self, bias: Bias<f64>) -> Option<[f64; KNOBS]> {
        let id = self.terminals(bias)[0];
        (id.v != 0.0).then(|| id.d.map(|d| d / id.v))
    }
}
