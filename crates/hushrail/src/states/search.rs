//! The parked vector that leaks least: annealing in sixty-four chains at once, then single flips until none helps.

#![expect(
    clippy::cast_possible_truncation,
    reason = "nets, gates and states are numbered with 32 bits; readers refuse more"
)]

use std::sync::atomic::{AtomicBool, AtomicUsize, Ordering};

use serde::{Deserialize, Serialize};

use super::circuit::{Circuit, NONE};
use super::values::Values;

/// How long and from where a search goes.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct SearchSpec {
    /// Seed; the same seed gives the same answer.
    #[serde(default)]
    pub seed: u64,
    /// Flips tried in each of the sixty-four chains.
    #[serde(default = "flips")]
    pub flips: u32,
    /// Whether values that registers keep may be chosen too (loaded through a scan chain).
    #[serde(default)]
    pub registers: bool,
}

fn flips() -> u32 {
    2000
}

impl Default for SearchSpec {
    fn default() -> Self {
        Self { seed: 0, flips: flips(), registers: false }
    }
}

/// What a search found.
#[derive(Debug, Clone, PartialEq)]
pub struct Found {
    /// Value of every free net, in the order they were given.
    pub values: Vec<bool>,
    /// What it leaks, in the unit of the leakages given.
    pub leak: f64,
    /// Mean over random vectors: the first of each chain.
    pub random_mean: f64,
    /// Least of those random vectors.
    pub random_least: f64,
    /// Sum of every instance's least leakage: no vector leaks less.
    pub bound: f64,
    /// Flips tried.
    pub tried: u64,
    /// Whether it was stopped before its end.
    pub stopped: bool,
}

impl Found {
    /// How far above the bound, relative to it.
    pub fn gap(&self) -> f64 {
        self.leak / self.bound - 1.0
    }
}

/// Random numbers that depend on seed and counter only (splitmix64 after Steele, Lea and Flood, OOPSLA 2014, from memory).
fn random(seed: u64, counter: u64) -> u64 {
    let mut z =
        seed.wrapping_add(counter.wrapping_mul(0x9e37_79b9_7f4a_7c15)).wrapping_add(0x9e37_79b9_7f4a_7c15);
    z = (z ^ z >> 30).wrapping_mul(0xbf58_476d_1ce4_e5b9);
    z = (z ^ z >> 27).wrapping_mul(0x94d0_49bb_1331_11eb);
    z ^ z >> 31
}

const LANES: usize = 64;

/// Sixty-four vectors with what they leak.
struct Chains<'a> {
    circuit: &'a Circuit,
    /// For each function the leakage of each code.
    leaks: &'a [Vec<f64>],
    values: Values<'a>,
    leak: [f64; LANES],
    /// Nets changed in this step with their words before.
    changed: Vec<(u32, [u64; 2])>,
    /// Position of a net in `changed`, or none.
    place: Vec<u32>,
    /// Gates to look at, one bit each.
    dirty: Vec<u64>,
}

impl<'a> Chains<'a> {
    /// Leakage of one gate in one vector; unknown variables count as the mean of both values.
    fn gate_leak(&self, gate: usize, lane: usize, before: bool) -> f64 {
        let g = &self.circuit.gates[gate];
        let (mut base, mut open) = (0usize, 0usize);
        for (k, &n) in self.circuit.variables(g).iter().enumerate() {
            let rails = match self.place[n as usize] {
                p if before && p != NONE => self.changed[p as usize].1,
                _ => self.values.rails[n as usize],
            };
            match rails.map(|w| w >> lane & 1) {
                [0, 1] => base |= 1 << k,
                [1, 0] => {}
                _ => open |= 1 << k,
            }
        }
        let leaks = &self.leaks[g.function as usize];
        if open == 0 {
            return leaks[base];
        }
        // all subsets of the open variables
        let (mut sum, mut subset) = (0.0, 0usize);
        loop {
            sum += leaks[base | subset];
            subset = subset.wrapping_sub(open) & open;
            if subset == 0 {
                break;
            }
        }
        sum / (1u64 << open.count_ones()) as f64
    }

    fn new(
        circuit: &'a Circuit,
        leaks: &'a [Vec<f64>],
        fixed: &[(u32, bool)],
        free: &[u32],
        seed: u64,
    ) -> Self {
        let mut values = Values::new(circuit);
        for (n, v) in fixed {
            values.set(*n, Some(*v));
        }
        for (k, n) in free.iter().enumerate() {
            let word = random(seed, k as u64);
            values.rails[*n as usize] = [!word, word];
        }
        values.propagate();
        let mut c = Self {
            circuit,
            leaks,
            values,
            leak: [0.0; LANES],
            changed: Vec::new(),
            place: vec![NONE; circuit.net_count],
            dirty: vec![0; circuit.gates.len().div_ceil(64)],
        };
        c.leak = c.total();
        c
    }

    /// What every vector leaks, summed anew.
    fn total(&self) -> [f64; LANES] {
        let mut sum = [0.0; LANES];
        for gate in 0..self.circuit.gates.len() {
            for (lane, s) in sum.iter_mut().enumerate() {
                *s += self.gate_leak(gate, lane, false);
            }
        }
        sum
    }

    fn write(&mut self, net: u32, new: [u64; 2]) {
        let old = self.values.rails[net as usize];
        if old == new {
            return;
        }
        if self.place[net as usize] == NONE {
            self.place[net as usize] = self.changed.len() as u32;
            self.changed.push((net, old));
        }
        self.values.rails[net as usize] = new;
        for &k in self.circuit.readers_of(net) {
            self.dirty[k as usize / 64] |= 1 << (k % 64);
        }
    }

    /// Flips nets in vectors: (net, vectors). Gives what every vector leaks then; [`Chains::keep`] ends the step.
    fn flip(&mut self, flips: &[(u32, u64)]) -> [f64; LANES] {
        for &(net, lanes) in flips {
            let [zero, one] = self.values.rails[net as usize];
            self.write(net, [zero ^ lanes, one ^ lanes]);
        }
        let mut leak = self.leak;
        let mut touched = Vec::new();
        let mut looped = false;
        for word in 0..self.dirty.len() {
            // gates come after their drivers, so that bits set on the way lie ahead
            while self.dirty[word] != 0 {
                let gate = word * 64 + self.dirty[word].trailing_zeros() as usize;
                self.dirty[word] &= self.dirty[word] - 1;
                if gate >= self.circuit.looped_from {
                    looped = true;
                    continue;
                }
                touched.push(gate);
                let g = &self.circuit.gates[gate];
                for (o, &net) in self.circuit.outputs(g).iter().enumerate() {
                    if net != NONE {
                        let new = self.values.output(gate, o);
                        self.write(net, new);
                    }
                }
            }
        }
        if looped {
            touched.extend(self.loops());
        }
        touched.sort_unstable();
        for gate in touched {
            let g = &self.circuit.gates[gate];
            let mut lanes = 0;
            for &n in self.circuit.variables(g) {
                if let Some((_, old)) = self.changed.get(self.place[n as usize] as usize) {
                    let new = self.values.rails[n as usize];
                    lanes |= old[0] ^ new[0] | old[1] ^ new[1];
                }
            }
            while lanes != 0 {
                let lane = lanes.trailing_zeros() as usize;
                lanes &= lanes - 1;
                leak[lane] += self.gate_leak(gate, lane, false) - self.gate_leak(gate, lane, true);
            }
        }
        leak
    }

    /// Works closed loops out from unknown; gives their gates.
    fn loops(&mut self) -> std::ops::Range<usize> {
        let range = self.circuit.looped_from..self.circuit.gates.len();
        let nets: Vec<u32> = range
            .clone()
            .flat_map(|k| self.circuit.outputs(&self.circuit.gates[k]).to_vec())
            .filter(|n| *n != NONE)
            .collect();
        let before: Vec<[u64; 2]> = nets.iter().map(|n| self.values.rails[*n as usize]).collect();
        self.values.settle_loops(&|_| false);
        for (n, old) in nets.iter().zip(before) {
            if self.values.rails[*n as usize] != old && self.place[*n as usize] == NONE {
                self.place[*n as usize] = self.changed.len() as u32;
                self.changed.push((*n, old));
            }
        }
        // readers of loops lie on or behind them
        range
    }

    /// Ends a step: vectors in `lanes` keep it, the others go back.
    fn keep(&mut self, lanes: u64, leak: &[f64; LANES]) {
        for (net, old) in self.changed.drain(..) {
            self.place[net as usize] = NONE;
            let rails = &mut self.values.rails[net as usize];
            for (new, old) in rails.iter_mut().zip(old) {
                *new = *new & lanes | old & !lanes;
            }
        }
        for (lane, (to, from)) in self.leak.iter_mut().zip(leak).enumerate() {
            if lanes >> lane & 1 == 1 {
                *to = *from;
            }
        }
    }
}

/// Searches for values of `free` nets that leak least, with `fixed` nets at their values and everything else unknown.
/// `leaks` has for each function of the circuit the leakage of each code. `done` counts steps of all chains.
///
/// Annealing with a temperature that falls from the spread of random vectors to a thousandth of it (Kirkpatrick, Gelatt and
/// Vecchi, *Science* 220 (1983) 671, from memory); a chain's answer does not depend on the others.
pub fn search(
    circuit: &Circuit,
    leaks: &[Vec<f64>],
    fixed: &[(u32, bool)],
    free: &[u32],
    spec: &SearchSpec,
    done: &AtomicUsize,
    stop: &AtomicBool,
) -> Found {
    let least = |f: &Vec<f64>| f.iter().copied().fold(f64::INFINITY, f64::min);
    let bounds: Vec<f64> = leaks.iter().map(least).collect();
    let bound: f64 = circuit.gates.iter().map(|g| bounds[g.function as usize]).sum();
    let mut c = Chains::new(circuit, leaks, fixed, free, spec.seed);
    let random_mean = c.leak.iter().sum::<f64>() / LANES as f64;
    let random_least = c.leak.iter().copied().fold(f64::INFINITY, f64::min);
    let spread = (c.leak.iter().map(|x| (x - random_mean).powi(2)).sum::<f64>() / LANES as f64)
        .sqrt()
        .max(1e-6 * random_mean);
    let bits = |c: &Chains<'_>, lane: usize| -> Vec<bool> {
        free.iter().map(|n| c.values.rails[*n as usize][1] >> lane & 1 == 1).collect()
    };
    let lane_of = |leak: &[f64; LANES]| (0..LANES).min_by(|a, b| leak[*a].total_cmp(&leak[*b])).unwrap_or(0);
    let first = lane_of(&c.leak);
    let mut best = (c.leak[first], bits(&c, first));
    let mut tried = 0;
    let mut counter = free.len() as u64;
    let mut stopped = false;
    let steps = if free.is_empty() { 0 } else { spec.flips };
    for step in 0..steps {
        if stop.load(Ordering::Relaxed) {
            stopped = true;
            break;
        }
        let heat = spread * 1e-3f64.powf(f64::from(step) / f64::from(steps.max(2) - 1));
        let mut flips: Vec<(u32, u64)> = (0..LANES)
            .map(|lane| {
                counter += 1;
                let k = ((u128::from(random(spec.seed, counter)) * free.len() as u128) >> 64) as usize;
                (free[k], 1u64 << lane)
            })
            .collect();
        // one entry a net
        flips.sort_unstable();
        flips.dedup_by(|b, a| {
            if a.0 == b.0 {
                a.1 |= b.1;
            }
            a.0 == b.0
        });
        let leak = c.flip(&flips);
        let mut lanes = 0u64;
        for lane in 0..LANES {
            counter += 1;
            let chance = random(spec.seed, counter) as f64 / u64::MAX as f64;
            if leak[lane] <= c.leak[lane] || chance < ((c.leak[lane] - leak[lane]) / heat).exp() {
                lanes |= 1 << lane;
            }
        }
        c.keep(lanes, &leak);
        tried += LANES as u64;
        let lane = lane_of(&c.leak);
        if c.leak[lane] < best.0 {
            best = (c.leak[lane], bits(&c, lane));
        }
        done.fetch_add(1, Ordering::Relaxed);
    }
    // from the best one, every single flip, sixty-four at a time, until none helps
    let mut values = best.1;
    let with = |values: &[bool]| -> Vec<(u32, bool)> {
        fixed.iter().copied().chain(free.iter().copied().zip(values.iter().copied())).collect()
    };
    let mut at = Chains::new(circuit, leaks, &with(&values), &[], spec.seed);
    let mut helped = !stopped;
    while helped {
        helped = false;
        for (chunk, own) in free.chunks(LANES).enumerate() {
            if stop.load(Ordering::Relaxed) {
                stopped = true;
                helped = false;
                break;
            }
            let flips: Vec<(u32, u64)> = own.iter().enumerate().map(|(lane, n)| (*n, 1u64 << lane)).collect();
            let leak = at.flip(&flips);
            at.keep(0, &leak);
            tried += own.len() as u64;
            let lane = (0..own.len()).min_by(|a, b| leak[*a].total_cmp(&leak[*b])).unwrap_or(0);
            if leak[lane] < at.leak[0] * (1.0 - 1e-12) {
                let k = chunk * LANES + lane;
                values[k] = !values[k];
                let leak = at.flip(&[(free[k], !0)]);
                at.keep(!0, &leak);
                helped = true;
            }
        }
    }
    // the answer is summed anew, in one order
    let leak = Chains::new(circuit, leaks, &with(&values), &[], spec.seed).leak[0];
    Found { values, leak, random_mean, random_least, bound, tried, stopped }
}
