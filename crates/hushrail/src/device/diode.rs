//! Junction diodes given as elements of a netlist (wells, antenna diodes).

use super::dual::{Number, Real};
use crate::physics::{CELSIUS_ZERO_K, KB_OVER_Q};
use crate::read::deck::{Deck, DeckScope, ModelText, Note};
use crate::read::source::{ReadError, nearest};

/// A diode at one temperature.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Diode {
    /// Saturation current, A.
    pub isat_a: f64,
    /// n·kT/q, V.
    pub nvt_v: f64,
    /// d ln Is / dT, 1/K.
    pub d_ln_isat_k: f64,
}

/// Parameters of a diode model that do not bear on its reverse and small forward current.
const NO_STATIC_EFFECT: &[&str] = &[
    "area", "bv", "cj", "cjo", "cj0", "cjp", "cjsw", "cta", "ctp", "fc", "fcs", "gap1", "gap2", "ibv", "ik",
    "ikf", "ikr", "kf", "af", "lm", "lp", "m", "mj", "mjsw", "pb", "php", "pj", "rs", "tcv", "tlev", "tlevc",
    "tm1", "tm2", "tpb", "tphp", "trs", "tt", "ttt1", "ttt2", "vb", "vj", "wm", "wp", "xm", "xoi", "xom",
    "xp", "xw",
];
const STATIC: &[&str] = &["level", "is", "js", "jsw", "n", "eg", "xti", "tref", "tnom"];

impl Diode {
    /// A diode from its model, area and perimeter in the deck's own units of length.
    ///
    /// ```text
    /// Is(T) = (JS·area + JSW·perimeter)·exp((EG/V0 − EG/V + XTI·ln(T/T0))/N),   V = kT/q
    /// ```
    ///
    /// Source: the usual junction law (Massobrio and Antognetti, *Semiconductor Device Modeling with SPICE*, ch. 1, from
    /// memory). Breakdown, series resistance and high injection are not computed; a note says so.
    pub fn evaluate(
        model: &ModelText,
        deck: &Deck,
        scope: &DeckScope<'_>,
        area: f64,
        perimeter: f64,
        temp_k: f64,
        notes: &mut Vec<Note>,
    ) -> Result<Self, ReadError> {
        let (mut is, mut js, mut jsw, mut n, mut eg, mut xti, mut tref) =
            (None, None, 0.0, 1.0, 1.11, 3.0, 27.0);
        for (name, def) in &model.values {
            let v = deck.eval(def, scope);
            match &**name {
                "is" => is = Some(v?),
                "js" => js = Some(v?),
                "jsw" => jsw = v?,
                "n" => n = v?,
                "eg" => eg = v?,
                "xti" => xti = v?,
                "tref" | "tnom" => tref = v?,
                "level" => {
                    let level = v?;
                    if level != 1.0 && level != 3.0 {
                        return Err(ReadError::Range {
                            at: def.loc.place(&deck.files),
                            name: "level".into(),
                            value: level.to_string(),
                            wanted: "diode levels 1 and 3 are supported".into(),
                        });
                    }
                }
                other if NO_STATIC_EFFECT.contains(&other) => {}
                other => {
                    return Err(ReadError::Unknown {
                        at: def.loc.place(&deck.files),
                        kind: "diode parameter",
                        name: other.to_owned(),
                        nearest: nearest(other, STATIC.iter().chain(NO_STATIC_EFFECT).copied()),
                    });
                }
            }
        }
        let note = Note::new(
            "diode-reverse-only",
            format!(
                "diode model `{}`: breakdown, series resistance and high injection are not computed",
                model.name
            ),
        );
        note.add_once(notes);
        let (t0, t) = (tref + CELSIUS_ZERO_K, temp_k);
        let (v0, v) = (KB_OVER_Q * t0, KB_OVER_Q * t);
        let grow = ((eg / v0 - eg / v + xti * (t / t0).ln()) / n).exp();
        let isat = match (js, is) {
            (Some(js), _) => js * area + jsw * perimeter,
            (None, Some(is)) => is * if area > 0.0 { area } else { 1.0 },
            (None, None) => 1e-14 * if area > 0.0 { area } else { 1.0 },
        };
        Ok(Self { isat_a: isat * grow, nvt_v: n * v, d_ln_isat_k: (eg / (v * t) + xti / t) / n })
    }

    /// Derivative of the current to temperature at a voltage, A/K.
    pub fn temperature_slope(&self, v: f64, temp_k: f64) -> f64 {
        let x = v / self.nvt_v;
        self.current(v) * self.d_ln_isat_k - self.isat_a * Number::exp(x) * x / temp_k
    }

    /// Current from anode to cathode, A.
    pub fn current<R: Real>(&self, v: R) -> R {
        (v / self.nvt_v).exp_m1() * self.isat_a
    }
}
