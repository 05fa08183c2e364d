//! DC node voltages: Newton's method on Kirchhoff's current law, component by component, drivers first.
//!
//! In weak inversion the current of a channel is linear in `w = exp(−V/vt)`, so steps are taken in `w` (n-channel nodes) or
//! `exp(+V/vt)` (p-channel nodes): `V −= vt·ln(1 − dV/vt)`, at most 8 vt at once. Matrices of a component with its gates
//! given are column-dominant M-matrices and are eliminated without cancellation ([`super::eliminate`]). Convergence is
//! judged on the current balance of every node relative to the largest current that meets there, never on the step.
//!
//! Fallbacks, in order, each counted: pseudo-transient Newton, node-by-node bisection, and for loops of components one
//! joint Newton. What still does not converge is an error with its residual.

use super::eliminate::{solve_excess, solve_pivoting};
use super::network::{Network, Node, Volt};
use super::plan::{Component, Plan};
use crate::device::Polarity;

/// Tolerances and limits of the solver.
#[derive(Debug, Clone, PartialEq)]
#[non_exhaustive]
pub struct SolveOptions {
    /// Largest imbalance of a node relative to the largest current meeting there.
    pub relative: f64,
    /// Newton steps before a fallback is tried.
    pub newton_steps: usize,
    /// Steps of the pseudo-transient fallback.
    pub transient_steps: usize,
    /// Sweeps over components that drive one another.
    pub sweeps: usize,
}

impl Default for SolveOptions {
    fn default() -> Self {
        Self { relative: 1e-9, newton_steps: 100, transient_steps: 800, sweeps: 60 }
    }
}

/// No balance was found.
#[derive(Debug, Clone, PartialEq)]
pub struct Unbalanced {
    /// The node that is furthest off.
    pub node: Node,
    /// Its imbalance, A.
    pub residual_a: f64,
    /// What was allowed, A.
    pub allowed_a: f64,
    /// Steps taken.
    pub steps: usize,
}

/// How the solution was reached.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Effort {
    /// Newton steps in all.
    pub steps: usize,
    /// Times the pseudo-transient was needed.
    pub transient: usize,
    /// Times bisection was needed.
    pub bisection: usize,
    /// Times a loop needed one joint Newton.
    pub joint: usize,
}

/// Scratch memory, one per worker.
#[derive(Debug, Default)]
pub struct Workspace {
    local: Vec<usize>,
    a: Vec<f64>,
    excess: Vec<f64>,
    f: Vec<f64>,
    top: Vec<f64>,
    noise: Vec<f64>,
}

/// Solves one network.
pub struct Solver<'a> {
    net: &'a Network,
    plan: &'a Plan,
    options: &'a SolveOptions,
    /// Thermal voltage that scales the steps, V.
    vt: f64,
    rails: Vec<f64>,
    /// Work done so far.
    pub effort: Effort,
}

impl<'a> Solver<'a> {
    /// A solver for `net` with the held voltages in `rails` (any order, repeats allowed).
    pub fn new(net: &'a Network, plan: &'a Plan, options: &'a SolveOptions, vt: f64, rails: &[f64]) -> Self {
        let mut r = rails.to_vec();
        r.sort_by(f64::total_cmp);
        r.dedup();
        Self { net, plan, options, vt, rails: r, effort: Effort::default() }
    }

    /// Brings `v` to balance; held nodes stay.
    ///
    /// # Errors
    /// No balance within the limits of the options.
    pub fn solve(&mut self, v: &mut [Volt], w: &mut Workspace) -> Result<(), Unbalanced> {
        let outer = if self.plan.repeats { self.options.sweeps } else { 1 };
        for sweep in 0..outer {
            let mut moved = false;
            for group in &self.plan.groups {
                moved |= self.group(group, v, w)?;
            }
            if !moved && sweep > 0 || !self.plan.repeats {
                return Ok(());
            }
        }
        let all: Vec<usize> = (0..self.plan.components.len()).collect();
        self.joint(&all, v, w)
    }

    fn group(&mut self, group: &[usize], v: &mut [Volt], w: &mut Workspace) -> Result<bool, Unbalanced> {
        let plan = self.plan;
        if let [one] = group {
            return self.component(&plan.components[*one], v, w);
        }
        let start = v.to_vec();
        let mut ever = false;
        for _ in 0..self.options.sweeps {
            let mut moved = false;
            for &c in group {
                if let Ok(m) = self.component(&plan.components[c], v, w) {
                    moved |= m;
                } else {
                    v.copy_from_slice(&start);
                    self.joint(group, v, w)?;
                    return Ok(true);
                }
            }
            ever |= moved;
            if !moved {
                return Ok(ever);
            }
        }
        self.joint(group, v, w)?;
        Ok(true)
    }

    fn merged(&self, group: &[usize]) -> Component {
        let mut c = Component { nodes: Vec::new(), elements: Vec::new(), coupled: true };
        for &g in group {
            c.nodes.extend(&self.plan.components[g].nodes);
            c.elements.extend(&self.plan.components[g].elements);
        }
        c.elements.sort_unstable();
        c.elements.dedup();
        c
    }

    fn joint(&mut self, group: &[usize], v: &mut [Volt], w: &mut Workspace) -> Result<(), Unbalanced> {
        self.effort.joint += 1;
        let c = self.merged(group);
        self.component(&c, v, w).map(|_| ())
    }

    /// Whether the operating point is one the circuit stays in: the determinant of the conductance matrix of every loop is
    /// positive. (One unstable loop has exactly one negative eigenvalue.)
    pub fn is_stable(&self, v: &[Volt], w: &mut Workspace) -> bool {
        self.plan.groups.iter().filter(|g| g.len() > 1).all(|g| {
            let c = self.merged(g);
            let n = c.nodes.len();
            self.assemble(&c, v, w);
            w.fill_diagonal(n);
            let mut rhs = vec![0.0; n];
            solve_pivoting(n, &mut w.a[..n * n], &mut rhs) > 0.0
        })
    }

    /// Fills matrix, excess and imbalance of a component at `v`.
    fn assemble(&self, c: &Component, v: &[Volt], w: &mut Workspace) {
        let n = c.nodes.len();
        w.local.clear();
        w.local.resize(self.net.n_nodes, usize::MAX);
        for (i, &node) in c.nodes.iter().enumerate() {
            w.local[node] = i;
        }
        for (buf, len) in
            [(&mut w.a, n * n), (&mut w.excess, n), (&mut w.f, n), (&mut w.top, n), (&mut w.noise, n)]
        {
            buf.clear();
            buf.resize(len, 0.0);
        }
        for &k in &c.elements {
            let s = self.net.stamp(&self.net.elements[k], v);
            let (lo, hi) = s.nodes[..s.n]
                .iter()
                .fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), &m| (l.min(v[m].rail), h.max(v[m].rail)));
            let reach = s.nodes[..s.n].iter().fold(0.0f64, |m, &x| m.max(v[x].offset.abs()));
            // nodes of one rail differ by their offsets alone
            let same_ends = v[s.nodes[0]].rail == v[s.nodes[if s.n == 4 { 2 } else { 1 }]].rail;
            let span = reach + if same_ends { 0.0 } else { hi - lo };
            for t in 0..s.n {
                let row = w.local[s.nodes[t]];
                if row == usize::MAX {
                    for u in 0..s.n {
                        let col = w.local[s.nodes[u]];
                        if col != usize::MAX {
                            w.excess[col] -= s.slope[t][u];
                        }
                    }
                    continue;
                }
                w.f[row] += s.current[t];
                w.top[row] = w.top[row].max(s.gross[t]);
                w.noise[row] += s.slope[t][t].abs() * span * (4.0 * f64::EPSILON);
                for u in 0..s.n {
                    let col = w.local[s.nodes[u]];
                    if col != usize::MAX && col != row {
                        w.a[row * n + col] += s.slope[t][u];
                    }
                }
            }
        }
    }

    /// The node furthest from balance: index, residual, allowed.
    fn worst(&self, n: usize, w: &Workspace) -> (usize, f64, f64) {
        let mut worst = (0, 0.0, f64::MIN_POSITIVE);
        for i in 0..n {
            let allowed = self.options.relative * w.top[i] + w.noise[i] + 1e-40;
            let f = w.f[i].abs();
            if !(f / allowed <= worst.1 / worst.2) {
                worst = (i, f, allowed);
            }
        }
        worst
    }

    /// Newton on one component; returns whether anything had to move.
    fn component(&mut self, c: &Component, v: &mut [Volt], w: &mut Workspace) -> Result<bool, Unbalanced> {
        let start: Vec<Volt> = c.nodes.iter().map(|&i| v[i]).collect();
        let reset = |v: &mut [Volt]| {
            for (&i, s) in c.nodes.iter().zip(&start) {
                v[i] = *s;
            }
        };
        if let Ok(moved) = self.newton(c, v, w) {
            return Ok(moved);
        }
        self.effort.transient += 1;
        reset(v);
        if self.transient(c, v, w).is_ok() {
            return Ok(true);
        }
        self.effort.bisection += 1;
        reset(v);
        self.bisect(c, v, w);
        self.newton(c, v, w).map(|_| true)
    }

    fn newton(&mut self, c: &Component, v: &mut [Volt], w: &mut Workspace) -> Result<bool, Unbalanced> {
        let n = c.nodes.len();
        let mut worst = (0, f64::INFINITY, 0.0);
        for step in 0..self.options.newton_steps {
            self.assemble(c, v, w);
            worst = self.worst(n, w);
            if worst.1 <= worst.2 {
                return Ok(step > 0);
            }
            self.effort.steps += 1;
            for x in &mut w.f[..n] {
                *x = -*x;
            }
            let solved = if c.coupled || w.has_wrong_sign(n) {
                w.fill_diagonal(n);
                solve_pivoting(n, &mut w.a[..n * n], &mut w.f[..n]) != 0.0
            } else {
                solve_excess(n, &mut w.a[..n * n], &mut w.excess[..n], &mut w.f[..n])
            };
            if !solved || w.f[..n].iter().any(|x| !x.is_finite()) {
                break;
            }
            for (k, &node) in c.nodes.iter().enumerate() {
                let dv = self.limited(w.f[k], self.plan.polarity[node]);
                v[node].offset += dv;
                self.rereference(&mut v[node]);
            }
        }
        Err(Self::unbalanced(c, worst, self.options.newton_steps))
    }

    fn unbalanced(c: &Component, worst: (usize, f64, f64), steps: usize) -> Unbalanced {
        Unbalanced { node: c.nodes[worst.0], residual_a: worst.1, allowed_a: worst.2, steps }
    }

    /// Follows the circuit's own motion `C·dV/dt = −F(V)` with equal capacitances by implicit Euler, the time step growing
    /// until it is Newton's method. Unlike Newton it leaves a state that has just ceased to exist, because the step is only
    /// taken while `C/h + J` keeps the sign that the start of the motion has.
    fn transient(&mut self, c: &Component, v: &mut [Volt], w: &mut Workspace) -> Result<bool, Unbalanced> {
        let n = c.nodes.len();
        let mut rate = f64::NAN;
        let mut worst = (0, f64::INFINITY, 0.0);
        for _ in 0..self.options.transient_steps {
            self.assemble(c, v, w);
            worst = self.worst(n, w);
            if worst.1 <= worst.2 {
                return Ok(true);
            }
            if rate.is_nan() {
                // the first explicit step would move the fastest node by 50 mV
                rate = w.f[..n].iter().fold(0.0f64, |m, f| m.max(f.abs())) / 0.05;
            }
            if !(rate > 0.0) || w.f[..n].iter().chain(&w.a[..n * n]).any(|x| !x.is_finite()) {
                break;
            }
            w.fill_diagonal(n);
            let (a, f) = (w.a[..n * n].to_vec(), w.f[..n].to_vec());
            loop {
                self.effort.steps += 1;
                w.a[..n * n].copy_from_slice(&a);
                for k in 0..n {
                    w.a[k * n + k] += rate;
                    w.f[k] = -f[k];
                }
                let sign = solve_pivoting(n, &mut w.a[..n * n], &mut w.f[..n]);
                let far = w.f[..n].iter().fold(0.0f64, |m, x| m.max(x.abs()));
                if sign > 0.0 && far.is_finite() && far < 0.1 {
                    if far < 0.03 {
                        rate *= 0.3;
                    }
                    break;
                }
                rate *= 3.0;
                if !(rate < 1e60) {
                    return Err(Self::unbalanced(c, worst, self.options.transient_steps));
                }
            }
            for (k, &node) in c.nodes.iter().enumerate() {
                v[node].offset += w.f[k];
                self.rereference(&mut v[node]);
            }
        }
        Err(Self::unbalanced(c, worst, self.options.transient_steps))
    }

    /// The step in volts from the Newton step, taken in the variable in which channels are linear.
    fn limited(&self, dv: f64, polarity: Option<Polarity>) -> f64 {
        let x = dv / self.vt;
        let in_w = |x: f64| if x > 0.9 { 8.0 } else { -(-x).ln_1p() };
        self.vt
            * match polarity {
                Some(Polarity::N) => in_w(x),
                Some(Polarity::P) => -in_w(-x),
                None => x.signum() * x.abs().min(8.0),
            }
    }

    /// Counts a node from the held voltage it has come near.
    fn rereference(&self, v: &mut Volt) {
        if v.offset.abs() < 0.05 {
            return;
        }
        let at = v.get();
        for &r in &self.rails {
            if (at - r).abs() < 0.5 * v.offset.abs() {
                *v = Volt { rail: r, offset: (v.rail - r) + v.offset };
            }
        }
        // nothing settles far outside the held voltages
        let (lo, hi) =
            (self.rails.first().copied().unwrap_or(0.0), self.rails.last().copied().unwrap_or(0.0));
        if at > hi + 1.5 {
            *v = Volt { rail: hi, offset: 1.5 };
        } else if at < lo - 1.5 {
            *v = Volt { rail: lo, offset: -1.5 };
        }
    }

    /// Node by node, the balance of each found by bisection with the others held; a few sweeps.
    fn bisect(&mut self, c: &Component, v: &mut [Volt], w: &mut Workspace) {
        let (lo, hi) =
            (self.rails.first().copied().unwrap_or(0.0), self.rails.last().copied().unwrap_or(0.0));
        for _ in 0..12 {
            for (k, &node) in c.nodes.iter().enumerate() {
                let (mut a, mut b) = (lo - 0.7, hi + 0.7);
                for _ in 0..44 {
                    let mid = 0.5 * (a + b);
                    v[node] = Volt { rail: lo, offset: mid - lo };
                    self.assemble(c, v, w);
                    self.effort.steps += 1;
                    if w.f[k] > 0.0 { b = mid } else { a = mid }
                }
                self.rereference(&mut v[node]);
            }
        }
    }
}

impl Workspace {
    fn fill_diagonal(&mut self, n: usize) {
        for j in 0..n {
            let others: f64 = (0..n).filter(|&k| k != j).map(|k| self.a[k * n + j]).sum();
            self.a[j * n + j] = self.excess[j] - others;
        }
    }
    fn has_wrong_sign(&self, n: usize) -> bool {
        (0..n).any(|i| (0..n).any(|j| i != j && self.a[i * n + j] > 0.0))
            || self.excess[..n].iter().any(|e| *e < 0.0)
    }
}
