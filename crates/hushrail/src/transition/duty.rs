//! From how long a domain sleeps and works to its average current and the life of a battery.

use serde::{Deserialize, Serialize};

use super::error::{TransitionError, not_negative, positive};
use super::round_trip::{CycleCosts, fixed_costs};
use super::sleep::Fall;
use crate::read::deck::Note;

/// One kind of idle time.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Idle {
    /// Its length, s.
    pub duration_s: f64,
    /// How often it comes, against the others.
    pub weight: f64,
}

/// When an idle time is slept through.
#[derive(Debug, Clone, Copy, PartialEq, Default, Serialize, Deserialize)]
#[serde(rename_all = "snake_case", deny_unknown_fields)]
pub enum Policy {
    /// Always, from its start.
    #[default]
    Always,
    /// Never.
    Never,
    /// From its start, when it will be longer than this, s: for one who knows.
    IfLongerThanS(f64),
    /// From this time on, s: for one who waits and sees.
    AfterS(f64),
}

/// What a domain does over time.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct DutyProfile {
    /// Histogram of idle times; one entry for a steady rhythm.
    pub idle: Vec<Idle>,
    /// Mean time of work between two idle times, s.
    pub busy_s: f64,
    /// Power at work, W, leakage included.
    pub busy_power_w: f64,
    /// When it sleeps.
    #[serde(default)]
    pub policy: Policy,
}

/// A battery.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Battery {
    /// Capacity, ampere-hours.
    pub capacity_ah: f64,
    /// Share lost in a year by itself.
    #[serde(default)]
    pub self_discharge_per_year: f64,
    /// Its voltage, V, with `efficiency`; without, the supply's current is taken from it as it is (a linear regulator).
    #[serde(default)]
    pub voltage_v: Option<f64>,
    /// Efficiency of the converter.
    #[serde(default)]
    pub efficiency: Option<f64>,
}

/// What a profile comes to.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Duty {
    /// Average current of the supply, A.
    pub current_a: f64,
    /// Average power, W.
    pub power_w: f64,
    /// Average power if it never slept, W.
    pub never_asleep_w: f64,
    /// Share of the time asleep.
    pub share_asleep: f64,
    /// Sleeps in a second.
    pub sleeps_per_s: f64,
    /// Life of the battery, s.
    pub battery_life_s: Option<f64>,
    /// Remarks.
    pub notes: Vec<Note>,
}

/// A year of 365.25 days, s.
const YEAR_S: f64 = 365.25 * 86400.0;

/// Averages a profile.
///
/// # Errors
/// A histogram that cannot be normalised, or numbers that cannot be.
pub fn duty(
    fall: &Fall<'_>,
    costs: &CycleCosts,
    profile: &DutyProfile,
    battery: Option<&Battery>,
) -> Result<Duty, TransitionError> {
    let g = fall.gated;
    not_negative("busy time (s)", profile.busy_s)?;
    not_negative("power at work (W)", profile.busy_power_w)?;
    match profile.policy {
        Policy::IfLongerThanS(t) | Policy::AfterS(t) => not_negative("threshold of the policy (s)", t)?,
        Policy::Always | Policy::Never => {}
    }
    let fixed = fixed_costs(g, costs)?;
    let awake_w = fall.ungated_power_w;
    let (mut weight, mut time, mut asleep, mut energy, mut awake_j, mut sleeps) =
        (0.0, 0.0, 0.0, 0.0, 0.0, 0.0);
    for (k, i) in profile.idle.iter().enumerate() {
        if !(i.duration_s >= 0.0 && i.duration_s.is_finite() && i.weight >= 0.0 && i.weight.is_finite()) {
            return Err(TransitionError::Histogram(format!(
                "entry {} is {} s with weight {}; want both zero or more",
                k + 1,
                i.duration_s,
                i.weight
            )));
        }
        let slept = match profile.policy {
            Policy::Always => Some(i.duration_s),
            Policy::Never => None,
            Policy::IfLongerThanS(t) => (i.duration_s > t).then_some(i.duration_s),
            Policy::AfterS(t) => (i.duration_s > t).then_some(i.duration_s - t),
        }
        .filter(|t| *t > 0.0);
        let idle_j = awake_w * i.duration_s - slept.map_or(0.0, |t| fall.saved_j(t) - fixed.fixed_j);
        let busy_j = profile.busy_s * profile.busy_power_w;
        weight += i.weight;
        time += i.weight * (i.duration_s + profile.busy_s);
        asleep += i.weight * slept.unwrap_or(0.0);
        energy += i.weight * (idle_j + busy_j);
        awake_j += i.weight * (awake_w * i.duration_s + busy_j);
        sleeps += i.weight * f64::from(u8::from(slept.is_some()));
    }
    if !(weight > 0.0) {
        return Err(TransitionError::Histogram("all weights are zero: it cannot be normalised".into()));
    }
    if !(time > 0.0) {
        return Err(TransitionError::Histogram(
            "it lasts no time: all idle times and the busy time are zero".into(),
        ));
    }
    let power_w = energy / time;
    let current_a = power_w / g.vdd_v;
    let battery_life_s = battery.map(|b| life(b, power_w, current_a)).transpose()?;
    Ok(Duty {
        current_a,
        power_w,
        never_asleep_w: awake_j / time,
        share_asleep: asleep / time,
        sleeps_per_s: sleeps / time,
        battery_life_s,
        notes: fixed.notes,
    })
}

/// Time until the charge is gone: `dQ/dt = −I − s·Q` gives `t = ln(1 + s·Q/I)/s`, and `Q/I` without self-discharge (derived).
fn life(b: &Battery, power_w: f64, current_a: f64) -> Result<f64, TransitionError> {
    positive("battery capacity (Ah)", b.capacity_ah)?;
    if !(b.self_discharge_per_year >= 0.0 && b.self_discharge_per_year < 1.0) {
        return Err(TransitionError::Range {
            what: "self-discharge (share in a year)".into(),
            value: b.self_discharge_per_year,
            wanted: "want zero or more and less than one".into(),
        });
    }
    let current = match (b.voltage_v, b.efficiency) {
        (None, None) => current_a,
        (Some(v), Some(e)) => {
            positive("battery voltage (V)", v)?;
            if !(e > 0.0 && e <= 1.0) {
                return Err(TransitionError::Range {
                    what: "efficiency of the converter".into(),
                    value: e,
                    wanted: "want more than zero and not above one".into(),
                });
            }
            power_w / (v * e)
        }
        (v, _) => {
            return Err(TransitionError::Missing {
                what: if v.is_some() { "efficiency of the battery's converter" } else { "battery voltage" },
                wanted: "want both `voltage_v` and `efficiency`, or neither",
            });
        }
    };
    positive("average current (A)", current)?;
    let charge = b.capacity_ah * 3600.0;
    let rate = -(-b.self_discharge_per_year).ln_1p() / YEAR_S;
    Ok(if rate > 0.0 { (rate * charge / current).ln_1p() / rate } else { charge / current })
}
