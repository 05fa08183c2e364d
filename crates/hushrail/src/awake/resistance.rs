//! On-resistance of a switch from its device model, and what it costs asleep.
//!
//! The chord `R = V/I` is what droops; the slope `dV/dI` is what couples a change. The series resistance of the diffusions
//! comes with the device. In the limit of small droop both are `1/(µ·Cox·W/L·(Vgs − Vth))` of a long channel.

use std::sync::Arc;

use rayon::prelude::*;
use serde::{Deserialize, Serialize};

use super::error::{AwakeError, range};
use crate::cell::DeviceShelf;
use crate::device::process::Process;
use crate::device::range::Outside;
use crate::physics::Kelvin;
use crate::standby::SwitchSpec;
use crate::standby::switch::{Side, Switch};

/// A switch awake at one droop.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct OnPoint {
    /// Voltage across the switch, V.
    pub droop_v: f64,
    /// Current through it, A.
    pub current_a: f64,
    /// Chord resistance V/I, ohm.
    pub chord_ohm: f64,
    /// Slope resistance dV/dI, ohm; none where the current no longer rises.
    pub slope_ohm: Option<f64>,
}

/// Refuses a bias outside the points of a table whose user has not asked for guesses.
pub(super) fn inside(outside: Option<Outside>, when: &'static str) -> Result<(), AwakeError> {
    match outside {
        Some(o) if o.refused => Err(AwakeError::Outside { when, reason: o.to_string() }),
        _ => Ok(()),
    }
}

/// Smallest droop at which a chord is formed, V; below it chord and slope are one to twelve digits.
const LEAST_DROOP_V: f64 = 1e-9;

/// On-resistance of a switch at a droop (zero is allowed: chord and slope are equal there).
///
/// # Errors
/// A droop below zero or above the supply, or a switch that is not on at all.
pub fn on_point(switch: &Switch, droop_v: f64) -> Result<OnPoint, AwakeError> {
    if !(0.0..=switch.vdd_v).contains(&droop_v) {
        return range(
            "droop",
            format!("{droop_v} V"),
            &format!("want 0 V to the supply, {} V", switch.vdd_v),
        );
    }
    let at = droop_v.max(LEAST_DROOP_V);
    let (current, slope) = switch.awake_current(at);
    if !(current > 0.0 && slope.is_finite()) {
        return range(
            "current of the switch awake",
            format!("{current:.3e} A at {at} V across it"),
            "want a gate level that turns it on",
        );
    }
    inside(switch.device.outside(switch.awake_bias(at)), "awake")?;
    Ok(OnPoint {
        droop_v,
        current_a: if droop_v > 0.0 { current } else { 0.0 },
        chord_ohm: at / current,
        slope_ohm: (slope > 0.0).then(|| 1.0 / slope),
    })
}

/// One candidate at one overdrive and boost.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct MeritPoint {
    /// Candidate, by its place in the list.
    pub candidate: usize,
    /// Overdrive asleep, V.
    pub overdrive_v: f64,
    /// Boost awake, V.
    pub boost_v: f64,
    /// On-resistance at the droop asked for, ohm.
    pub on_ohm: f64,
    /// Off current with the rail fully collapsed, A.
    pub off_a: f64,
    /// Their product, V: independent of width; lower is better.
    pub merit_v: f64,
    /// Largest oxide voltage, awake or asleep, V.
    pub oxide_v: f64,
}

/// R_on × I_off of each candidate over a grid of overdrives and boosts; candidates, then overdrives, then boosts.
///
/// # Errors
/// A candidate that cannot be made or is not on, empty lists, voltages out of range.
#[expect(clippy::too_many_arguments, reason = "one figure: candidates, grid, corner")]
pub fn merit_figure(
    candidates: &[(SwitchSpec, Side)],
    overdrive_v: &[f64],
    boost_v: &[f64],
    droop_v: f64,
    process: &Process,
    temp: Kelvin,
    vdd_v: f64,
    origin: &Arc<str>,
) -> Result<Vec<MeritPoint>, AwakeError> {
    for (what, list) in
        [("candidates", candidates.len()), ("overdrives", overdrive_v.len()), ("boosts", boost_v.len())]
    {
        if list == 0 {
            return range(&format!("the list of {what}"), "empty".into(), "want at least one");
        }
    }
    let mut grid = Vec::new();
    for k in 0..candidates.len() {
        grid.extend(overdrive_v.iter().flat_map(|&o| boost_v.iter().map(move |&b| (k, o, b))));
    }
    grid.par_iter()
        .map_init(DeviceShelf::default, |shelf, &(k, overdrive_v, boost_v)| {
            let (spec, side) = &candidates[k];
            let spec = SwitchSpec { overdrive_v, boost_v, ..spec.clone() };
            spec.check(&format!("candidate {}", k + 1))
                .map_err(|(what, value, wanted)| AwakeError::Range { what, value, wanted })?;
            let s = Switch::new(&spec, *side, process, temp, vdd_v, shelf, origin)?;
            let on_ohm = on_point(&s, droop_v)?.chord_ohm;
            let off_a = s.off_current_a();
            let collapsed = if *side == Side::Header { 0.0 } else { vdd_v };
            inside(s.outside(collapsed), "asleep")?;
            let awake = (s.awake_gate_v - s.rail_v).abs();
            let oxide_v = s.oxide_v(collapsed).max(awake);
            Ok(MeritPoint {
                candidate: k,
                overdrive_v,
                boost_v,
                on_ohm,
                off_a,
                merit_v: on_ohm * off_a,
                oxide_v,
            })
        })
        .collect()
}
