//! What a cell computes, seen as switches: logic values of its nodes, and the values it can store.

use crate::circuit::network::{Element, Network, Node};
use crate::circuit::plan::Plan;
use crate::device::Polarity;

/// Value of a node in the switch picture.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, serde::Serialize, serde::Deserialize)]
pub enum Logic {
    /// Joined to a low node.
    Low,
    /// Joined to a high node.
    High,
    /// Joined to both.
    Fight,
    /// Joined to neither.
    Floating,
}

impl Logic {
    /// From a bit.
    pub fn of(bit: bool) -> Self {
        if bit { Self::High } else { Self::Low }
    }
    /// As a bit, when it is one.
    pub fn bit(self) -> Option<bool> {
        match self {
            Self::Low => Some(false),
            Self::High => Some(true),
            _ => None,
        }
    }
}

/// The switch picture of one cell.
pub struct Switches<'a> {
    net: &'a Network,
    plan: &'a Plan,
}

/// Nets that close loops: what must be guessed to know the rest. More than this many cannot be enumerated.
pub const MAX_LOOP_NETS: usize = 16;

impl<'a> Switches<'a> {
    /// The switch picture of a network.
    pub fn new(net: &'a Network, plan: &'a Plan) -> Self {
        Self { net, plan }
    }

    /// Evaluates the nodes of a component with the gate values in `value`.
    fn component(&self, c: usize, held: &[Option<bool>], value: &mut [Logic]) {
        let comp = &self.plan.components[c];
        let on = |k: &usize| match &self.net.elements[*k] {
            Element::Transistor(p) => {
                let gate = value[p.nodes[1]];
                let conducts = match p.device.polarity() {
                    Polarity::N => gate == Logic::High,
                    Polarity::P => gate == Logic::Low,
                };
                conducts.then_some((p.nodes[0], p.nodes[2]))
            }
            Element::Conductance(_, n) => Some((n[0], n[1])),
            Element::Diode(..) => None,
        };
        let edges: Vec<(Node, Node)> = comp.elements.iter().filter_map(on).collect();
        let mut low = vec![false; self.net.n_nodes];
        let mut high = low.clone();
        for (n, h) in held.iter().enumerate() {
            match h {
                Some(true) => high[n] = true,
                Some(false) => low[n] = true,
                None => {}
            }
        }
        loop {
            let mut changed = false;
            for &(a, b) in &edges {
                for (x, y) in [(a, b), (b, a)] {
                    // a held node does not change
                    if held[y].is_none() {
                        if low[x] && !low[y] {
                            low[y] = true;
                            changed = true;
                        }
                        if high[x] && !high[y] {
                            high[y] = true;
                            changed = true;
                        }
                    }
                }
            }
            if !changed {
                break;
            }
        }
        for &n in &comp.nodes {
            value[n] = match (low[n], high[n]) {
                (true, false) => Logic::Low,
                (false, true) => Logic::High,
                (true, true) => Logic::Fight,
                (false, false) => Logic::Floating,
            };
        }
    }

    /// Nets that gate something inside the loop they belong to.
    pub fn loop_nets(&self) -> Vec<Node> {
        let mut nets = Vec::new();
        for g in &self.plan.groups {
            let looped = g.len() > 1 || self.plan.components[g[0]].coupled;
            if !looped {
                continue;
            }
            for &c in g {
                for &k in &self.plan.components[c].elements {
                    if let Element::Transistor(p) = &self.net.elements[k] {
                        let gate = p.nodes[1];
                        if self.plan.component_of[gate].is_some_and(|x| g.contains(&x))
                            && !nets.contains(&gate)
                        {
                            nets.push(gate);
                        }
                    }
                }
            }
        }
        nets.sort_unstable();
        nets
    }

    /// Every consistent assignment of logic values with the held nodes given: one without storage, several with.
    ///
    /// A net in a fight may take either value; the node voltages decide later. `Err` gives the number of loop nets when
    /// there are too many to enumerate.
    pub fn fixpoints(&self, held: &[Option<bool>]) -> Result<Vec<Vec<Logic>>, usize> {
        let nets = self.loop_nets();
        if nets.len() > MAX_LOOP_NETS {
            return Err(nets.len());
        }
        let base: Vec<Logic> = held.iter().map(|h| h.map_or(Logic::Floating, Logic::of)).collect();
        let mut found: Vec<Vec<Logic>> = Vec::new();
        for guess in 0..1u32 << nets.len() {
            let mut value = base.clone();
            let want = |i: usize| Logic::of(guess >> i & 1 == 1);
            let mut consistent = true;
            for g in &self.plan.groups {
                for (i, &n) in nets.iter().enumerate() {
                    if self.plan.component_of[n].is_some_and(|c| g.contains(&c)) {
                        value[n] = want(i);
                    }
                }
                for &c in g {
                    self.component(c, held, &mut value);
                    for (i, &n) in nets.iter().enumerate() {
                        if self.plan.component_of[n] == Some(c) {
                            consistent &= value[n] == want(i) || value[n] == Logic::Fight;
                            value[n] = want(i);
                        }
                    }
                    if !consistent {
                        break;
                    }
                }
                if !consistent {
                    break;
                }
            }
            if consistent && !found.contains(&value) {
                found.push(value);
            }
        }
        if found.is_empty() {
            // no static value in the switch picture: one sweep from nothing known is the start
            let mut value = base;
            for g in &self.plan.groups {
                for &c in g {
                    self.component(c, held, &mut value);
                }
            }
            found.push(value);
        }
        Ok(found)
    }
}
