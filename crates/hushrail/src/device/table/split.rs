//! From terminal currents at the points to the quantities that are interpolated.

use super::Nodes;
use super::read::Points;
use crate::device::Polarity;
use crate::physics::KB_OVER_Q;
use crate::read::source::{Place, ReadError, Source};

/// Largest share of the digits that a wrong sign is taken for rounding, whatever the file's digits.
const WRONG: f64 = 1e-6;

/// The number nearest to zero between two.
fn least(a: f64, b: f64) -> f64 {
    if a * b <= 0.0 {
        0.0
    } else if a.abs() < b.abs() {
        a
    } else {
        b
    }
}

/// Gate to body, and the shares to gate and to body of an end, from what its gate and body currents add up to.
///
/// `x` is gate to end plus gate to body, `y` end to body plus gate to body, `leak = y − x` as the end's terminal has it: of `x`
/// and `y` the larger is made to fit.
fn shares(x: f64, y: f64, leak: f64) -> (f64, f64, f64) {
    let (x, y) = if x.abs() < y.abs() { (x, x + leak) } else { (y - leak, y) };
    let bulk = least(x, y);
    (bulk, x - bulk, y - bulk)
}

/// Splits the currents; also how many channel currents the digits of the file do not resolve.
///
/// # Errors
/// Currents between drain and source without voltage, a channel current against its voltage, or a line of points along the
/// gate without two channel currents.
pub(super) fn split(
    source: &Source,
    points: &Points,
    polarity: Polarity,
) -> Result<(Nodes, usize), ReadError> {
    let (n_d, n_b) = (points.axes[1].len(), points.axes[2].len());
    let at_zero = |p: usize| p / (n_d * n_b) * (n_d * n_b) + p % n_b;
    // currents are rounded by half a unit of the last digit; a few of them make the channel current
    let resolution = 2.0 * 10f64.powi(1 - i32::try_from(points.digits.min(15)).unwrap_or(15));
    let has_gate = points.currents.iter().flatten().any(|c| c[1] != 0.0);
    let mut out =
        Nodes { ln_g: Vec::new(), to_gate: Vec::new(), to_body: Vec::new(), bulk: Vec::new(), has_gate };
    let mut unresolved = 0;
    for (t, currents) in points.currents.iter().enumerate() {
        let place = |p: usize, found: String, wanted: &str| ReadError::Syntax {
            at: Place::new(&source.path, points.lines[t][p], 1),
            found,
            wanted: wanted.into(),
        };
        let point = |p: usize| {
            let v = |k: usize, i: usize| points.axes[k][i] * polarity.sign();
            let (g, d, b) = (v(0, p / (n_d * n_b)), v(1, p / n_b % n_d), v(2, p % n_b));
            format!("at vg_v = {g}, vd_v = {d}, vb_v = {b}")
        };
        let mut channel = vec![0.0; currents.len()];
        for (p, &[id, ig, ib]) in currents.iter().enumerate() {
            let through = currents[at_zero(p)][0] + id + ig + ib;
            let most = id.abs().max(ig.abs()).max(ib.abs());
            if at_zero(p) == p {
                let next = &currents[p + n_b];
                if through.abs() > 0.01 * most.max((id + next[0] + next[1] + next[2]).abs()) {
                    return Err(place(
                        p,
                        format!("{}: {through:.3e} A flow from drain to source without voltage", point(p)),
                        "want a symmetric transistor with its source at 0 V (equal drain and source areas)",
                    ));
                }
            } else if through > resolution * most {
                channel[p] = through;
            } else if through < -resolution.max(WRONG) * most {
                return Err(place(
                    p,
                    format!(
                        "{}: the channel current is {through:.3e} A, against the drain voltage",
                        point(p)
                    ),
                    "want id_a + ig_a + ib_a to leave what comes out of the source; are signs and digits right?",
                ));
            } else {
                unresolved += 1;
            }
        }
        let vt = points.temps_k[t] * KB_OVER_Q;
        let logs = logs(&points.axes, &channel, vt).map_err(|p| {
            place(
                p,
                format!("{}: fewer than two points along the gate axis have a channel current", point(p)),
                "want gate voltages up to threshold, and enough digits to resolve it beside the leaks",
            )
        })?;
        let n = currents.len();
        let (mut to_gate, mut to_body, mut bulk) = (vec![0.0; n], vec![0.0; n], vec![0.0; n]);
        for (p, &[id, ig, ib]) in currents.iter().enumerate() {
            let zero = at_zero(p);
            if zero == p {
                bulk[p] = least(ig, -ib);
                // both ends alike
                (_, to_gate[p], to_body[p]) = shares(0.5 * (ig - bulk[p]), 0.5 * (-ib - bulk[p]), id);
            } else {
                let vd = points.axes[1][p / n_b % n_d];
                let leak = id - logs[p].exp() * -(-vd / vt).exp_m1();
                (bulk[p], to_gate[p], to_body[p]) = shares(ig - to_gate[zero], -ib - to_body[zero], leak);
            }
        }
        out.ln_g.push(logs);
        out.to_gate.push(to_gate);
        out.to_body.push(to_body);
        out.bulk.push(bulk);
    }
    Ok((out, unresolved))
}

/// `ln G` at every node from channel currents, zero where not resolved; the error is a point of a line that has too few.
fn logs(axes: &[Vec<f64>; 3], ch: &[f64], vt: f64) -> Result<Vec<f64>, usize> {
    let [vg, vd, vb] = axes;
    let (n_d, n_b) = (vd.len(), vb.len());
    let node = |i: usize, j: usize, k: usize| (i * n_d + j) * n_b + k;
    let mut out = vec![0.0; ch.len()];
    for j in 1..n_d {
        let open = -(-vd[j] / vt).exp_m1();
        for k in 0..n_b {
            let known: Vec<usize> = (0..vg.len()).filter(|&i| ch[node(i, j, k)] > 0.0).collect();
            if known.len() < 2 {
                return Err(node(0, j, k));
            }
            let ln = |i: usize| (ch[node(i, j, k)] / open).ln();
            for i in 0..vg.len() {
                out[node(i, j, k)] = if ch[node(i, j, k)] > 0.0 {
                    ln(i)
                } else {
                    // the two nearest known points above, or the last two
                    let from = known.partition_point(|&x| x < i).min(known.len() - 2);
                    let (a, b) = (known[from], known[from + 1]);
                    ln(a) + (ln(b) - ln(a)) * (vg[i] - vg[a]) / (vg[b] - vg[a])
                };
            }
        }
    }
    // at Vds = 0: the parabola through the first points, between the first step being ohmic and G being flat
    for i in 0..vg.len() {
        for k in 0..n_b {
            let y = |j: usize| out[node(i, j, k)];
            let flat = y(1);
            let ohmic = flat + (-(-vd[1] / vt).exp_m1() * vt / vd[1]).ln();
            let guess = match n_d {
                2 => flat,
                3 => y(1) - (y(2) - y(1)) * vd[1] / (vd[2] - vd[1]),
                _ => {
                    let (a, b, c) = (vd[1], vd[2], vd[3]);
                    y(1) * (b * c) / ((a - b) * (a - c))
                        + y(2) * (a * c) / ((b - a) * (b - c))
                        + y(3) * (a * b) / ((c - a) * (c - b))
                }
            };
            out[node(i, 0, k)] = guess.clamp(ohmic, flat);
        }
    }
    Ok(out)
}
