//! A network of devices between nodes, some of them held at given voltages.

use std::sync::Arc;

use crate::device::diode::Diode;
use crate::device::dual::Dual;
use crate::device::{Bias, Branches, Device, Mechanism, Polarity, Terminal, per_terminal};

/// Number of a node.
pub type Node = usize;

/// A node voltage as a reference (one of the held voltages) and an offset from it, V. The difference of two nodes near
/// the same rail keeps all its digits, so that an on device which carries femtoamperes is resolved.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Volt {
    /// Reference.
    pub rail: f64,
    /// Offset.
    pub offset: f64,
}

impl Volt {
    /// A held voltage.
    pub fn held(v: f64) -> Self {
        Self { rail: v, offset: 0.0 }
    }
    /// The voltage.
    pub fn get(self) -> f64 {
        self.rail + self.offset
    }
    /// This minus another.
    pub fn over(self, o: Self) -> f64 {
        (self.rail - o.rail) + (self.offset - o.offset)
    }
}

/// A transistor in its place.
#[derive(Debug, Clone)]
pub struct Placed {
    /// What it is.
    pub device: Arc<dyn Device>,
    /// How many in parallel.
    pub count: f64,
    /// Drain, gate, source, body.
    pub nodes: [Node; 4],
}

/// One element.
#[derive(Debug, Clone)]
pub enum Element {
    /// A transistor.
    Transistor(Placed),
    /// A diode from anode to cathode; number in parallel.
    Diode(Diode, f64, [Node; 2]),
    /// A resistor, S.
    Conductance(f64, [Node; 2]),
}

/// Currents into an element at its terminals with derivatives to the terminal voltages.
pub struct Stamp {
    /// Number of terminals used.
    pub n: usize,
    /// Their nodes.
    pub nodes: [Node; 4],
    /// Current into each, A.
    pub current: [f64; 4],
    /// Largest single branch current at each, A: what meets there before it cancels.
    pub gross: [f64; 4],
    /// `slope[t][u]`: derivative of the current into terminal `t` to the voltage of terminal `u`, S.
    pub slope: [[f64; 4]; 4],
}

/// The network; node voltages are kept outside.
#[derive(Debug, Clone, Default)]
pub struct Network {
    /// Number of nodes.
    pub n_nodes: usize,
    /// Elements.
    pub elements: Vec<Element>,
    /// Conductance put across every drain and source junction and every diode, S; zero unless a comparison asks for it.
    pub floor_s: f64,
}

impl Element {
    /// Nodes of the element.
    pub fn nodes(&self) -> &[Node] {
        match self {
            Self::Transistor(p) => &p.nodes,
            Self::Diode(_, _, n) | Self::Conductance(_, n) => n,
        }
    }
}

/// The bias of a placed transistor.
pub fn bias_of(nodes: &[Node; 4], v: &[Volt]) -> Bias<f64> {
    let s = v[nodes[Terminal::Source as usize]];
    Bias {
        vgs: v[nodes[Terminal::Gate as usize]].over(s),
        vds: v[nodes[Terminal::Drain as usize]].over(s),
        vbs: v[nodes[Terminal::Body as usize]].over(s),
    }
}

/// Largest branch at drain, gate, source and body, of magnitudes.
fn gross(b: &Branches<f64>) -> [f64; 4] {
    let db = b.impact_db.max(b.gidl_db).max(b.junction_db);
    let sb = b.impact_sb.max(b.gidl_sb).max(b.junction_sb);
    [
        b.channel_ds.max(db).max(b.gate_gd),
        b.gate_gd.max(b.gate_gs).max(b.gate_gb),
        b.channel_ds.max(sb).max(b.gate_gs),
        db.max(sb).max(b.gate_gb),
    ]
}

impl Network {
    /// Currents and slopes of one element.
    pub fn stamp(&self, e: &Element, v: &[Volt]) -> Stamp {
        match e {
            Element::Transistor(p) => {
                let bias = bias_of(&p.nodes, v);
                let b = p.device.branches_dual(bias.dual());
                let t = b.terminals();
                let gross = gross(&b.map(|x| x.v.abs() * p.count));
                let mut s = Stamp { n: 4, nodes: p.nodes, current: [0.0; 4], gross, slope: [[0.0; 4]; 4] };
                for (i, x) in t.iter().enumerate() {
                    s.current[i] = x.v * p.count;
                    s.slope[i] = per_terminal(x.d).map(|d| d * p.count);
                }
                if self.floor_s > 0.0 {
                    let g = self.floor_s * p.count;
                    for end in [Terminal::Drain as usize, Terminal::Source as usize] {
                        let b = Terminal::Body as usize;
                        let i = g * v[p.nodes[end]].over(v[p.nodes[b]]);
                        s.current[end] += i;
                        s.current[b] -= i;
                        s.slope[end][end] += g;
                        s.slope[end][b] -= g;
                        s.slope[b][end] -= g;
                        s.slope[b][b] += g;
                    }
                }
                s
            }
            Element::Diode(d, count, nodes) => {
                let x = d.current(Dual::<1>::variable(v[nodes[0]].over(v[nodes[1]]), 0));
                let floor = self.floor_s * count;
                let across = v[nodes[0]].over(v[nodes[1]]);
                Self::two(*nodes, x.v * count + floor * across, x.d[0] * count + floor)
            }
            Element::Conductance(g, nodes) => Self::two(*nodes, g * v[nodes[0]].over(v[nodes[1]]), *g),
        }
    }

    fn two(nodes: [Node; 2], i: f64, g: f64) -> Stamp {
        let mut s = Stamp {
            n: 2,
            nodes: [nodes[0], nodes[1], 0, 0],
            current: [i, -i, 0.0, 0.0],
            gross: [i.abs(), i.abs(), 0.0, 0.0],
            slope: [[0.0; 4]; 4],
        };
        s.slope[0] = [g, -g, 0.0, 0.0];
        s.slope[1] = [-g, g, 0.0, 0.0];
        s
    }

    /// Currents into an element at each terminal, split by mechanism in the order of [`Mechanism::ALL`].
    pub fn by_mechanism(&self, e: &Element, v: &[Volt]) -> [[f64; 4]; 5] {
        let mut out = [[0.0; 4]; 5];
        match e {
            Element::Transistor(p) => {
                let b: Branches<f64> = p.device.branches(bias_of(&p.nodes, v));
                for (row, m) in out.iter_mut().zip(Mechanism::ALL) {
                    *row = b.terminals_of(m).map(|i| i * p.count);
                }
                if self.floor_s > 0.0 {
                    let g = self.floor_s * p.count;
                    let d = g * v[p.nodes[0]].over(v[p.nodes[3]]);
                    let s = g * v[p.nodes[2]].over(v[p.nodes[3]]);
                    out[4] = [d, 0.0, s, -(d + s)];
                }
            }
            Element::Diode(d, count, n) => {
                let i = d.current(v[n[0]].over(v[n[1]])) * count;
                out[3] = [i, -i, 0.0, 0.0];
                let f = self.floor_s * count * v[n[0]].over(v[n[1]]);
                out[4] = [f, -f, 0.0, 0.0];
            }
            Element::Conductance(g, n) => {
                let i = g * v[n[0]].over(v[n[1]]);
                out[0] = [i, -i, 0.0, 0.0];
            }
        }
        out
    }

    /// Polarity of the channels that end on each node: n only, p only, or mixed (`None`).
    pub fn channel_polarity(&self) -> Vec<Option<Polarity>> {
        let mut seen = vec![(false, false); self.n_nodes];
        for e in &self.elements {
            if let Element::Transistor(p) = e {
                for end in [p.nodes[0], p.nodes[2]] {
                    match p.device.polarity() {
                        Polarity::N => seen[end].0 = true,
                        Polarity::P => seen[end].1 = true,
                    }
                }
            }
        }
        seen.iter()
            .map(|s| match s {
                (true, false) => Some(Polarity::N),
                (false, true) => Some(Polarity::P),
                _ => None,
            })
            .collect()
    }
}
