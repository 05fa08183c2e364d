//! Many switches along a virtual rail that has resistance: local droop of every row, and the worst of them.
//!
//! Current balance at every node, in droops: `G·d + i_switch(d) = i_load(d)` with the Laplacian `G` of the rail (reference sheet
//! A20). With resistances for switches it is linear and symmetric positive definite; with real switches and loads that answer
//! to their rail, Newton's method on the same matrix plus slopes that are never negative. The real rail is taken as stiff.

use nalgebra_sparse::factorization::CscCholesky;
use nalgebra_sparse::{CooMatrix, CscMatrix};
use serde::{Deserialize, Serialize};

use super::droop::Load;
use super::error::{AwakeError, positive, range};
use super::resistance::inside;
use crate::standby::switch::Switch;

/// A piece of rail between two nodes.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct Segment {
    /// One end.
    pub a: usize,
    /// The other.
    pub b: usize,
    /// Resistance, ohm.
    pub ohm: f64,
}

/// A virtual rail: its nodes are numbered from zero.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Rail {
    /// Number of nodes.
    pub nodes: usize,
    /// Its pieces.
    pub segments: Vec<Segment>,
}

/// Most nodes of a rail.
pub const MAX_NODES: usize = 1_000_000;

impl Rail {
    /// A row of nodes.
    ///
    /// # Errors
    /// No node, or a resistance that is not above zero.
    pub fn ladder(nodes: usize, segment_ohm: f64) -> Result<Self, AwakeError> {
        Self::grid(nodes, 1, segment_ohm, segment_ohm)
    }

    /// `columns` × `rows` nodes; node `row·columns + column`.
    ///
    /// # Errors
    /// No node, or a resistance that is not above zero.
    pub fn grid(columns: usize, rows: usize, along_ohm: f64, across_ohm: f64) -> Result<Self, AwakeError> {
        positive("resistance along a row", along_ohm, "ohm")?;
        positive("resistance across rows", across_ohm, "ohm")?;
        let nodes = columns.checked_mul(rows).filter(|n| (1..=MAX_NODES).contains(n));
        let Some(nodes) = nodes else {
            return range("the rail", format!("{columns} × {rows} nodes"), "want 1 to 1000000 nodes");
        };
        let mut segments = Vec::new();
        for r in 0..rows {
            for c in 0..columns {
                let n = r * columns + c;
                if c + 1 < columns {
                    segments.push(Segment { a: n, b: n + 1, ohm: along_ohm });
                }
                if r + 1 < rows {
                    segments.push(Segment { a: n, b: n + columns, ohm: across_ohm });
                }
            }
        }
        Ok(Self { nodes, segments })
    }
}

/// What ties a node to the real rail.
#[derive(Debug, Clone)]
pub enum Tie {
    /// A resistance, ohm.
    Ohm(f64),
    /// A switch; its current is taken from its device at the local droop.
    Switch(Switch),
}

impl Tie {
    /// Current and slope at a droop, A and S.
    fn at(&self, d: f64) -> (f64, f64) {
        match self {
            Self::Ohm(r) => (d / r, 1.0 / r),
            Self::Switch(s) => s.awake_current(d),
        }
    }
}

/// A solved rail.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct RailDroop {
    /// Droop of every node, V.
    pub droop_v: Vec<f64>,
    /// The worst, V.
    pub worst_v: f64,
    /// Where.
    pub worst_node: usize,
    /// Current of every tie, in the order given, A.
    pub tie_a: Vec<f64>,
    /// Current of all loads, A.
    pub load_a: f64,
    /// Newton steps; one where everything is linear.
    pub steps: usize,
    /// Largest current imbalance of a node over the load current.
    pub residual: f64,
}

fn root(parent: &mut [usize], mut i: usize) -> usize {
    while parent[i] != i {
        parent[i] = parent[parent[i]];
        i = parent[i];
    }
    i
}

fn check(rail: &Rail, ties: &[(usize, Tie)], loads: &[(usize, Load)], vdd_v: f64) -> Result<(), AwakeError> {
    positive("supply", vdd_v, "V")?;
    if !(1..=MAX_NODES).contains(&rail.nodes) {
        return range("the rail", format!("{} nodes", rail.nodes), "want 1 to 1000000 nodes");
    }
    let within = |what: &str, n: usize| {
        if n < rail.nodes {
            Ok(())
        } else {
            range(what, format!("at node {n}"), &format!("want nodes 0 to {}", rail.nodes - 1))
        }
    };
    for s in &rail.segments {
        within("a segment", s.a)?;
        within("a segment", s.b)?;
        positive("a segment's resistance", s.ohm, "ohm")?;
    }
    for (n, t) in ties {
        within("a switch", *n)?;
        if let Tie::Ohm(r) = t {
            positive("a switch's resistance", *r, "ohm")?;
        }
    }
    for (n, l) in loads {
        within("a load", *n)?;
        l.check(vdd_v)?;
    }
    // every piece of rail needs a tie
    let mut parent: Vec<usize> = (0..rail.nodes).collect();
    for s in &rail.segments {
        let (a, b) = (root(&mut parent, s.a), root(&mut parent, s.b));
        parent[a.max(b)] = a.min(b);
    }
    let mut tied = vec![false; rail.nodes];
    for (n, _) in ties {
        tied[root(&mut parent, *n)] = true;
    }
    for n in 0..rail.nodes {
        if !tied[root(&mut parent, n)] {
            return Err(AwakeError::Rail {
                reason: format!("no switch reaches node {n}; join it to the rail or give it one"),
            });
        }
    }
    Ok(())
}

/// Imbalance accepted, as a share of the load current.
const BALANCE: f64 = 1e-11;
/// Newton steps before giving up.
const STEPS: usize = 200;

/// Local droops of a rail with its switches and loads.
///
/// # Errors
/// Numbers that cannot be, nodes that no switch reaches, or [`AwakeError::Overloaded`] where the switches do not carry the loads.
pub fn solve_rail(
    rail: &Rail,
    ties: &[(usize, Tie)],
    loads: &[(usize, Load)],
    vdd_v: f64,
) -> Result<RailDroop, AwakeError> {
    check(rail, ties, loads, vdd_v)?;
    let n = rail.nodes;
    let full: f64 = loads.iter().map(|(_, l)| l.at(vdd_v, vdd_v)).sum();
    let yardstick = full.max(f64::MIN_POSITIVE);
    // imbalance and diagonal at a droop
    let balance = |d: &[f64]| {
        let (mut f, mut diagonal) = (vec![0.0; n], vec![0.0; n]);
        for s in &rail.segments {
            let i = (d[s.a] - d[s.b]) / s.ohm;
            f[s.a] += i;
            f[s.b] -= i;
            diagonal[s.a] += 1.0 / s.ohm;
            diagonal[s.b] += 1.0 / s.ohm;
        }
        for (k, t) in ties {
            let (i, g) = t.at(d[*k]);
            f[*k] += i;
            // a saturated switch keeps a little of its chord, so that the matrix stays definite; the balance decides
            diagonal[*k] += g.max(1e-6 * (i / d[*k].max(1e-9)).abs());
        }
        for (k, l) in loads {
            let (v, h) = (vdd_v - d[*k], 1e-6 * vdd_v);
            f[*k] -= l.at(v, vdd_v);
            diagonal[*k] += ((l.at(v, vdd_v) - l.at(v - h, vdd_v)) / h).max(0.0);
        }
        (f, diagonal)
    };
    let size = |f: &[f64]| f.iter().fold(0.0f64, |m, x| m.max(x.abs())) / yardstick;
    let mut d = vec![0.0; n];
    let (mut f, mut diagonal) = balance(&d);
    let mut residual = size(&f);
    let mut steps = 0;
    let mut factor: Option<CscCholesky<f64>> = None;
    while residual > BALANCE && steps < STEPS {
        steps += 1;
        let mut coo = CooMatrix::new(n, n);
        for s in &rail.segments {
            coo.push(s.a, s.b, -1.0 / s.ohm);
            coo.push(s.b, s.a, -1.0 / s.ohm);
        }
        for (k, g) in diagonal.iter().enumerate() {
            coo.push(k, k, *g);
        }
        let csc = CscMatrix::from(&coo);
        let failed = |e: &dyn std::fmt::Display| AwakeError::Rail {
            reason: format!("its matrix cannot be factored: {e}; resistances may lie too far apart"),
        };
        match &mut factor {
            Some(c) => c.refactor(csc.values()).map_err(|e| failed(&e))?,
            None => factor = Some(CscCholesky::factor(&csc).map_err(|e| failed(&e))?),
        }
        let Some(c) = &factor else { break };
        let step = c.solve(&nalgebra_sparse::na::DMatrix::from_column_slice(n, 1, &f));
        // shorter steps until the imbalance falls; droops stay within the supply
        let mut scale = 1.0;
        let mut better = None;
        while scale > 1e-4 {
            let y: Vec<f64> =
                d.iter().zip(step.iter()).map(|(d, s)| (d - scale * s).clamp(0.0, vdd_v)).collect();
            let (fy, gy) = balance(&y);
            let r = size(&fy);
            if r < residual {
                better = Some((y, fy, gy, r));
                break;
            }
            scale *= 0.5;
        }
        let Some((y, fy, gy, r)) = better else { break };
        (d, f, diagonal, residual) = (y, fy, gy, r);
    }
    // what rounding leaves: the rail's own currents may be far above the loads
    let circulating = rail.segments.iter().map(|s| vdd_v / s.ohm).fold(0.0f64, f64::max);
    if residual > 1e-9 + 16.0 * f64::EPSILON * circulating / yardstick {
        let given: f64 = ties.iter().map(|(k, t)| t.at(d[*k]).0).sum();
        let drawn: f64 = loads.iter().map(|(k, l)| l.at(vdd_v - d[*k], vdd_v)).sum();
        let (worst, droop_v) = worst_of(&d);
        return Err(AwakeError::Overloaded {
            at: format!(" on the rail (node {worst} is worst)"),
            load_a: drawn,
            given_a: given,
            droop_v,
            short_a: drawn - given,
            factor: if given > 0.0 { drawn / given } else { f64::MAX },
        });
    }
    for (k, t) in ties {
        if let Tie::Switch(s) = t {
            inside(s.device.outside(s.awake_bias(d[*k])), "awake")?;
        }
    }
    let (worst_node, worst_v) = worst_of(&d);
    Ok(RailDroop {
        worst_v,
        worst_node,
        tie_a: ties.iter().map(|(k, t)| t.at(d[*k]).0).collect(),
        load_a: loads.iter().map(|(k, l)| l.at(vdd_v - d[*k], vdd_v)).sum(),
        droop_v: d,
        steps,
        residual,
    })
}

fn worst_of(d: &[f64]) -> (usize, f64) {
    d.iter().enumerate().fold((0, f64::NEG_INFINITY), |m, (k, v)| if *v > m.1 { (k, *v) } else { m })
}
