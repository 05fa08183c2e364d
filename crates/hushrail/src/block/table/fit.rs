//! Leakage of a cell over supply and temperature, fitted to tables of corners.
//!
//! Two forms are tried. One term, subthreshold current with drain-induced barrier lowering,
//!
//! `ln I = 2 ln(T / 300 K) + a + b / vt + c V / vt`,
//!
//! in which `b` is the threshold of the weakest path over its slope factor, negative, and `c` the lowering over the slope
//! factor (Y. Taur, T. H. Ning, Fundamentals of Modern VLSI Devices, 2nd ed., Cambridge 2009, ch. 3; the T² is the vt² of the
//! prefactor). Two terms add a current that hardly depends on temperature, `exp(d - e / V)`: tunnelling, band to band
//! under the gate or through the oxide, whose exponent goes as one over the field (K. Roy, S. Mukhopadhyay,
//! H. Mahmoodi-Meimand, Proc. IEEE 91 (2003) 305). A form counts by the median of its misses at corners left out one by one;
//! priors as wide as textbooks allow keep what the corners do not determine where it belongs. Rows that miss by far pull with a
//! bounded force (P. J. Huber, Ann. Math. Statist. 35 (1964) 73): published tables hold such rows.

use crate::physics::Kelvin;

/// Current of a cell at one supply and temperature.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct FitPoint {
    /// Supply, V.
    pub voltage_v: f64,
    /// Temperature.
    pub temp: Kelvin,
    /// Current, A.
    pub current_a: f64,
}

/// Numbers of a form at most.
const MOST: usize = 5;

/// Least points for the form of two terms.
const POINTS_FOR_TWO: usize = 8;

/// Steps of the search for the form of two terms.
const STEPS: usize = 60;

/// Middle and width of what is taken for possible, by number: `a`, `b` in V, `c`, `d`, `e` in V.
///
/// Thresholds from 0.1 to 0.9 V over slope factors of 1.2 to 1.6; barrier lowering up to 0.2 V/V; tunnelling exponents up to
/// 20 V, about 3e9 V/m times three oxide thicknesses. Prefactors are open.
const PRIOR: [(f64, f64); MOST] = [(0.0, 1e3), (-0.4, 0.2), (0.06, 0.08), (0.0, 1e3), (10.0, 10.0)];

/// Miss in ln(current) from which the pull of a point grows no more.
const FAR: f64 = 0.2;

/// Share of the spread that a prior's width stands for: the scatter of tables in ln(current).
const PRIOR_SCATTER: f64 = 0.1;

/// A fitted law.
#[derive(Debug, Clone, PartialEq)]
pub struct LeakageFit {
    /// Terms: one or two.
    pub terms: usize,
    /// The numbers of the form.
    pub numbers: [f64; MOST],
    /// Their covariance; rows of numbers a form does not have are zero.
    pub covariance: [[f64; MOST]; MOST],
    /// Median of the misses of ln(current) at corners left out one by one.
    pub median: f64,
    /// Scatter of ln(current) about the law, from corners left out one by one.
    pub scatter: f64,
    /// Largest of those misses, in ln(current).
    pub worst: f64,
    /// Least supply of the data, V.
    pub lowest_v: f64,
}

fn form(terms: usize, n: &[f64; MOST], voltage_v: f64, temp: Kelvin) -> (f64, [f64; MOST]) {
    let vt = temp.thermal_voltage();
    let first = 2.0 * (temp.get() / 300.0).ln() + n[0] + n[1] / vt + n[2] * voltage_v / vt;
    let slopes = [1.0, 1.0 / vt, voltage_v / vt];
    if terms == 1 {
        return (first, [slopes[0], slopes[1], slopes[2], 0.0, 0.0]);
    }
    let second = n[3] - n[4] / voltage_v;
    let most = first.max(second);
    let (x, y) = ((first - most).exp(), (second - most).exp());
    let (w, v) = (x / (x + y), y / (x + y));
    let g = [w * slopes[0], w * slopes[1], w * slopes[2], v, -v / voltage_v];
    (most + (x + y).ln(), g)
}

/// Inverse of a symmetric positive matrix of the first `n` rows, by Gauss and Jordan with the largest pivot on the diagonal.
fn inverse(mut m: [[f64; MOST]; MOST], n: usize) -> Option<[[f64; MOST]; MOST]> {
    let mut out = [[0.0; MOST]; MOST];
    for (i, row) in out.iter_mut().enumerate().take(n) {
        row[i] = 1.0;
    }
    for k in 0..n {
        let p = (k..n).max_by(|a, b| m[*a][k].abs().total_cmp(&m[*b][k].abs()))?;
        m.swap(k, p);
        out.swap(k, p);
        let pivot = m[k][k];
        if !(pivot.abs() > 0.0) {
            return None;
        }
        for j in 0..n {
            m[k][j] /= pivot;
            out[k][j] /= pivot;
        }
        for i in 0..n {
            if i != k {
                let f = m[i][k];
                for j in 0..n {
                    m[i][j] -= f * m[k][j];
                    out[i][j] -= f * out[k][j];
                }
            }
        }
    }
    Some(out)
}

/// Sum of squares over points and priors, the normal matrix and the right side at given numbers.
fn normal(terms: usize, x: &[f64; MOST], points: &[FitPoint]) -> (f64, [[f64; MOST]; MOST], [f64; MOST]) {
    let n = if terms == 1 { 3 } else { MOST };
    let mut sum = 0.0;
    let mut m = [[0.0; MOST]; MOST];
    let mut right = [0.0; MOST];
    for p in points {
        let (ln, g) = form(terms, x, p.voltage_v, p.temp);
        let miss = p.current_a.ln() - ln;
        let weight = (FAR / miss.abs().max(FAR)).min(1.0);
        sum += if weight < 1.0 { FAR * (2.0 * miss.abs() - FAR) } else { miss * miss };
        for i in 0..n {
            right[i] += weight * g[i] * miss;
            for j in 0..n {
                m[i][j] += weight * g[i] * g[j];
            }
        }
    }
    for i in 0..n {
        let weight = (PRIOR_SCATTER / PRIOR[i].1).powi(2);
        let miss = PRIOR[i].0 - x[i];
        sum += weight * miss * miss;
        right[i] += weight * miss;
        m[i][i] += weight;
    }
    (sum, m, right)
}

/// Least squares by Levenberg and Marquardt.
fn search(terms: usize, start: [f64; MOST], points: &[FitPoint]) -> Option<[f64; MOST]> {
    let n = if terms == 1 { 3 } else { MOST };
    let mut x = start;
    let (mut sum, mut m, mut right) = normal(terms, &x, points);
    let mut damping = 1e-3;
    for _ in 0..STEPS {
        let mut damped = m;
        for (i, row) in damped.iter_mut().enumerate().take(n) {
            row[i] *= 1.0 + damping;
        }
        let inverse = inverse(damped, n)?;
        let mut next = x;
        for i in 0..n {
            next[i] += (0..n).map(|j| inverse[i][j] * right[j]).sum::<f64>();
        }
        let (s, mm, r) = normal(terms, &next, points);
        if s <= sum {
            let done = sum - s <= 1e-12 * sum;
            (x, sum, m, right, damping) = (next, s, mm, r, damping * 0.2);
            if done {
                break;
            }
        } else {
            damping *= 5.0;
        }
    }
    x.iter().all(|v| v.is_finite()).then_some(x)
}

fn fitted(terms: usize, points: &[FitPoint]) -> Option<[f64; MOST]> {
    let mean = points.iter().map(|p| p.current_a.ln()).sum::<f64>() / points.len() as f64;
    let start = [mean + 15.0, PRIOR[1].0, PRIOR[2].0, mean, PRIOR[4].0];
    let one = search(1, start, points)?;
    if terms == 1 {
        return Some(one);
    }
    // the second term starts as what the coldest corners have
    let coldest = points.iter().map(|p| p.temp.get()).fold(f64::INFINITY, f64::min);
    let cold: Vec<&FitPoint> = points.iter().filter(|p| p.temp.get() < coldest + 1.0).collect();
    let level =
        cold.iter().map(|p| p.current_a.ln() + PRIOR[4].0 / p.voltage_v).sum::<f64>() / cold.len() as f64;
    let hot: Vec<FitPoint> = points.iter().filter(|p| p.temp.get() > coldest + 1.0).copied().collect();
    let first = if hot.is_empty() { one } else { search(1, start, &hot)? };
    search(2, [first[0], first[1], first[2], level - 0.7, PRIOR[4].0], points)
}

impl LeakageFit {
    /// Fits the points; `None` when there are too few of them to tell a supply or a temperature apart.
    ///
    /// At least three points, with two supplies and two temperatures among them; one to spare for the scatter.
    pub fn new(points: &[FitPoint]) -> Option<Self> {
        let spread = |f: fn(&FitPoint) -> f64| {
            let (lo, hi) = points
                .iter()
                .map(f)
                .fold((f64::INFINITY, f64::NEG_INFINITY), |(lo, hi), v| (lo.min(v), hi.max(v)));
            hi - lo
        };
        if points.len() < 4 || spread(|p| p.voltage_v) < 0.01 || spread(|p| p.temp.get()) < 5.0 {
            return None;
        }
        let mut best: Option<(usize, f64, f64, f64)> = None;
        for terms in [1, 2] {
            if terms == 2 && points.len() < POINTS_FOR_TWO {
                break;
            }
            let mut misses = Vec::new();
            for left in 0..points.len() {
                let rest: Vec<FitPoint> =
                    points.iter().enumerate().filter(|(i, _)| *i != left).map(|(_, p)| *p).collect();
                let Some(x) = fitted(terms, &rest) else { continue };
                let p = &points[left];
                misses.push(p.current_a.ln() - form(terms, &x, p.voltage_v, p.temp).0);
            }
            if misses.len() < points.len() {
                continue;
            }
            let scatter = (misses.iter().map(|m| m * m).sum::<f64>() / misses.len() as f64).sqrt();
            let worst = misses.iter().fold(0.0, |w: f64, m| w.max(m.abs()));
            let mut sizes: Vec<f64> = misses.iter().map(|m| m.abs()).collect();
            sizes.sort_by(f64::total_cmp);
            let median = sizes[sizes.len() / 2];
            if best.is_none_or(|(_, least, ..)| median < least) {
                best = Some((terms, median, scatter, worst));
            }
        }
        let (terms, median, scatter, worst) = best?;
        let numbers = fitted(terms, points)?;
        let (_, m, _) = normal(terms, &numbers, points);
        let mut covariance = inverse(m, if terms == 1 { 3 } else { MOST })?;
        for v in covariance.iter_mut().flatten() {
            *v *= scatter * scatter;
        }
        let lowest_v = points.iter().map(|p| p.voltage_v).fold(f64::INFINITY, f64::min);
        Some(Self { terms, numbers, covariance, median, scatter, worst, lowest_v })
    }

    /// ln(current / A) and how far it may be off, one sigma with the scatter of single corners.
    pub fn ln_current(&self, voltage_v: f64, temp: Kelvin) -> (f64, f64) {
        let (ln, g) = form(self.terms, &self.numbers, voltage_v, temp);
        (ln, (self.along(&g) + self.scatter * self.scatter).sqrt())
    }

    /// ln(I(v) / I(from)) at one temperature, and one sigma of it.
    pub fn ln_ratio(&self, voltage_v: f64, from_v: f64, temp: Kelvin) -> (f64, f64) {
        let (a, g) = form(self.terms, &self.numbers, voltage_v, temp);
        let (b, h) = form(self.terms, &self.numbers, from_v, temp);
        let mut d = g;
        for (d, h) in d.iter_mut().zip(h) {
            *d -= h;
        }
        // two corners each scatter; close to each other they do so together
        let apart = ((voltage_v - from_v).abs() / (0.1 * from_v.abs()).max(1e-9)).min(1.0);
        (a - b, (self.along(&d) + 2.0 * apart * self.scatter * self.scatter).sqrt())
    }

    fn along(&self, g: &[f64; MOST]) -> f64 {
        let rows = self.covariance.iter().zip(g);
        rows.map(|(row, gi)| gi * row.iter().zip(g).map(|(c, gj)| c * gj).sum::<f64>()).sum::<f64>().max(0.0)
    }
}
