//! The rest point: the voltages at which virtual rails settle, and every real supply's current there.
//!
//! Balance is taken with the device model's own currents on both sides: what the switch lets through (its GIDL, junction and
//! gate currents at the collapsed rail included) is what the block draws at that rail. Both fall by decades over the range,
//! so the root is sought on the logarithm of their ratio, which is nearly straight.

use std::sync::Arc;
use std::sync::atomic::AtomicBool;

use serde::{Deserialize, Serialize};

use super::account::account;
use super::clamp::{Clamp, ClampSpec};
use super::scheme::{Scheme, SchemeError};
use super::switch::{Side, Switch};
use crate::block::current::{BindError, BlockCurrents, BlockError, BoundBlock, total};
use crate::block::{Collapsing, Draw, Parts};
use crate::cell::{DeviceShelf, Levels};
use crate::device::process::Process;
use crate::device::range::Outside;
use crate::device::root::increasing;
use crate::device::{Mechanism, Terminal};
use crate::physics::Kelvin;
use crate::read::deck::Note;
use crate::read::source::ReadError;

/// A domain could not be put to rest.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum RestError {
    /// The scheme itself.
    #[error(transparent)]
    Scheme(#[from] SchemeError),
    /// A card, bin or size.
    #[error(transparent)]
    Read(#[from] ReadError),
    /// The block.
    #[error(transparent)]
    Block(#[from] BlockError),
    /// The answer would rest on numbers that the user has not asked for.
    #[error(
        "scheme `{scheme}`: a transistor leaves the points of its table: {reason}; add points, or set `extrapolate = true` and read the \
         result as a guess"
    )]
    Outside {
        /// The scheme.
        scheme: String,
        /// Which voltage, and the range.
        reason: String,
    },
    /// The balance did not close.
    #[error(
        "scheme `{scheme}`: the virtual rails do not settle: imbalance {residual:.2e} of the current at {at_v:.4} V"
    )]
    NoRest {
        /// The scheme.
        scheme: String,
        /// Relative imbalance left.
        residual: f64,
        /// Where.
        at_v: f64,
    },
}

impl From<BindError> for RestError {
    fn from(e: BindError) -> Self {
        match e {
            BindError::Read(e) => Self::Read(e),
            BindError::Block(e) => Self::Block(e),
        }
    }
}

/// Current and power of one real supply.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct SupplyCurrent {
    /// `vdd`, `ground`, `header_gate`, `footer_gate`, `nwell`, `pwell`, `header_well`, `footer_well`.
    pub supply: String,
    /// Its voltage, V.
    pub voltage_v: f64,
    /// Current it delivers, A.
    pub current_a: f64,
    /// Power it delivers, W.
    pub power_w: f64,
}

/// One way current takes out of the supplies, by mechanism.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct PathShare {
    /// `block`, `block wells`, `header channel`, `header body`, `header gate`, …
    pub path: String,
    /// Mechanism.
    pub mechanism: Mechanism,
    /// Current, A.
    pub current_a: f64,
}

/// A domain at rest.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Asleep {
    /// Virtual supply (the supply itself without header), V.
    pub virtual_supply_v: f64,
    /// Virtual ground (the ground itself without footer), V.
    pub virtual_ground_v: f64,
    /// Every real supply.
    pub supplies: Vec<SupplyCurrent>,
    /// Current from all supplies above ground, A.
    pub current_a: f64,
    /// Power from all supplies, W.
    pub power_w: f64,
    /// Power that each mechanism dissipates in block and switches, over the supply voltage, A: it adds up to `power_w` without
    /// the overhead, over the supply. A split at the supply terminal would book as channel whatever reaches it through an on
    /// device.
    pub mechanisms: [f64; 5],
    /// Current of the switch at its virtual rail by mechanism, A (the header's where there are two): what holds the domain.
    pub switch_mechanisms: [f64; 5],
    /// By path.
    pub paths: Vec<PathShare>,
    /// Largest oxide voltage of a switch, asleep or awake, V; zero without switch.
    pub oxide_v: f64,
    /// Field it means over the electrical thickness, V/m.
    pub oxide_field_v_m: f64,
    /// The block's own currents at rest.
    pub block: BlockCurrents,
    /// Evaluations of the block.
    pub evaluations: usize,
    /// Relative imbalance left at the virtual rails.
    pub residual: f64,
    /// Power that makes the scheme work: the stated overhead, and what the pump loses, W.
    #[serde(default)]
    pub overhead_w: f64,
    /// Remarks.
    pub notes: Vec<Note>,
}

/// Relative imbalance accepted at a virtual rail.
const BALANCE: f64 = 1e-9;
/// Evaluations of the block before giving up.
const EVALUATIONS: usize = 120;

/// Clamps beside header and footer, made for a corner.
#[derive(Debug, Clone, Default)]
pub struct Clamps {
    /// Beside the header.
    pub header: Option<Clamp>,
    /// Beside the footer.
    pub footer: Option<Clamp>,
}

/// A domain about to be put to rest.
pub(super) struct Domain<'a> {
    pub(super) scheme: &'a Scheme,
    pub(super) block: &'a dyn Draw,
    pub(super) vdd_v: f64,
    pub(super) header: Option<Switch>,
    pub(super) footer: Option<Switch>,
    pub(super) clamps: Clamps,
    pub(super) stop: &'a AtomicBool,
    pub(super) evaluations: usize,
}

impl Domain<'_> {
    pub(super) fn levels(&self, supply: f64, ground: f64) -> Levels {
        self.scheme.levels(self.vdd_v, supply, ground)
    }

    /// Current the block takes from its supply rail and what hangs on it, and returns into its ground rail.
    fn block(&mut self, supply: f64, ground: f64) -> Result<(f64, f64), RestError> {
        self.evaluations += 1;
        Ok(self.on_rails(self.block.draw_totals(&self.levels(supply, ground), self.stop)?))
    }

    /// What of the books (supply, ground, n-wells, p-wells) hangs on the virtual rails.
    pub(super) fn on_rails(&self, totals: [f64; 4]) -> (f64, f64) {
        let sum = |rail| self.scheme.on_rail(rail).iter().map(|b| totals[*b as usize]).sum::<f64>();
        (sum(Collapsing::Supply), -sum(Collapsing::Ground))
    }

    /// Current out of the header into the virtual supply.
    pub(super) fn header_gives(&self, v: f64) -> f64 {
        let clamp = self.clamps.header.as_ref().map_or(0.0, |c| c.gives_a(v));
        clamp + self.header.as_ref().map_or(0.0, |h| -h.branches(v).terminals()[Terminal::Drain as usize])
    }
    /// Current out of the virtual ground into the footer.
    pub(super) fn footer_takes(&self, v: f64) -> f64 {
        let clamp = self.clamps.footer.as_ref().map_or(0.0, |c| c.gives_a(v));
        clamp + self.footer.as_ref().map_or(0.0, |f| f.branches(v).terminals()[Terminal::Drain as usize])
    }
}

/// ln(a/b) where both are positive; signs decide otherwise.
fn log_ratio(a: f64, b: f64) -> f64 {
    match (a > 0.0, b > 0.0) {
        (true, true) => (a / b).ln(),
        (true, false) => 200.0,
        (false, true) => -200.0,
        (false, false) => (a - b) / (a.abs() + b.abs() + 1e-60),
    }
}

/// Puts a domain to rest under a scheme.
///
/// # Errors
/// The scheme or its devices are impossible, the block has no operating point, the rails do not settle, or `stop` was
/// raised.
#[expect(clippy::too_many_arguments, reason = "one point of the grid: everything that defines it")]
pub fn settle(
    scheme: &Scheme,
    block: &BoundBlock,
    process: &Process,
    temp: Kelvin,
    vdd_v: f64,
    shelf: &mut DeviceShelf,
    origin: &Arc<str>,
    stop: &AtomicBool,
) -> Result<Asleep, RestError> {
    scheme.check()?;
    let mut make = |spec, side| Switch::new(spec, side, process, temp, vdd_v, shelf, origin);
    let header = scheme.header.as_ref().map(|s| make(s, Side::Header)).transpose()?;
    let footer = scheme.footer.as_ref().map(|s| make(s, Side::Footer)).transpose()?;
    let mut clamp = |spec: &Option<ClampSpec>, side| {
        let made = spec.as_ref().map(|c| Clamp::new(c, side, process, temp, vdd_v, shelf, origin));
        made.transpose()
    };
    let clamps = Clamps {
        header: clamp(&scheme.header_clamp, Side::Header)?,
        footer: clamp(&scheme.footer_clamp, Side::Footer)?,
    };
    let parts = Parts::new(block, &scheme.parked, scheme.zigzag, vdd_v)?;
    settle_clamped(scheme, &parts, vdd_v, header, footer, clamps, stop)
}

/// Puts a domain to rest whose switches are made; the block may be a curve, which takes microseconds.
///
/// # Errors
/// As [`settle`].
pub fn settle_with(
    scheme: &Scheme,
    block: &dyn Draw,
    vdd_v: f64,
    header: Option<Switch>,
    footer: Option<Switch>,
    stop: &AtomicBool,
) -> Result<Asleep, RestError> {
    settle_clamped(scheme, block, vdd_v, header, footer, Clamps::default(), stop)
}

/// The same with clamps.
///
/// # Errors
/// As [`settle`].
pub fn settle_clamped(
    scheme: &Scheme,
    block: &dyn Draw,
    vdd_v: f64,
    header: Option<Switch>,
    footer: Option<Switch>,
    clamps: Clamps,
    stop: &AtomicBool,
) -> Result<Asleep, RestError> {
    let mut d = Domain { scheme, block, vdd_v, header, footer, clamps, stop, evaluations: 0 };
    let (supply, ground) = rest_voltages(&mut d)?;
    let currents = d.block.draw(&d.levels(supply, ground), stop)?;
    d.evaluations += 1;
    let c = &currents;
    let (from_supply, into_ground) = d.on_rails([&c.supply, &c.ground, &c.nwell, &c.pwell].map(total));
    let mut residual = 0.0f64;
    if d.header.is_some() && scheme.held_supply_v.is_none() {
        residual = residual.max((d.header_gives(supply) - from_supply).abs() / from_supply.abs().max(1e-40));
    }
    if d.footer.is_some() && scheme.held_ground_v.is_none() {
        residual = residual.max((d.footer_takes(ground) - into_ground).abs() / into_ground.abs().max(1e-40));
    }
    let mut asleep = account(&d, currents, supply, ground, residual);
    let mut outside = asleep.block.outside.clone();
    for (switch, rail) in [(&d.header, supply), (&d.footer, ground)] {
        outside = Outside::worse(outside, switch.as_ref().and_then(|s| s.outside(rail)));
    }
    if let Some(o) = outside {
        if o.refused {
            return Err(RestError::Outside { scheme: scheme.name.clone(), reason: o.to_string() });
        }
        asleep.notes.push(o.note());
    }
    if residual > 1e-6 {
        if residual > 2.0 || !falls_in_a_jump(&mut d, supply, ground)? {
            return Err(RestError::NoRest { scheme: scheme.name.clone(), residual, at_v: supply - ground });
        }
        asleep.notes.push(Note::new(
            "rest-in-a-jump",
            format!(
                "the block's current jumps where the rails settle ({:.3} V left to it): a stored state is lost there, and the rail may \
                 settle a little lower than stated",
                supply - ground
            ),
        ));
    }
    asleep.evaluations = d.evaluations;
    Ok(asleep)
}

/// Only where the virtual rails (supply, ground) come to rest, V, without the books: on a curve, a few microseconds.
///
/// # Errors
/// The rails do not settle, or the block has no operating point.
pub fn rest_rails(
    scheme: &Scheme,
    block: &dyn Draw,
    vdd_v: f64,
    header: Option<Switch>,
    footer: Option<Switch>,
    clamps: Clamps,
    stop: &AtomicBool,
) -> Result<(f64, f64), RestError> {
    rest_voltages(&mut Domain { scheme, block, vdd_v, header, footer, clamps, stop, evaluations: 0 })
}

fn rest_voltages(d: &mut Domain<'_>) -> Result<(f64, f64), RestError> {
    let vdd = d.vdd_v;
    let (held_supply, held_ground) = (d.scheme.held_supply_v, d.scheme.held_ground_v);
    let header = d.header.is_some() && held_supply.is_none();
    let footer = d.footer.is_some() && held_ground.is_none();
    let (supply, ground) = (held_supply.unwrap_or(vdd), held_ground.unwrap_or(0.0));
    // one rail settles while the other stays where it is
    let sink = |d: &mut Domain<'_>, ground: f64| {
        one_rail(vdd - ground, |span| {
            let (i, _) = d.block(ground + span, ground)?;
            Ok(log_ratio(i, d.header_gives(ground + span)))
        })
        .map(|span| ground + span)
    };
    let rise = |d: &mut Domain<'_>, supply: f64| {
        one_rail(supply, |span| {
            let (_, i) = d.block(supply, supply - span)?;
            Ok(log_ratio(i, d.footer_takes(supply - span)))
        })
        .map(|span| supply - span)
    };
    match (header, footer) {
        (false, false) => Ok((supply, ground)),
        (true, false) => Ok((sink(d, ground)?, ground)),
        (false, true) => Ok((supply, rise(d, supply)?)),
        // each row sees one virtual rail only
        (true, true) if d.scheme.zigzag => Ok((sink(d, 0.0)?, rise(d, vdd)?)),
        (true, true) => match both_rails_newton(d)? {
            Some(at) => Ok(at),
            None => both_rails(d),
        },
    }
}

/// Whether the balance changes sign across the voltages found, by a jump of the block's current.
fn falls_in_a_jump(d: &mut Domain<'_>, supply: f64, ground: f64) -> Result<bool, RestError> {
    let h = 1e-7;
    let mut signs = [false; 2];
    for (k, dv) in [-h, h].into_iter().enumerate() {
        let (s, g) = match (d.header.is_some(), d.footer.is_some()) {
            (true, false) => (supply + dv, ground),
            (false, true) => (supply, ground - dv),
            _ => (supply + 0.5 * dv, ground - 0.5 * dv),
        };
        let (from, into) = d.block(s, g)?;
        let balance = if d.header.is_some() { from - d.header_gives(s) } else { into - d.footer_takes(g) };
        signs[k] = balance > 0.0;
    }
    Ok(signs == [false, true])
}

/// The span left to the block by one switch. The balance is steep near zero span, where the block's current is ohmic, so the
/// bracket starts at a millivolt and goes lower only when it must.
fn one_rail(vdd: f64, mut f: impl FnMut(f64) -> Result<f64, RestError>) -> Result<f64, RestError> {
    let floor = 1e-3;
    if f(floor)? > 0.0 {
        return increasing(1e-9, floor, 1e-15, BALANCE, EVALUATIONS, f);
    }
    increasing(floor, vdd, 1e-14, BALANCE, EVALUATIONS, f)
}

/// Newton with secant updates (Broyden 1965) on the logarithms of both balances; `None` when it does not close.
fn both_rails_newton(d: &mut Domain<'_>) -> Result<Option<(f64, f64)>, RestError> {
    let vdd = d.vdd_v;
    let balance = |d: &mut Domain<'_>, x: [f64; 2]| -> Result<[f64; 2], RestError> {
        let (from, into) = d.block(x[0], x[1])?;
        // both grow with the span between the rails
        Ok([log_ratio(from, d.header_gives(x[0])), log_ratio(into, d.footer_takes(x[1]))])
    };
    let mut x = [0.65 * vdd, 0.35 * vdd];
    let mut f = balance(d, x)?;
    let h = 0.01 * vdd;
    let fa = balance(d, [x[0] + h, x[1]])?;
    let fb = balance(d, [x[0], x[1] - h])?;
    // columns: supply up, ground down
    let mut j = [[(fa[0] - f[0]) / h, (fb[0] - f[0]) / -h], [(fa[1] - f[1]) / h, (fb[1] - f[1]) / -h]];
    for _ in 0..40 {
        if f[0].abs() <= BALANCE && f[1].abs() <= BALANCE {
            return Ok(Some((x[0], x[1])));
        }
        let det = j[0][0] * j[1][1] - j[0][1] * j[1][0];
        if !(det.abs() > 1e-12) {
            return Ok(None);
        }
        let step = [(-f[0] * j[1][1] + f[1] * j[0][1]) / det, (-f[1] * j[0][0] + f[0] * j[1][0]) / det];
        let far = step[0].abs().max(step[1].abs());
        let mut scale = if far > 0.15 * vdd { 0.15 * vdd / far } else { 1.0 };
        // stay between the real rails and keep the order of the virtual ones
        let inside = |k: f64| {
            let y = [x[0] + k * step[0], x[1] + k * step[1]];
            y[0] < vdd && y[1] > 0.0 && y[0] - y[1] > 0.2 * (x[0] - x[1])
        };
        while !inside(scale) {
            scale *= 0.5;
            if scale < 1e-9 {
                return Ok(None);
            }
        }
        let s = [scale * step[0], scale * step[1]];
        let y = [x[0] + s[0], x[1] + s[1]];
        let g = balance(d, y)?;
        let norm = s[0] * s[0] + s[1] * s[1];
        for r in 0..2 {
            let miss = g[r] - f[r] - j[r][0] * s[0] - j[r][1] * s[1];
            for c in 0..2 {
                j[r][c] += miss * s[c] / norm;
            }
        }
        (x, f) = (y, g);
    }
    Ok(None)
}

/// Two virtual rails without derivatives: the span between them is sought outside, their common position inside. For a given
/// span the block hardly depends on the position, while header and footer pull it up and down: both balances are monotone.
fn both_rails(d: &mut Domain<'_>) -> Result<(f64, f64), RestError> {
    let vdd = d.vdd_v;
    let mut at = (0.5 * vdd, 0.5 * vdd);
    let span = one_rail(vdd, |span| {
        let ground = increasing(0.0, vdd - span, 1e-14, BALANCE, 60, |g| {
            let (from, into) = d.block(g + span, g)?;
            // charge balance of the pair: higher position, less from the header and more into the footer
            Ok::<f64, RestError>(log_ratio(d.footer_takes(g) + (from - into), d.header_gives(g + span)))
        })?;
        at = (ground + span, ground);
        let (from, _) = d.block(at.0, at.1)?;
        Ok(log_ratio(from, d.header_gives(at.0)))
    })?;
    at.0 = at.1 + span;
    Ok(at)
}
