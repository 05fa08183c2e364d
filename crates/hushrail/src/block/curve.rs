//! The current of a block as a curve over its collapsing rail: sampled where it bends, interpolated in the logarithm.
//!
//! The rail is told by the span left to the block, from nothing to the full supply. Over ln(span) an ohmic current is a
//! straight line of ln(current), and so is a constant one, which is what the two ends of the curve look like; between them
//! currents grow like exp(span). Every book (supply, ground, wells, power; each by mechanism) is a monotone cubic of Fritsch
//! and Carlson (SIAM J. Numer. Anal. 17 (1980) 238) with the slopes at knots from parabolas through three. Where a book changes
//! sign it is straight between two knots.

use std::sync::atomic::AtomicBool;

use serde::{Deserialize, Serialize};

use super::current::{BlockCurrents, BlockError, BoundBlock, total};
use crate::cell::Levels;
use crate::device::range::Outside;

/// Whatever has currents at given rails and wells: a block at a corner, its curve, a law of your own.
pub trait Draw: Sync {
    /// Currents at given levels, by mechanism.
    ///
    /// # Errors
    /// No operating point, `stop` raised, or levels that are not known here.
    fn draw(&self, levels: &Levels, stop: &AtomicBool) -> Result<BlockCurrents, BlockError>;
    /// Sums over mechanisms in the order of [`Book`] without power, for balances.
    ///
    /// # Errors
    /// As [`draw`](Draw::draw).
    fn draw_totals(&self, levels: &Levels, stop: &AtomicBool) -> Result<[f64; 4], BlockError> {
        let c = self.draw(levels, stop)?;
        Ok([total(&c.supply), total(&c.ground), total(&c.nwell), total(&c.pwell)])
    }
}

impl Draw for BoundBlock {
    fn draw(&self, levels: &Levels, stop: &AtomicBool) -> Result<BlockCurrents, BlockError> {
        self.currents(levels, stop)
    }
}

/// Which rail falls away when the domain sleeps.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Collapsing {
    /// The virtual supply falls to the ground.
    Supply,
    /// The virtual ground rises to the supply.
    Ground,
}

impl Collapsing {
    /// Supply and ground of the block with `span_v` left between them.
    pub fn rails(self, vdd_v: f64, span_v: f64) -> (f64, f64) {
        match self {
            Self::Supply => (span_v, 0.0),
            Self::Ground => (vdd_v, vdd_v - span_v),
        }
    }
}

/// One book of a block.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Book {
    /// Into the block from its supply rail.
    Supply = 0,
    /// Into the block from its ground rail.
    Ground = 1,
    /// Into the n-wells.
    Nwell = 2,
    /// Into the p-wells.
    Pwell = 3,
    /// Power dissipated inside.
    Power = 4,
}

const BOOKS: usize = 5;
const COLUMNS: usize = 25;

/// A book at a span, with its slope over the span.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Sloped {
    /// Current, A, or power, W.
    pub value: f64,
    /// Per volt of span.
    pub per_v: f64,
}

/// A curve that cannot be made.
#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum CurveError {
    /// The block.
    #[error(transparent)]
    Block(#[from] BlockError),
    /// A number out of range.
    #[error("block curve: {what} is {value}; {wanted}")]
    Range {
        /// The quantity.
        what: &'static str,
        /// What was found.
        value: f64,
        /// What would be right.
        wanted: &'static str,
    },
    /// Stored points that are no curve.
    #[error("block curve: {0}")]
    Points(String),
    /// The limit of evaluations was met first.
    #[error(
        "block curve: {reached:.2e} reached in {evaluations} evaluations, asked for {asked:.2e}; the worst place is {at_v:.4} V"
    )]
    Accuracy {
        /// Worst relative difference at a check point.
        reached: f64,
        /// What was asked for.
        asked: f64,
        /// Span there, V.
        at_v: f64,
        /// Evaluations spent.
        evaluations: usize,
    },
}

/// A block's books at one span, as computed.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Knot {
    /// Span left to the block, V.
    pub span_v: f64,
    /// Books by mechanism: supply, ground, n-wells, p-wells (A), power (W).
    pub books: [[f64; 5]; BOOKS],
    /// States that are not stable there.
    pub unstable: usize,
    /// The transistor furthest outside what its model rests on there.
    pub outside: Option<Outside>,
}

/// The stored form of a curve.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct CurvePoints {
    /// The rail that falls away.
    pub collapsing: Collapsing,
    /// Full supply, V.
    pub vdd_v: f64,
    /// Levels with nothing left.
    pub empty: Levels,
    /// Levels at full supply.
    pub full: Levels,
    /// Part of the supply current given by value at full supply, A.
    pub given_a: f64,
    /// From the real supply and into the real ground past any switch, whatever is left between the rails, A.
    #[serde(default)]
    pub real: [[f64; 5]; 2],
    /// States of the block.
    pub states: usize,
    /// Knots by rising span, the first at zero.
    pub knots: Vec<Knot>,
    /// Largest relative difference found at a check point outside jumps.
    pub accuracy: f64,
    /// Spans where the current jumps: a stored state is lost, V.
    pub jumps_v: Vec<f64>,
    /// Evaluations of the block.
    pub evaluations: usize,
}

/// A block's current over its collapsing rail.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(try_from = "CurvePoints", into = "CurvePoints")]
pub struct BlockCurve {
    points: CurvePoints,
    columns: Vec<Column>,
}

/// One column: logarithms and their slopes over ln(span) at the knots, where they have any.
#[derive(Debug, Clone, PartialEq, Default)]
struct Column {
    /// No value anywhere.
    blank: bool,
    value: Vec<f64>,
    log: Vec<f64>,
    slope: Vec<f64>,
}

/// First knot above zero, over the supply; below, everything is linear (ohmic).
const FIRST: f64 = 1e-6;
/// Knots before the first check: three a decade.
const START: usize = 19;
/// Evaluations of the block before giving up.
const EVALUATIONS: usize = 2000;
/// A step between knots closer than this, over the span, is a jump.
const JUMP: f64 = 3e-6;
/// A mechanism below this share of its book counts as this share when its accuracy is judged.
const SHARE: f64 = 1e-3;

impl BlockCurve {
    /// Samples a block over its collapsing rail until every check point agrees with the curve to `tolerance`.
    ///
    /// A check point stands in the middle of two knots and becomes a knot itself; the worst difference there is
    /// [`accuracy`](CurvePoints::accuracy), measured against the largest of the book's mechanisms together.
    ///
    /// # Errors
    /// Impossible numbers, a block without operating point, or a tolerance that is not met.
    pub fn sample(
        block: &dyn Draw,
        collapsing: Collapsing,
        vdd_v: f64,
        levels: &dyn Fn(f64) -> Levels,
        tolerance: f64,
        stop: &AtomicBool,
    ) -> Result<Self, CurveError> {
        if !(vdd_v > 0.0 && vdd_v.is_finite()) {
            return Err(CurveError::Range { what: "supply (V)", value: vdd_v, wanted: "want it above zero" });
        }
        if !(1e-7..=0.1).contains(&tolerance) {
            return Err(CurveError::Range {
                what: "tolerance",
                value: tolerance,
                wanted: "want 1e-7 to 0.1",
            });
        }
        let mut evaluations = 0;
        let mut states = 0;
        let mut given_a = 0.0;
        let mut real = [[0.0; 5]; 2];
        let mut knot = |span_v: f64| -> Result<Knot, CurveError> {
            evaluations += 1;
            let c = block.draw(&levels(span_v), stop)?;
            (states, given_a) = (c.states, if span_v > 0.0 { c.given_a * vdd_v / span_v } else { given_a });
            real = [c.real_supply, c.real_ground];
            let books = [c.supply, c.ground, c.nwell, c.pwell, c.power_w];
            if books.iter().flatten().any(|x| !x.is_finite()) {
                return Err(CurveError::Points(format!("a current at {span_v:.4} V is not a number")));
            }
            Ok(Knot { span_v, books, unstable: c.unstable, outside: c.outside })
        };
        let mut knots = vec![knot(0.0)?];
        for k in 0..START {
            let share = k as f64 / (START - 1) as f64;
            knots.push(knot(vdd_v * FIRST.powf(1.0 - share))?);
        }
        // the curve grows like exp(span) at its upper end: start closer there
        for share in [0.6, 0.75, 0.9] {
            knots.push(knot(share * vdd_v)?);
        }
        knots.sort_by(|a, b| a.span_v.total_cmp(&b.span_v));
        let mut open = vec![true; knots.len() - 1];
        open[0] = false;
        let mut accuracy = 0.0f64;
        let mut jumps_v = Vec::new();
        let mut spent = knots.len();
        while open.iter().any(|o| *o) {
            let columns = columns(&knots);
            let (mut next, mut next_open) = (Vec::new(), Vec::new());
            let mut worst = (0.0f64, 0.0);
            for (i, k) in knots.iter().enumerate() {
                next.push(k.clone());
                if i + 1 == knots.len() {
                    break;
                }
                if !open[i] {
                    next_open.push(false);
                    continue;
                }
                let (lo, hi) = (k.span_v, knots[i + 1].span_v);
                let middle = knot((lo * hi).sqrt())?;
                spent += 1;
                let miss = difference(&columns, &knots, i, &middle);
                if miss > worst.0 {
                    worst = (miss, middle.span_v);
                }
                next.push(middle);
                if miss <= tolerance {
                    accuracy = accuracy.max(miss);
                    next_open.extend([false, false]);
                } else if hi - lo < JUMP * vdd_v && hi / lo < 1.01 {
                    jumps_v.push(hi);
                    next_open.extend([false, false]);
                } else {
                    next_open.extend([true, true]);
                }
            }
            (knots, open) = (next, next_open);
            if spent > EVALUATIONS && open.iter().any(|o| *o) {
                return Err(CurveError::Accuracy {
                    reached: worst.0,
                    asked: tolerance,
                    at_v: worst.1,
                    evaluations: spent,
                });
            }
        }
        let points = CurvePoints {
            collapsing,
            vdd_v,
            empty: levels(0.0),
            full: levels(vdd_v),
            given_a,
            real,
            states,
            knots,
            accuracy,
            jumps_v,
            evaluations,
        };
        Self::try_from(points)
    }

    /// The stored form.
    pub fn points(&self) -> &CurvePoints {
        &self.points
    }

    /// Full supply, V.
    pub fn vdd_v(&self) -> f64 {
        self.points.vdd_v
    }

    /// The sum of a book over its mechanisms, with slope. Past the full supply it goes on along its last slope.
    pub fn book(&self, book: Book, span_v: f64) -> Sloped {
        let at = self.place(span_v);
        let mut sum = Sloped::default();
        for c in &self.columns[5 * book as usize..][..5] {
            let x = Self::column(c, &at);
            sum.value += x.value;
            sum.per_v += x.per_v;
        }
        sum
    }

    /// All books at a span; cells are not told apart.
    pub fn currents(&self, span_v: f64) -> BlockCurrents {
        let at = self.place(span_v);
        let p = &self.points;
        let mut books = [[0.0; 5]; BOOKS];
        for (to, c) in books.iter_mut().flatten().zip(&self.columns) {
            *to = Self::column(c, &at).value;
        }
        let [supply, ground, nwell, pwell, power_w] = books;
        let (a, b) = (&p.knots[at.knot], &p.knots[at.knot + 1]);
        BlockCurrents {
            supply,
            ground,
            nwell,
            pwell,
            power_w,
            real_supply: p.real[0],
            real_ground: p.real[1],
            inputs_high: [0.0; 5],
            inputs_low: [0.0; 5],
            given_a: p.given_a * span_v / p.vdd_v,
            cells: Vec::new(),
            states: p.states,
            unstable: a.unstable.max(b.unstable),
            steps: 0,
            fallbacks: 0,
            outside: Outside::worse(a.outside.clone(), b.outside.clone()),
        }
    }

    /// The span that levels leave, when they are levels of this curve.
    fn span_of(&self, levels: &Levels) -> Result<f64, BlockError> {
        let p = &self.points;
        let span = levels.supply_v - levels.ground_v;
        let share = span / p.vdd_v;
        let on = |a: f64, b: f64| a + share * (b - a);
        for (what, given_v, a, b) in [
            ("supply", levels.supply_v, p.empty.supply_v, p.full.supply_v),
            ("n-well", levels.nwell_v, p.empty.nwell_v, p.full.nwell_v),
            ("p-well", levels.pwell_v, p.empty.pwell_v, p.full.pwell_v),
        ] {
            let curve_v = on(a, b);
            if !((given_v - curve_v).abs() <= 1e-9 * p.vdd_v) {
                return Err(BlockError::OffCurve { what, given_v, curve_v });
            }
        }
        Ok(span)
    }

    fn place(&self, span_v: f64) -> Place {
        let k = &self.points.knots;
        let x = span_v.min(self.points.vdd_v);
        let knot = k.partition_point(|k| k.span_v <= x).clamp(1, k.len() - 1) - 1;
        let (a, b) = (k[knot].span_v, k[knot + 1].span_v);
        let (wide, t) = if knot == 0 { (0.0, x / b) } else { ((b / a).ln(), (x / a).ln() / (b / a).ln()) };
        Place { knot, x, over: span_v - x, wide, t, straight: (x - a) / (b - a), per_v: 1.0 / (b - a) }
    }

    fn column(c: &Column, at: &Place) -> Sloped {
        if c.blank {
            return Sloped::default();
        }
        let i = at.knot;
        let (a, b) = (c.value[i], c.value[i + 1]);
        let mut y = if i == 0 || !(a * b > 0.0) {
            Sloped { value: a + at.straight * (b - a), per_v: at.per_v * (b - a) }
        } else {
            let (log, slope) = hermite(at.t, at.wide, [c.log[i], c.log[i + 1]], [c.slope[i], c.slope[i + 1]]);
            let value = log.exp().copysign(a);
            Sloped { value, per_v: value * slope / at.x }
        };
        if at.over > 0.0 {
            let grown = y.value * (at.over * y.per_v / y.value).exp();
            // along the logarithm while it has one, straight otherwise
            y = if y.value != 0.0 && grown.is_finite() {
                Sloped { value: grown, per_v: y.per_v * grown / y.value }
            } else {
                Sloped { value: y.value + at.over * y.per_v, per_v: y.per_v }
            };
        }
        y
    }
}

impl Draw for BlockCurve {
    fn draw(&self, levels: &Levels, _stop: &AtomicBool) -> Result<BlockCurrents, BlockError> {
        Ok(self.currents(self.span_of(levels)?))
    }
    fn draw_totals(&self, levels: &Levels, _stop: &AtomicBool) -> Result<[f64; 4], BlockError> {
        let span = self.span_of(levels)?;
        Ok([Book::Supply, Book::Ground, Book::Nwell, Book::Pwell].map(|b| self.book(b, span).value))
    }
}

/// Where a span lies between knots.
struct Place {
    knot: usize,
    x: f64,
    /// Past the last knot, V.
    over: f64,
    /// Width in ln(span).
    wide: f64,
    t: f64,
    straight: f64,
    per_v: f64,
}

/// Value and slope of a cubic with end values and end slopes over a width.
fn hermite(t: f64, wide: f64, y: [f64; 2], d: [f64; 2]) -> (f64, f64) {
    let rise = y[1] - y[0];
    let (d0, d1) = (d[0] * wide, d[1] * wide);
    // y0 + t·(d0 + t·(3·rise − 2·d0 − d1 + t·(d0 + d1 − 2·rise)))
    let (c2, c3) = (3.0 * rise - 2.0 * d0 - d1, d0 + d1 - 2.0 * rise);
    (y[0] + t * (d0 + t * (c2 + t * c3)), (d0 + t * (2.0 * c2 + 3.0 * t * c3)) / wide)
}

fn columns(knots: &[Knot]) -> Vec<Column> {
    let u: Vec<f64> = knots.iter().map(|k| k.span_v.ln()).collect();
    (0..COLUMNS)
        .map(|c| {
            let value: Vec<f64> = knots.iter().map(|k| k.books[c / 5][c % 5]).collect();
            if value.iter().all(|v| *v == 0.0) {
                return Column { blank: true, ..Column::default() };
            }
            let log: Vec<f64> = value.iter().map(|v| v.abs().ln()).collect();
            let n = value.len();
            let mut slope = vec![0.0; n];
            // the knot at zero has no logarithm of its span
            let joined = |i: usize| i >= 1 && i + 1 < n && value[i] * value[i + 1] > 0.0;
            let secant = |i: usize| (log[i + 1] - log[i]) / (u[i + 1] - u[i]);
            for i in 1..n {
                slope[i] = match (joined(i - 1), joined(i)) {
                    (false, false) => 0.0,
                    (true, false) => end(&u, &log, i, false, joined(i.wrapping_sub(2))),
                    (false, true) => end(&u, &log, i, true, joined(i + 1)),
                    (true, true) => {
                        let (h0, h1) = (u[i] - u[i - 1], u[i + 1] - u[i]);
                        let (s0, s1) = (secant(i - 1), secant(i));
                        let parabola = (s0 * h1 + s1 * h0) / (h0 + h1);
                        limited(parabola, s0, s1)
                    }
                };
            }
            Column { blank: false, value, log, slope }
        })
        .collect()
}

/// Keeps a slope within what makes both cubics monotone.
fn limited(d: f64, s0: f64, s1: f64) -> f64 {
    if s0 * s1 <= 0.0 {
        return 0.0;
    }
    let most = 3.0 * s0.abs().min(s1.abs());
    d.clamp(-most, most)
}

/// Slope at the end of a run, from the parabola through three knots where there are three.
fn end(u: &[f64], y: &[f64], i: usize, forward: bool, third: bool) -> f64 {
    let s = |a: usize, b: usize| (y[b] - y[a]) / (u[b] - u[a]);
    let (near, far) = if forward { (i + 1, i + 2) } else { (i - 1, i.wrapping_sub(2)) };
    let first = s(i, near);
    if !third {
        return first;
    }
    let d = first + (u[i] - u[near]) * (s(near, far) - first) / (u[far] - u[i]);
    let most = 3.0 * first.abs();
    if d * first <= 0.0 { 0.0 } else { d.clamp(-most, most) }
}

/// Worst relative difference of the curve to a computed point between knots `i` and `i + 1`.
fn difference(columns: &[Column], knots: &[Knot], i: usize, point: &Knot) -> f64 {
    let (a, b) = (knots[i].span_v, knots[i + 1].span_v);
    let wide = (b / a).ln();
    let (t, straight) = ((point.span_v / a).ln() / wide, (point.span_v - a) / (b - a));
    let mut worst = 0.0f64;
    for (book, of) in point.books.iter().enumerate() {
        let gross: f64 = of.iter().map(|x| x.abs()).sum();
        if gross == 0.0 {
            continue;
        }
        let mut miss_total = 0.0;
        for (m, want) in of.iter().enumerate() {
            let c = &columns[5 * book + m];
            let got = if c.blank {
                0.0
            } else if c.value[i] * c.value[i + 1] > 0.0 {
                let pair = |x: &[f64]| [x[i], x[i + 1]];
                hermite(t, wide, pair(&c.log), pair(&c.slope)).0.exp().copysign(c.value[i])
            } else {
                c.value[i] + straight * (c.value[i + 1] - c.value[i])
            };
            miss_total += got - want;
            worst = worst.max((got - want).abs() / want.abs().max(SHARE * gross));
        }
        worst = worst.max(miss_total.abs() / gross);
    }
    worst
}

impl TryFrom<CurvePoints> for BlockCurve {
    type Error = CurveError;
    fn try_from(points: CurvePoints) -> Result<Self, CurveError> {
        let k = &points.knots;
        let wrong = |what: &str| Err(CurveError::Points(what.into()));
        if k.len() < 3 || k[0].span_v != 0.0 {
            return wrong("want three knots or more, the first at 0 V");
        }
        if !k.windows(2).all(|w| w[0].span_v < w[1].span_v) {
            return wrong("knots do not rise");
        }
        if k.iter().any(|k| !k.span_v.is_finite() || k.books.iter().flatten().any(|x| !x.is_finite())) {
            return wrong("a number is not finite");
        }
        if !((k[k.len() - 1].span_v - points.vdd_v).abs() <= 1e-9 * points.vdd_v) {
            return wrong("the last knot is not at the full supply");
        }
        let columns = columns(k);
        Ok(Self { points, columns })
    }
}

impl From<BlockCurve> for CurvePoints {
    fn from(c: BlockCurve) -> Self {
        c.points
    }
}
