//! The smallest switch, or pair of switches, for a droop budget at the worst of many corners, and the area it takes.

use std::sync::Arc;

use rayon::prelude::*;
use serde::{Deserialize, Serialize};

use super::droop::{Load, settle_droop, settle_switches};
use super::error::{AwakeError, positive, range};
use super::resistance::inside;
use crate::cell::DeviceShelf;
use crate::device::process::Process;
use crate::device::root::summit;
use crate::physics::Kelvin;
use crate::standby::SwitchSpec;
use crate::standby::switch::{Side, Switch};

/// A corner to size at.
#[derive(Debug, Clone)]
pub struct SizeCorner<'a> {
    /// Its name.
    pub name: &'a str,
    /// Its cards.
    pub process: &'a Process,
    /// Its temperature.
    pub temp: Kelvin,
    /// Its supply, V.
    pub vdd_v: f64,
}

/// Layout density of switch cells; every number is the user's.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct LayoutDensity {
    /// Area of each metre of width, m².
    pub m2_per_m: f64,
    /// Fixed area of each cell row that holds switches, m².
    pub row_overhead_m2: f64,
    /// Width that fits into one row, m.
    pub width_per_row_m: f64,
}

impl LayoutDensity {
    /// Area of a switch, m², and the rows it takes.
    ///
    /// # Errors
    /// Numbers that are not above zero (the overhead may be zero).
    pub fn area_m2(&self, width_m: f64) -> Result<(f64, f64), AwakeError> {
        positive("area of a metre of width", self.m2_per_m, "m²")?;
        positive("width of a row", self.width_per_row_m, "m")?;
        positive("switch width", width_m, "m")?;
        if !(self.row_overhead_m2 >= 0.0 && self.row_overhead_m2.is_finite()) {
            return range("overhead of a row", format!("{} m²", self.row_overhead_m2), "want zero or more");
        }
        // a row that is full to the last digit is one row
        let rows = (width_m / self.width_per_row_m * (1.0 - 1e-12)).ceil().max(1.0);
        Ok((width_m * self.m2_per_m + rows * self.row_overhead_m2, rows))
    }
}

/// What one corner asks for.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct CornerNeed {
    /// The corner.
    pub corner: String,
    /// Fingers it needs.
    pub fingers: f64,
    /// Droop there with the width that was chosen, V.
    pub droop_v: f64,
}

/// The answer.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Sized {
    /// Width, a whole number of fingers, m.
    pub width_m: f64,
    /// Fingers.
    pub fingers: f64,
    /// The corner that decides.
    pub corner: String,
    /// Every corner.
    pub corners: Vec<CornerNeed>,
    /// Area, m², where a density was given.
    pub area_m2: Option<f64>,
    /// Rows of switch cells, where a density was given.
    pub rows: Option<f64>,
}

/// Smallest number of fingers of `spec` (whose `finger_width_m` is one finger; `width_m` is the largest width allowed) that
/// keeps the droop of `load` within `budget_v` at every corner.
///
/// Fingers are equal, so that `n` of them carry `n` times the current of one at the same droop: the need of a corner is the
/// load at the budget over the current of one finger there, rounded up.
///
/// # Errors
/// A budget that is none, a load or switch that cannot be, or [`AwakeError::NoWidth`] with the corner that decides.
pub fn smallest_switch(
    spec: &SwitchSpec,
    side: Side,
    load: &Load,
    budget_v: f64,
    corners: &[SizeCorner<'_>],
    density: Option<&LayoutDensity>,
    origin: &Arc<str>,
) -> Result<Sized, AwakeError> {
    spec.check("switch").map_err(|(what, value, wanted)| AwakeError::Range { what, value, wanted })?;
    if corners.is_empty() {
        return range("the list of corners", "empty".into(), "want at least one");
    }
    let finger = spec.finger_width_m.unwrap_or(spec.width_m);
    // the largest whole number of fingers, full to the last digit included
    let most = (spec.width_m / finger * (1.0 + 1e-12)).floor();
    let one = SwitchSpec { width_m: finger, finger_width_m: None, ..spec.clone() };
    let made: Vec<(Switch, f64)> = corners
        .par_iter()
        .map(|c| {
            if !(budget_v > 0.0 && budget_v < c.vdd_v) {
                let wanted = format!("want above 0 V and below the supply, {} V", c.vdd_v);
                return range("droop budget", format!("{budget_v} V"), &wanted);
            }
            load.check(c.vdd_v)?;
            let s = Switch::new(&one, side, c.process, c.temp, c.vdd_v, &mut DeviceShelf::default(), origin)?;
            inside(s.device.outside(s.awake_bias(budget_v)), "awake")?;
            let (given, drawn) = (s.awake_current(budget_v).0, load.at(c.vdd_v - budget_v, c.vdd_v));
            let need = if given > 0.0 { (drawn / given).ceil().max(1.0) } else { f64::INFINITY };
            Ok((s, need))
        })
        .collect::<Result<_, AwakeError>>()?;
    let (k, fingers) =
        made.iter().enumerate().fold((0, 0.0), |m, (k, x)| if x.1 > m.1 { (k, x.1) } else { m });
    let at = |s: &Switch, n: f64, vdd: f64| settle_droop(load, vdd, &|d| n * s.awake_current(d).0);
    if fingers > most {
        let c = &corners[k];
        let why = match at(&made[k].0, most, c.vdd_v) {
            Ok(d) => format!(
                "{most} fingers droop {:.4} V, {:.4} V too much; {}",
                d.droop_v,
                d.droop_v - budget_v,
                if fingers.is_finite() {
                    format!("{fingers} fingers ({:.3e} m) are needed", fingers * finger)
                } else {
                    "the switch is not on at the budget".into()
                }
            ),
            Err(e) => e.to_string(),
        };
        return Err(AwakeError::NoWidth {
            corner: c.name.to_owned(),
            budget_v,
            max_width_m: spec.width_m,
            why,
        });
    }
    let needs = corners
        .iter()
        .zip(&made)
        .map(|(c, (s, need))| {
            let droop_v = at(s, fingers, c.vdd_v)?.droop_v;
            Ok(CornerNeed { corner: c.name.to_owned(), fingers: *need, droop_v })
        })
        .collect::<Result<_, AwakeError>>()?;
    let width_m = fingers * finger;
    let area = density.map(|d| d.area_m2(width_m)).transpose()?;
    Ok(Sized {
        width_m,
        fingers,
        corner: corners[k].name.to_owned(),
        corners: needs,
        area_m2: area.map(|a| a.0),
        rows: area.map(|a| a.1),
    })
}

/// Smallest header and footer in series that keep the droop over both within `budget_v` at every corner.
///
/// The budget is shared between them, the same share at every corner, so that the widths (areas, where a density is given)
/// add up to least: for two resistors that is each width as the root of its resistance for a metre (derived). Given a share,
/// each is sized as [`smallest_switch`] does, for the load at the full budget.
///
/// # Errors
/// As [`smallest_switch`].
pub fn smallest_pair(
    header: &SwitchSpec,
    footer: &SwitchSpec,
    load: &Load,
    budget_v: f64,
    corners: &[SizeCorner<'_>],
    density: Option<&LayoutDensity>,
    origin: &Arc<str>,
) -> Result<[Sized; 2], AwakeError> {
    if corners.is_empty() {
        return range("the list of corners", "empty".into(), "want at least one");
    }
    let finger = |s: &SwitchSpec| s.finger_width_m.unwrap_or(s.width_m);
    let mut made = Vec::with_capacity(corners.len());
    for c in corners {
        if !(budget_v > 0.0 && budget_v < c.vdd_v) {
            let wanted = format!("want above 0 V and below the supply, {} V", c.vdd_v);
            return range("droop budget", format!("{budget_v} V"), &wanted);
        }
        load.check(c.vdd_v)?;
        let one = |spec: &SwitchSpec, side| -> Result<Switch, AwakeError> {
            spec.check("switch").map_err(|(what, value, wanted)| AwakeError::Range {
                what,
                value,
                wanted,
            })?;
            let one = SwitchSpec { width_m: finger(spec), finger_width_m: None, ..spec.clone() };
            let s = Switch::new(&one, side, c.process, c.temp, c.vdd_v, &mut DeviceShelf::default(), origin)?;
            inside(s.device.outside(s.awake_bias(budget_v)), "awake")?;
            Ok(s)
        };
        let drawn = load.at(c.vdd_v - budget_v, c.vdd_v);
        made.push((one(header, Side::Header)?, one(footer, Side::Footer)?, drawn));
    }
    // fingers that each corner needs of one switch at a droop, and the most of them
    let needs = |which: usize, droop_v: f64| -> Vec<f64> {
        let need = |(h, f, drawn): &(Switch, Switch, f64)| {
            let given = [h, f][which].awake_current(droop_v).0;
            if given > 0.0 { drawn / given } else { f64::INFINITY }
        };
        made.iter().map(need).collect()
    };
    let most = |all: &[f64]| all.iter().fold(0.0f64, |m, n| m.max(*n));
    let total = |share: f64| {
        let h = most(&needs(0, share * budget_v)) * finger(header);
        h + most(&needs(1, (1.0 - share) * budget_v)) * finger(footer)
    };
    // one valley: each need falls with its droop, faster the smaller the droop
    let (share, _) = summit(1e-3, 1.0 - 1e-3, |share| -total(share));
    let mut out = Vec::with_capacity(2);
    for (which, (spec, droop_v)) in
        [(header, share * budget_v), (footer, (1.0 - share) * budget_v)].into_iter().enumerate()
    {
        let needed = needs(which, droop_v);
        let fingers = most(&needed).ceil().max(1.0);
        let worst = needed.iter().position(|n| *n == most(&needed)).unwrap_or(0);
        let width_m = fingers * finger(spec);
        if width_m > spec.width_m * (1.0 + 1e-12) {
            return Err(AwakeError::NoWidth {
                corner: corners[worst].name.to_owned(),
                budget_v,
                max_width_m: spec.width_m,
                why: format!(
                    "of header and footer the {} needs {fingers} fingers ({width_m:.3e} m)",
                    ["header", "footer"][which]
                ),
            });
        }
        let area = density.map(|d| d.area_m2(width_m)).transpose()?;
        out.push(Sized {
            width_m,
            fingers,
            corner: corners[worst].name.to_owned(),
            corners: corners
                .iter()
                .zip(&needed)
                .map(|(c, n)| CornerNeed { corner: c.name.to_owned(), fingers: n.ceil().max(1.0), droop_v })
                .collect(),
            area_m2: area.map(|a| a.0),
            rows: area.map(|a| a.1),
        });
    }
    // what the pair loses at each corner with the widths found
    let fingers = [out[0].fingers, out[1].fingers];
    for (k, (h, f, _)) in made.iter().enumerate() {
        let own = [h, f].map(Clone::clone);
        let [mut h, mut f] = own;
        (h.fingers, f.fingers) = (h.fingers * fingers[0], f.fingers * fingers[1]);
        let (_, over_h, over_f) = settle_switches(load, Some(&h), Some(&f))?;
        (out[0].corners[k].droop_v, out[1].corners[k].droop_v) = (over_h, over_f);
    }
    match <[Sized; 2]>::try_from(out) {
        Ok(pair) => Ok(pair),
        Err(_) => range("number of switches", "not two".into(), "want header and footer"),
    }
}
