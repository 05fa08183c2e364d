//! Droop: the voltage lost across an awake switch, where what the switch gives is what the load draws at the rail it is left.

use serde::{Deserialize, Serialize};

use super::error::{AwakeError, positive, range};
use crate::device::root::increasing;
use crate::standby::switch::Switch;

/// How a load answers to its rail; currents are positive.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(tag = "law", rename_all = "snake_case", deny_unknown_fields)]
pub enum Load {
    /// The same current at every rail.
    Constant {
        /// A.
        current_a: f64,
    },
    /// In proportion to the rail: charge per cycle at a fixed frequency, `I = C·V·f`.
    Proportional {
        /// At full rail, A.
        current_a: f64,
    },
    /// `I = I₀·((V − Vt)/(VDD − Vt))^α`: clocked as fast as its gates go. Alpha-power law: Sakurai and Newton, *JSSC* 25(2)
    /// (1990) 584 (from memory).
    AlphaPower {
        /// At full rail, A.
        current_a: f64,
        /// Threshold, V.
        threshold_v: f64,
        /// Exponent.
        alpha: f64,
    },
    /// Points of current against rail voltage, straight lines between them; no current is drawn from outside its ends.
    Table {
        /// Rail voltages, rising, V.
        rail_v: Vec<f64>,
        /// Currents, A.
        current_a: Vec<f64>,
    },
    /// A measured current over time, each sample held until the next; the rail follows at once (no decoupling charge).
    Profile {
        /// Times, rising, s.
        time_s: Vec<f64>,
        /// Currents, A.
        current_a: Vec<f64>,
    },
}

impl Load {
    /// Checks every number.
    ///
    /// # Errors
    /// Negative or non-finite currents, lists that do not match or do not rise, a threshold at or above the supply.
    pub fn check(&self, vdd_v: f64) -> Result<(), AwakeError> {
        let current = |i: f64| {
            if i >= 0.0 && i.is_finite() {
                Ok(())
            } else {
                range("load current", format!("{i} A"), "want zero or a finite current above it")
            }
        };
        let list = |name: &str, x: &[f64], y: &[f64]| {
            if x.len() != y.len() || x.len() < 2 {
                let found = format!("{} of {name} and {} of current", x.len(), y.len());
                return range("the load's list", found, "want two or more points of each, as many of both");
            }
            let rises = |w: &&[f64]| w[1] > w[0] && w[0].is_finite() && w[1].is_finite();
            if let Some([a, b]) = x.windows(2).find(|w| !rises(w)) {
                return range(
                    &format!("{name} of the load"),
                    format!("{b} after {a}"),
                    "want rising numbers",
                );
            }
            y.iter().try_for_each(|&i| current(i))
        };
        match self {
            Self::Constant { current_a } | Self::Proportional { current_a } => current(*current_a),
            Self::AlphaPower { current_a, threshold_v, alpha } => {
                positive("alpha", *alpha, "")?;
                if !(*threshold_v >= 0.0 && *threshold_v < vdd_v) {
                    let wanted = format!("want 0 V to below the supply, {vdd_v} V");
                    return range("threshold of the load", format!("{threshold_v} V"), &wanted);
                }
                current(*current_a)
            }
            Self::Table { rail_v, current_a } => list("rail voltage", rail_v, current_a),
            Self::Profile { time_s, current_a } => list("time", time_s, current_a),
        }
    }

    /// Current at a rail (of what is left between the virtual rails), A; of a profile the largest.
    pub fn at(&self, rail_v: f64, vdd_v: f64) -> f64 {
        match self {
            Self::Constant { current_a } => *current_a,
            Self::Proportional { current_a } => current_a * rail_v / vdd_v,
            Self::AlphaPower { current_a, threshold_v, alpha } => {
                current_a * ((rail_v - threshold_v).max(0.0) / (vdd_v - threshold_v)).powf(*alpha)
            }
            Self::Table { rail_v: x, current_a: y } => {
                let k = x.partition_point(|a| *a <= rail_v);
                match k {
                    0 => y[0],
                    k if k == x.len() => y[k - 1],
                    k => y[k - 1] + (y[k] - y[k - 1]) * (rail_v - x[k - 1]) / (x[k] - x[k - 1]),
                }
            }
            Self::Profile { current_a, .. } => current_a.iter().fold(0.0f64, |m, i| m.max(*i)),
        }
    }

    /// Time average of a profile, samples held until the next; `None` for other laws.
    pub fn average_a(&self) -> Option<f64> {
        let Self::Profile { time_s, current_a } = self else { return None };
        let span = time_s.last()? - time_s.first()?;
        Some(time_s.windows(2).zip(current_a).map(|(t, i)| (t[1] - t[0]) * i).sum::<f64>() / span)
    }
}

/// Where switch and load agree.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Droop {
    /// Voltage lost, V; of a profile at its largest sample.
    pub droop_v: f64,
    /// Current, A.
    pub current_a: f64,
    /// What the droop would be were the load not to answer: its current at full rail through the resistance at that current,
    /// V; `None` where the switch cannot carry it.
    pub unanswered_v: Option<f64>,
    /// Time average of the droop over a profile, V.
    pub average_v: Option<f64>,
}

/// What stands between rail and load: current as a function of the droop across it, A, rising.
pub type Carrier<'a> = dyn Fn(f64) -> f64 + 'a;

/// Steps of the search for the smallest droop.
const SCAN: usize = 256;

/// The smallest droop in `[0, vdd_v]` at which the carrier gives what the load draws.
fn balance(carrier: &Carrier<'_>, vdd_v: f64, draws: &dyn Fn(f64) -> f64) -> Result<f64, AwakeError> {
    if draws(vdd_v) <= 0.0 {
        return Ok(0.0);
    }
    // the first step is fine, so that a stiff switch is bracketed tightly; where it first gives enough is the answer
    let grid = |k: usize| vdd_v * (k as f64 / SCAN as f64).powi(2);
    let (mut nearest, mut best) = ((0.0, 0.0, 0.0), 0.0);
    for k in 1..=SCAN {
        let d = grid(k);
        let (given, drawn) = (carrier(d), draws(vdd_v - d));
        if given >= drawn {
            let scale = drawn.max(f64::MIN_POSITIVE);
            return increasing(grid(k - 1), d, 1e-16, 1e-15, 200, |d| {
                Ok::<f64, AwakeError>((carrier(d) - draws(vdd_v - d)) / scale)
            });
        }
        if given / drawn > best {
            (nearest, best) = ((drawn, given, d), given / drawn);
        }
    }
    let (load_a, given_a, droop_v) = nearest;
    Err(AwakeError::Overloaded {
        at: String::new(),
        load_a,
        given_a,
        droop_v,
        short_a: load_a - given_a,
        factor: if best > 0.0 { 1.0 / best } else { f64::MAX },
    })
}

/// Droop of a load behind a carrier.
///
/// # Errors
/// Numbers that cannot be, or [`AwakeError::Overloaded`] with what is missing.
pub fn settle_droop(load: &Load, vdd_v: f64, carrier: &Carrier<'_>) -> Result<Droop, AwakeError> {
    positive("supply", vdd_v, "V")?;
    load.check(vdd_v)?;
    let droop_v = balance(carrier, vdd_v, &|v| load.at(v, vdd_v))?;
    let full = load.at(vdd_v, vdd_v);
    let average_v = match load {
        Load::Profile { time_s, current_a } => {
            let span = time_s[time_s.len() - 1] - time_s[0];
            let mut sum = 0.0;
            for (t, &i) in time_s.windows(2).zip(current_a) {
                sum += (t[1] - t[0]) * balance(carrier, vdd_v, &|_| i)?;
            }
            Some(sum / span)
        }
        _ => None,
    };
    Ok(Droop {
        droop_v,
        current_a: load.at(vdd_v - droop_v, vdd_v),
        unanswered_v: balance(carrier, vdd_v, &|_| full).ok(),
        average_v,
    })
}

/// A resistance as a carrier, A.
pub fn resistor(ohm: f64) -> impl Fn(f64) -> f64 {
    move |d| d / ohm
}

/// Part of a droop that stands across the header of a header and footer in series, V: both carry the same current.
fn header_share(h: &Switch, f: &Switch, d: f64) -> f64 {
    let top = (h.awake_current(d).0 + f.awake_current(d).0).max(f64::MIN_POSITIVE);
    increasing(0.0, d, 1e-17, 1e-14, 200, |x| {
        Ok::<f64, std::convert::Infallible>((h.awake_current(x).0 - f.awake_current(d - x).0) / top)
    })
    .unwrap_or_else(|e| match e {})
}

/// What header and footer in series carry at a droop over both, A.
pub fn in_series(h: &Switch, f: &Switch, droop_v: f64) -> f64 {
    h.awake_current(header_share(h, f, droop_v)).0
}

/// A domain behind its switch, or behind header and footer in series: droop over both, and over each.
///
/// # Errors
/// See [`settle_droop`].
pub fn settle_switches(
    load: &Load,
    header: Option<&Switch>,
    footer: Option<&Switch>,
) -> Result<(Droop, f64, f64), AwakeError> {
    match (header, footer) {
        (Some(s), None) => {
            let d = settle_droop(load, s.vdd_v, &|d| s.awake_current(d).0)?;
            let v = d.droop_v;
            Ok((d, v, 0.0))
        }
        (None, Some(s)) => {
            let d = settle_droop(load, s.vdd_v, &|d| s.awake_current(d).0)?;
            let v = d.droop_v;
            Ok((d, 0.0, v))
        }
        (Some(h), Some(f)) => {
            let share = |d: f64| header_share(h, f, d);
            let d = settle_droop(load, h.vdd_v, &|d| h.awake_current(share(d)).0)?;
            let x = share(d.droop_v);
            let rest = d.droop_v - x;
            Ok((d, x, rest))
        }
        (None, None) => {
            range("the scheme", "one without a switch".into(), "want a header or a footer to droop across")
        }
    }
}

/// What a neighbour's step couples into a domain on the same virtual rail.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct CoupledNoise {
    /// Droop before the step, V.
    pub before_v: f64,
    /// Droop after it, at once (no decoupling charge), V.
    pub after_v: f64,
    /// The difference, V.
    pub noise_v: f64,
}

/// Noise that a current step of a neighbour makes on a shared switch.
///
/// # Errors
/// See [`settle_droop`].
pub fn neighbour_step(
    victim: &Load,
    step_a: f64,
    vdd_v: f64,
    carrier: &Carrier<'_>,
) -> Result<CoupledNoise, AwakeError> {
    victim.check(vdd_v)?;
    if !(step_a >= 0.0 && step_a.is_finite()) {
        return range(
            "the neighbour's step",
            format!("{step_a} A"),
            "want zero or a finite current above it",
        );
    }
    let before_v = balance(carrier, vdd_v, &|v| victim.at(v, vdd_v))?;
    let after_v = balance(carrier, vdd_v, &|v| victim.at(v, vdd_v) + step_a)?;
    Ok(CoupledNoise { before_v, after_v, noise_v: after_v - before_v })
}
