//! A cell posed for a question: nodes held at voltages of one's own, a loop cut open at the gates of one of its nets, and
//! exact slopes of what settles. Each solution starts from the one before.

use super::bound::{BoundCell, CellError, Levels, State};
use super::cell::Role;
use crate::circuit::eliminate::solve_pivoting;
use crate::circuit::network::{Element, Network, Node, Volt, bias_of};
use crate::circuit::newton::{SolveOptions, Solver, Workspace};
use crate::circuit::plan::Plan;

/// A cell with some of its nodes in one's own hands.
#[derive(Debug)]
pub struct Posed<'a> {
    cell: &'a BoundCell,
    net: Network,
    plan: Plan,
    held: Vec<bool>,
    v: Vec<Volt>,
    levels: Levels,
    options: &'a SolveOptions,
    label: String,
    work: Workspace,
}

/// How the voltage of one node answers to whatever may change, by the adjoint of the conductance matrix.
#[derive(Debug)]
pub struct Answer {
    /// Weight of the current balance of every node; zero at held ones.
    weight: Vec<f64>,
}

impl<'a> Posed<'a> {
    /// Poses a cell in a state; unknown nodes start from the state's logic values.
    ///
    /// With `cut`, the gates on that net hang on a node of their own, which is held and whose number is
    /// [`Posed::probe`]: the net itself keeps its channels and shows what the loop returns. `hold` lists further nodes to be
    /// held (an output whose current is asked for).
    pub fn new(
        cell: &'a BoundCell,
        state: &State,
        levels: &Levels,
        cut: Option<Node>,
        hold: &[Node],
        options: &'a SolveOptions,
    ) -> Self {
        let mut bits = state.inputs.iter();
        let mut v = cell.held_volts(levels, || {
            if bits.next().copied().unwrap_or(false) { levels.high_v } else { levels.low_v }
        });
        let mut held = cell.cell.held();
        for n in (0..v.len()).filter(|&n| !held[n]) {
            v[n] = cell.guess(state.logic[n], n, levels);
        }
        for &n in hold {
            held[n] = true;
            v[n] = Volt::held(v[n].get());
        }
        let mut net = cell.net.clone();
        if let Some(at) = cut {
            let probe = net.n_nodes;
            net.n_nodes += 1;
            held.push(true);
            v.push(Volt::held(v[at].get()));
            for e in &mut net.elements {
                if let Element::Transistor(p) = e
                    && p.nodes[1] == at
                {
                    p.nodes[1] = probe;
                }
            }
        }
        let plan = Plan::new(&net, &held);
        Self {
            cell,
            net,
            plan,
            held,
            v,
            levels: *levels,
            options,
            label: state.label.clone(),
            work: Workspace::default(),
        }
    }

    /// The node that stands for the gates of the cut net.
    pub fn probe(&self) -> Node {
        self.net.n_nodes - 1
    }

    /// Sets a held node, V.
    pub fn set(&mut self, node: Node, volts: f64) {
        debug_assert!(self.held[node]);
        self.v[node] = Volt::held(volts);
    }

    /// Solves for all other nodes, starting where the last solution was.
    ///
    /// # Errors
    /// No balance within the limits of the options, or a transistor outside the points of its table.
    pub fn solve(&mut self) -> Result<(), CellError> {
        let rails: Vec<f64> = (0..self.v.len()).filter(|&n| self.held[n]).map(|n| self.v[n].rail).collect();
        let vt = self.cell.temp.thermal_voltage();
        let mut solver = Solver::new(&self.net, &self.plan, self.options, vt, &rails);
        solver.solve(&mut self.v, &mut self.work).map_err(|e| CellError::Unbalanced {
            cell: self.cell.cell.name.to_string(),
            state: self.label.clone(),
            temp_c: self.cell.temp.celsius(),
            supply_v: self.levels.supply_v,
            ground_v: self.levels.ground_v,
            node: self.cell.cell.nodes.get(e.node).map_or_else(|| "probe".into(), ToString::to_string),
            residual_a: e.residual_a,
            allowed_a: e.allowed_a,
            steps: e.steps,
        })?;
        // every solution here is part of an answer: guesses beyond a table are refused unless its device says otherwise
        let refused = |e: &Element| match e {
            Element::Transistor(p) => p.device.outside(bias_of(&p.nodes, &self.v)).filter(|o| o.refused),
            _ => None,
        };
        match self.net.elements.iter().find_map(refused) {
            Some(o) => Err(CellError::Outside {
                cell: self.cell.cell.name.to_string(),
                state: self.label.clone(),
                reason: o.to_string(),
            }),
            None => Ok(()),
        }
    }

    /// Voltage of a node, V.
    pub fn voltage(&self, node: Node) -> f64 {
        self.v[node].get()
    }

    /// Current out of a node's holder into the cell, A.
    pub fn current_into(&self, node: Node) -> f64 {
        let mut sum = 0.0;
        for e in self.net.elements.iter().filter(|e| e.nodes().contains(&node)) {
            let s = self.net.stamp(e, &self.v);
            sum += (0..s.n).filter(|&t| s.nodes[t] == node).map(|t| s.current[t]).sum::<f64>();
        }
        sum
    }

    /// How the voltage of an unknown node answers: one adjoint solution `Jᵀ·λ = e` serves every question. `None` where the
    /// conductance matrix is singular or the node is held.
    pub fn answer_of(&self, node: Node) -> Option<Answer> {
        let unknown: Vec<Node> = (0..self.v.len()).filter(|&n| !self.held[n]).collect();
        let n = unknown.len();
        let mut local = vec![usize::MAX; self.v.len()];
        for (i, &k) in unknown.iter().enumerate() {
            local[k] = i;
        }
        if local[node] == usize::MAX {
            return None;
        }
        let mut transposed = vec![0.0; n * n];
        for e in &self.net.elements {
            let s = self.net.stamp(e, &self.v);
            for t in (0..s.n).filter(|&t| local[s.nodes[t]] != usize::MAX) {
                for u in (0..s.n).filter(|&u| local[s.nodes[u]] != usize::MAX) {
                    transposed[local[s.nodes[u]] * n + local[s.nodes[t]]] += s.slope[t][u];
                }
            }
        }
        let mut rhs = vec![0.0; n];
        rhs[local[node]] = 1.0;
        if solve_pivoting(n, &mut transposed, &mut rhs) == 0.0 || rhs.iter().any(|x| !x.is_finite()) {
            return None;
        }
        let mut weight = vec![0.0; self.v.len()];
        for (&k, x) in unknown.iter().zip(&rhs) {
            weight[k] = *x;
        }
        Some(Answer { weight })
    }

    /// dV/dV of the answering node to a held node.
    pub fn to_node(&self, answer: &Answer, held: Node) -> f64 {
        let mut sum = 0.0;
        for e in self.net.elements.iter().filter(|e| e.nodes().contains(&held)) {
            let s = self.net.stamp(e, &self.v);
            for t in 0..s.n {
                let to: f64 = (0..s.n).filter(|&u| s.nodes[u] == held).map(|u| s.slope[t][u]).sum();
                sum -= answer.weight[s.nodes[t]] * to;
            }
        }
        sum
    }

    /// dV/d|Vth| of the answering node to the threshold of each element, 1; zero for what is no transistor. A threshold that
    /// grows is a gate voltage that shrinks.
    pub fn to_thresholds(&self, answer: &Answer) -> Vec<f64> {
        let one = |e: &Element| match e {
            Element::Transistor(p) => {
                let s = self.net.stamp(e, &self.v);
                let gate: f64 = (0..4).map(|t| answer.weight[s.nodes[t]] * s.slope[t][1]).sum();
                gate * p.device.polarity().sign()
            }
            _ => 0.0,
        };
        self.net.elements.iter().map(one).collect()
    }
}

impl BoundCell {
    /// Nodes of the input ports, in their order.
    pub fn input_nodes(&self) -> Vec<Node> {
        self.cell.ports_of(Role::Input).map(|i| self.cell.port_nodes[i]).collect()
    }

    /// W·L of every element, m², all devices in parallel together, from the netlist; `None` where it gives no size.
    pub fn gate_areas_m2(&self) -> Vec<Option<f64>> {
        use super::cell::Part;
        let get = |r: &crate::device::process::Request, name: &str| {
            r.params.iter().rev().find(|(n, _)| &**n == name).map(|(_, v)| *v)
        };
        self.cell
            .parts
            .iter()
            .zip(&self.net.elements)
            .map(|(part, e)| match (part, e) {
                (Part::Transistor(r, _), Element::Transistor(p)) => {
                    Some(get(r, "w")? * get(r, "l")? * p.count)
                }
                _ => None,
            })
            .collect()
    }
}
