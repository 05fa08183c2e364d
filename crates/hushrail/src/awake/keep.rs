//! Keeping state: the hold margin of a cell from the butterfly of its own netlist, the voltage at which it is lost, and what
//! local mismatch does to both.
//!
//! A loop is found by asking the cell: every net that closes one (the switch picture lists them) is cut at its gates, driven to
//! either rail, and the other nets show whether they follow. Two nets that each make the other fall are the ends of a loop; the
//! curves between them are the butterfly.

use rayon::prelude::*;
use serde::{Deserialize, Serialize};

use super::error::{AwakeError, positive, range};
use super::margin::Tracer;
use super::normal::upper_tail;
use super::square::{Butterfly, refine};
use crate::cell::logic::Switches;
use crate::cell::posed::Posed;
use crate::cell::{BoundCell, Levels, Role, State};
use crate::circuit::network::{Element, Node};
use crate::circuit::newton::SolveOptions;
use crate::device::Polarity;
use crate::standby::WellTie;
use crate::standby::switch::Side;

/// A loop that stores, under given inputs.
#[derive(Debug, Clone)]
pub struct Loop {
    /// One of the states it may be in.
    pub state: State,
    /// Its inputs, such as `D=0 G=0`.
    pub inputs: String,
    /// Its two nets.
    pub nets: (Node, Node),
}

/// Loops of a cell that store at `levels` (its full supply), for every input vector, or for the vectors that agree with
/// `given` (input name, value).
///
/// # Errors
/// An input that does not exist, too many to list, no operating point, or [`AwakeError::StoresNothing`].
pub fn loops(
    cell: &BoundCell,
    levels: &Levels,
    given: &[(String, bool)],
    options: &SolveOptions,
) -> Result<Vec<Loop>, AwakeError> {
    let names: Vec<&str> = cell.cell.ports_of(Role::Input).map(|i| &*cell.cell.ports[i]).collect();
    let mut wanted = vec![None; names.len()];
    for (n, b) in given {
        let Some(i) = names.iter().position(|m| m.eq_ignore_ascii_case(n)) else {
            let found = format!("`{n}` of cell `{}`", cell.cell.name);
            return range("an input", found, &format!("want one of {}", names.join(", ")));
        };
        wanted[i] = Some(*b);
    }
    let nets = Switches::new(&cell.net, &cell.plan).loop_nets();
    let states = cell.states()?;
    let half = 0.5 * (levels.supply_v - levels.ground_v);
    let mut out = Vec::new();
    let mut seen: Option<&[bool]> = None;
    for (k, s) in states.iter().enumerate() {
        let agrees = s.inputs.iter().zip(&wanted).all(|(b, w)| w.is_none_or(|w| w == *b));
        let alone = states.get(k + 1).is_none_or(|n| n.inputs != s.inputs);
        // the first of several states of one input vector stands for them
        if !agrees || alone || seen == Some(&s.inputs[..]) {
            continue;
        }
        seen = Some(&s.inputs);
        // how far each net falls when another rises
        let mut falls = vec![vec![0.0; nets.len()]; nets.len()];
        for (i, &a) in nets.iter().enumerate() {
            let mut p = Posed::new(cell, s, levels, Some(a), &[], options);
            let probe = p.probe();
            for (at, sign) in [(levels.ground_v, 1.0), (levels.supply_v, -1.0)] {
                p.set(probe, at);
                p.solve()?;
                for (j, &b) in nets.iter().enumerate() {
                    falls[i][j] += sign * p.voltage(b);
                }
            }
        }
        let mut used = vec![false; nets.len()];
        let words: Vec<String> =
            names.iter().zip(&s.inputs).map(|(n, b)| format!("{n}={}", u8::from(*b))).collect();
        for i in 0..nets.len() {
            for j in i + 1..nets.len() {
                if !used[i] && !used[j] && falls[i][j] > half && falls[j][i] > half {
                    (used[i], used[j]) = (true, true);
                    out.push(Loop { state: s.clone(), inputs: words.join(" "), nets: (nets[i], nets[j]) });
                }
            }
        }
    }
    if out.is_empty() {
        let words: Vec<String> = given.iter().map(|(n, b)| format!("{n}={}", u8::from(*b))).collect();
        let given = if words.is_empty() { String::new() } else { format!(" with {}", words.join(" ")) };
        return Err(AwakeError::StoresNothing { cell: cell.cell.name.to_string(), given });
    }
    Ok(out)
}

/// How a domain's rails come together while it keeps its state.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Collapse {
    /// The rail that moves: the supply falls behind a header, the ground rises behind a footer.
    pub side: CollapseSide,
    /// Where the n-wells are tied.
    #[serde(default)]
    pub nwell: WellTie,
    /// Where the p-wells are tied.
    #[serde(default)]
    pub pwell: WellTie,
}

/// Which rail moves.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum CollapseSide {
    /// The supply falls.
    Header,
    /// The ground rises.
    Footer,
}

impl From<CollapseSide> for Side {
    fn from(s: CollapseSide) -> Self {
        match s {
            CollapseSide::Header => Self::Header,
            CollapseSide::Footer => Self::Footer,
        }
    }
}

impl Collapse {
    /// Levels with `span_v` left between the rails of a domain whose full supply is `vdd_v`; inputs stand at the local rails.
    pub fn levels(&self, vdd_v: f64, span_v: f64) -> Levels {
        let (supply_v, ground_v) = match self.side {
            CollapseSide::Header => (span_v, 0.0),
            CollapseSide::Footer => (vdd_v, vdd_v - span_v),
        };
        Levels {
            supply_v,
            ground_v,
            nwell_v: if self.nwell == WellTie::Virtual { supply_v } else { vdd_v },
            pwell_v: if self.pwell == WellTie::Virtual { ground_v } else { 0.0 },
            high_v: supply_v,
            low_v: ground_v,
        }
    }
}

/// Local mismatch of thresholds: `σ = A/√(W·L)` of a single device (Pelgrom, Duinmaijer and Welbers, *JSSC* 24 (1989) 1433, from
/// memory). Constants quoted for the difference of a pair are √2 larger (reference sheet E-10).
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Mismatch {
    /// A of n-channel devices, V·m (1 mV·µm = 1e-9 V·m).
    pub n_v_m: f64,
    /// A of p-channel devices, V·m.
    pub p_v_m: f64,
}

/// Hold margin of one loop.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Hold {
    /// The inputs.
    pub inputs: String,
    /// Names of the two nets.
    pub nets: (String, String),
    /// Side of the smaller square, V; zero when nothing is held.
    pub margin_v: f64,
    /// Sides of both squares, V.
    pub lobes_v: [f64; 2],
    /// Standard deviation of each side by local mismatch, V; where mismatch was given and something is held.
    pub sigma_v: Option<[f64; 2]>,
    /// Slope of each side to the threshold of each element in netlist order, V/V.
    pub to_thresholds: Option<[Vec<f64>; 2]>,
    /// The curves.
    pub butterfly: Butterfly,
}

impl Hold {
    /// Probability that mismatch brings either side below `margin_v`: the sum of both tails, an upper bound of either. One
    /// where nothing is held.
    pub fn fails(&self, margin_v: f64) -> Option<f64> {
        let sigma = self.sigma_v?;
        let tail = |k: usize| {
            let room = self.lobes_v[k] - margin_v;
            if sigma[k] > 0.0 { upper_tail(room / sigma[k]) } else { f64::from(u8::from(room < 0.0)) }
        };
        Some((tail(0) + tail(1)).min(1.0))
    }

    /// Smaller distance of a side to `margin_v` in standard deviations.
    pub fn z_score(&self, margin_v: f64) -> Option<f64> {
        let s = self.sigma_v?;
        let z = [0, 1].map(|k| (self.lobes_v[k] - margin_v) / s[k]);
        let z = z[0].min(z[1]);
        z.is_finite().then_some(z)
    }
}

/// Standard deviation of the threshold of each element, V; zero for what is no transistor.
///
/// # Errors
/// Constants below zero, or a transistor whose netlist gives no size.
pub fn sigmas(cell: &BoundCell, m: &Mismatch) -> Result<Vec<f64>, AwakeError> {
    for a in [m.n_v_m, m.p_v_m] {
        if !(a >= 0.0 && a.is_finite()) {
            return range("mismatch constant", format!("{a} V·m"), "want zero or more (1 mV·µm = 1e-9 V·m)");
        }
    }
    cell.net
        .elements
        .iter()
        .zip(cell.gate_areas_m2())
        .map(|(e, area)| match (e, area) {
            (Element::Transistor(p), Some(area)) => {
                positive("gate area", area, "m²")?;
                let a = if p.device.polarity() == Polarity::N { m.n_v_m } else { m.p_v_m };
                Ok(a / area.sqrt())
            }
            (Element::Transistor(_), None) => range(
                &format!("the size of a transistor of cell `{}`", cell.cell.name),
                "not given".into(),
                "want `w` and `l` in its netlist for the law of mismatch",
            ),
            _ => Ok(0.0),
        })
        .collect()
}

/// Hold margin of a loop at given rails; with the standard deviations of thresholds, its own by exact first-order slopes: at the
/// best offset a side moves as its corners do.
///
/// # Errors
/// No operating point, or a curve that turns back.
pub fn hold(
    cell: &BoundCell,
    at: &Loop,
    levels: &Levels,
    sigma: Option<&[f64]>,
    options: &SolveOptions,
) -> Result<Hold, AwakeError> {
    let (a, b) = at.nets;
    let mut f = Tracer::of_loop(cell, &at.state, levels, (a, b), options);
    let mut g = Tracer::of_loop(cell, &at.state, levels, (b, a), options);
    let (lo, hi) = (levels.ground_v, levels.supply_v);
    let (first, second) = (f.curve(lo, hi)?, g.curve(lo, hi)?);
    let butterfly = refine(first, second, &mut |x| f.at(x), &mut |y| g.at(y))?;
    let lobes_v = butterfly.squares.as_ref().map_or([0.0; 2], |s| [s[0].side_v, s[1].side_v]);
    let mut to_thresholds = None;
    let mut sigma_v = None;
    if let (Some(sigma), Some(_)) = (sigma, &butterfly.squares) {
        let mut sides = [Vec::new(), Vec::new()];
        for (k, sign) in [1.0, -1.0].into_iter().enumerate() {
            let c = butterfly.offsets[k];
            let x1 = butterfly.first.input_at_offset(c);
            let y2 = butterfly.second.input_at_offset(-c);
            // x₁ with f(x₁) − x₁ = c moves by f_p/(1 − f′); x₂ = g(y₂) with y₂ − g(y₂) = c by g_p/(1 − g′)
            let (fp, df) = f.thresholds_at(x1)?;
            let (gp, dg) = g.thresholds_at(y2)?;
            sides[k] = fp.iter().zip(&gp).map(|(u, v)| sign * (u / (1.0 - df) - v / (1.0 - dg))).collect();
        }
        let spread = |s: &[f64]| s.iter().zip(sigma).map(|(d, s)| (d * s) * (d * s)).sum::<f64>().sqrt();
        sigma_v = Some([spread(&sides[0]), spread(&sides[1])]);
        to_thresholds = Some(sides);
    }
    let names = &cell.cell.nodes;
    Ok(Hold {
        inputs: at.inputs.clone(),
        nets: (names[a].to_string(), names[b].to_string()),
        margin_v: butterfly.margin_v(),
        lobes_v,
        sigma_v,
        to_thresholds,
        butterfly,
    })
}

/// What a cell must keep.
#[derive(Debug, Clone, Copy, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Need {
    /// Side of the square that must be left, V.
    #[serde(default)]
    pub margin_v: f64,
    /// Local mismatch, and how many cells must hold.
    #[serde(default)]
    pub population: Option<Population>,
}

/// Many cells.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Population {
    /// Local mismatch.
    pub mismatch: Mismatch,
    /// Cells.
    pub bits: f64,
    /// How many of them may fail on average.
    pub failing: f64,
}

impl Need {
    fn check(&self) -> Result<(), AwakeError> {
        if !(self.margin_v >= 0.0 && self.margin_v.is_finite()) {
            return range("margin", format!("{} V", self.margin_v), "want zero or more");
        }
        if let Some(p) = &self.population {
            positive("number of bits", p.bits, "")?;
            positive("number of failing bits", p.failing, "")?;
            if p.failing >= p.bits {
                let wanted = format!("want fewer than the {} bits", p.bits);
                return range("number of failing bits", format!("{}", p.failing), &wanted);
            }
        }
        Ok(())
    }

    fn met(&self, h: &Hold) -> bool {
        let held = h.butterfly.squares.is_some() && h.margin_v >= self.margin_v;
        match &self.population {
            Some(p) => held && h.fails(self.margin_v).is_some_and(|f| f <= p.failing / p.bits),
            None => held,
        }
    }
}

/// The lowest span between the rails that keeps what is needed.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Retention {
    /// The cell.
    pub cell: String,
    /// The corner.
    pub corner: String,
    /// Span between the rails, V.
    pub retention_v: f64,
    /// The loop that decides, just above that span.
    pub decides: Hold,
    /// z-score of its smaller side against the margin asked for, where mismatch was given.
    pub z_score: Option<f64>,
}

/// How closely a retention voltage is bracketed, V.
pub const RESOLUTION_V: f64 = 2e-6;

/// The lowest span at which every loop keeps what is needed, by bisection between none and the full supply; the upper end of
/// the last bracket is returned, where it still holds.
///
/// # Errors
/// No loop, no operating point, or [`AwakeError::NeverHolds`].
#[expect(clippy::too_many_arguments, reason = "one question: cell, corner, rails, inputs, need")]
pub fn retention(
    cell: &BoundCell,
    corner: &str,
    vdd_v: f64,
    collapse: &Collapse,
    given: &[(String, bool)],
    need: &Need,
    options: &SolveOptions,
    stop: &(dyn Fn() -> bool + Sync),
) -> Result<Retention, AwakeError> {
    retention_along(cell, corner, vdd_v, &|span_v| collapse.levels(vdd_v, span_v), given, need, options, stop)
}

/// The same with the levels of a domain of one's own over the span, such as one whose wells are biased.
///
/// # Errors
/// As [`retention`].
#[expect(clippy::too_many_arguments, reason = "one question: cell, corner, rails, inputs, need")]
pub fn retention_along(
    cell: &BoundCell,
    corner: &str,
    vdd_v: f64,
    levels: &(dyn Fn(f64) -> Levels + Sync),
    given: &[(String, bool)],
    need: &Need,
    options: &SolveOptions,
    stop: &(dyn Fn() -> bool + Sync),
) -> Result<Retention, AwakeError> {
    need.check()?;
    positive("supply", vdd_v, "V")?;
    let full = levels(vdd_v);
    let all = loops(cell, &full, given, options)?;
    let sigma = need.population.as_ref().map(|p| sigmas(cell, &p.mismatch)).transpose()?;
    // the loop that is furthest from what is needed
    let worst = |span: f64| {
        if stop() {
            return Err(AwakeError::Stopped);
        }
        let levels = levels(span);
        let mut held = all
            .par_iter()
            .map(|l| hold(cell, l, &levels, sigma.as_deref(), options))
            .collect::<Result<Vec<_>, _>>()?;
        let badness = |h: &Hold| match (h.butterfly.squares.is_some(), h.z_score(need.margin_v)) {
            (false, _) => f64::NEG_INFINITY,
            (true, Some(z)) if need.population.is_some() => z,
            _ => h.margin_v,
        };
        let k = (0..held.len()).min_by(|&i, &j| badness(&held[i]).total_cmp(&badness(&held[j]))).unwrap_or(0);
        Ok(held.swap_remove(k))
    };
    let mut decides = worst(vdd_v)?;
    if !need.met(&decides) {
        let reason = match (&decides.butterfly.squares, decides.z_score(need.margin_v)) {
            (None, _) => "its loop has a single state".to_owned(),
            (Some(_), Some(z)) if decides.margin_v >= need.margin_v => {
                let p = need.population.as_ref().map_or(f64::NAN, |p| p.failing / p.bits);
                format!("mismatch leaves {z:.2} standard deviations where {p:.1e} may fail")
            }
            _ => format!("the margin is {:.4} V where {:.4} V is asked for", decides.margin_v, need.margin_v),
        };
        return Err(AwakeError::NeverHolds {
            cell: cell.cell.name.to_string(),
            corner: corner.to_owned(),
            supply_v: vdd_v,
            reason,
            inputs: decides.inputs,
        });
    }
    let (mut lost, mut kept) = (0.0, vdd_v);
    while kept - lost > RESOLUTION_V {
        let mid = 0.5 * (lost + kept);
        // below one thermal voltage no gate has gain: 2·vT·ln 2 is the least of all (reference sheet B10.1)
        let h = if mid < cell.temp.thermal_voltage() { None } else { Some(worst(mid)?) };
        match h {
            Some(h) if need.met(&h) => (kept, decides) = (mid, h),
            _ => lost = mid,
        }
    }
    Ok(Retention {
        cell: cell.cell.name.to_string(),
        corner: corner.to_owned(),
        retention_v: kept,
        z_score: decides.z_score(need.margin_v),
        decides,
    })
}
