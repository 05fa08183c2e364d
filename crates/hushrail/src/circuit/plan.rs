//! What can be worked out about a network before any voltage: components joined by channels, and their order.

use super::network::{Element, Network, Node};
use crate::device::Polarity;

/// Nodes joined by channels, solved together.
#[derive(Debug, Clone)]
pub struct Component {
    /// Unknown nodes.
    pub nodes: Vec<Node>,
    /// Elements that bring current to them.
    pub elements: Vec<usize>,
    /// Whether the gate of one of its transistors is one of its own nodes other than drain or source of the same
    /// device, or a body is; then its matrix has no sign pattern and is solved with pivoting.
    pub coupled: bool,
}

/// The order of work for one network with a given set of held nodes.
#[derive(Debug, Clone)]
pub struct Plan {
    /// Components so that drivers come before what they drive, as far as there are no loops.
    pub components: Vec<Component>,
    /// Groups of components (by index) that drive one another in a loop; single ones included, in order.
    pub groups: Vec<Vec<usize>>,
    /// Component of each node; `None` for held nodes.
    pub component_of: Vec<Option<usize>>,
    /// Whether several sweeps are needed: loops, or current through gates.
    pub repeats: bool,
    /// Channel polarity at each node.
    pub polarity: Vec<Option<Polarity>>,
}

fn root(parent: &mut [usize], mut i: usize) -> usize {
    while parent[i] != i {
        parent[i] = parent[parent[i]];
        i = parent[i];
    }
    i
}

impl Plan {
    /// Works the plan out; `held[node]` tells which nodes have a given voltage.
    pub fn new(net: &Network, held: &[bool]) -> Self {
        let n = net.n_nodes;
        let mut parent: Vec<usize> = (0..n).collect();
        let mut join = |a: Node, b: Node| {
            if !held[a] && !held[b] {
                let (a, b) = (root(&mut parent, a), root(&mut parent, b));
                parent[a.max(b)] = a.min(b);
            }
        };
        for e in &net.elements {
            match e {
                Element::Transistor(p) => {
                    join(p.nodes[0], p.nodes[2]);
                    join(p.nodes[0], p.nodes[3]);
                    join(p.nodes[2], p.nodes[3]);
                }
                Element::Diode(_, _, m) | Element::Conductance(_, m) => join(m[0], m[1]),
            }
        }
        let mut number = vec![usize::MAX; n];
        let mut raw: Vec<Component> = Vec::new();
        let mut raw_of = vec![None; n];
        for i in (0..n).filter(|&i| !held[i]) {
            let r = root(&mut parent, i);
            if number[r] == usize::MAX {
                number[r] = raw.len();
                raw.push(Component { nodes: Vec::new(), elements: Vec::new(), coupled: false });
            }
            raw[number[r]].nodes.push(i);
            raw_of[i] = Some(number[r]);
        }
        // drives[c] lists the components whose devices have a gate in c
        let mut drives: Vec<Vec<usize>> = vec![Vec::new(); raw.len()];
        let mut gate_current = false;
        for (k, e) in net.elements.iter().enumerate() {
            let mut at: Vec<usize> = Vec::new();
            let (ends, gate): (&[Node], Option<Node>) = match e {
                Element::Transistor(p) => (&p.nodes, Some(p.nodes[1])),
                _ => (e.nodes(), None),
            };
            for (t, &node) in ends.iter().enumerate() {
                if gate.is_some() && t == 1 {
                    continue;
                }
                if let Some(c) = raw_of[node] {
                    at.push(c);
                }
            }
            at.sort_unstable();
            at.dedup();
            if let (Some(g), Element::Transistor(p)) = (gate, e) {
                if let Some(cg) = raw_of[g] {
                    if at.contains(&cg) {
                        raw[cg].coupled |= g != p.nodes[0] && g != p.nodes[2];
                    } else if p.device.has_gate_current() {
                        gate_current = true;
                        raw[cg].elements.push(k);
                    }
                    drives[cg].extend(at.iter().copied().filter(|&c| c != cg));
                }
                if raw_of[p.nodes[3]].is_some() {
                    raw[raw_of[p.nodes[3]].unwrap_or(0)].coupled = true;
                }
            }
            for c in at {
                raw[c].elements.push(k);
            }
        }
        for c in &mut raw {
            c.elements.sort_unstable();
            c.elements.dedup();
        }
        let order = loops_in_order(&drives);
        let mut place = vec![0; raw.len()];
        let mut components = Vec::with_capacity(raw.len());
        let mut groups = Vec::new();
        for g in order {
            let mut group = Vec::new();
            for c in g {
                place[c] = components.len();
                group.push(components.len());
                components.push(raw[c].clone());
            }
            groups.push(group);
        }
        let component_of = raw_of.iter().map(|c| c.map(|c| place[c])).collect();
        let repeats = gate_current || groups.iter().any(|g| g.len() > 1);
        Self { components, groups, component_of, repeats, polarity: net.channel_polarity() }
    }
}

/// Strongly connected groups of a graph, drivers first (Tarjan 1972), without recursion.
fn loops_in_order(next: &[Vec<usize>]) -> Vec<Vec<usize>> {
    let n = next.len();
    let (mut index, mut low) = (vec![usize::MAX; n], vec![0; n]);
    let mut on = vec![false; n];
    let (mut stack, mut out, mut counter) = (Vec::new(), Vec::new(), 0);
    for start in 0..n {
        if index[start] != usize::MAX {
            continue;
        }
        let mut work = vec![(start, 0usize)];
        while let Some(&mut (v, ref mut i)) = work.last_mut() {
            if *i == 0 {
                index[v] = counter;
                low[v] = counter;
                counter += 1;
                stack.push(v);
                on[v] = true;
            }
            if let Some(&w) = next[v].get(*i) {
                *i += 1;
                if index[w] == usize::MAX {
                    work.push((w, 0));
                } else if on[w] {
                    low[v] = low[v].min(index[w]);
                }
                continue;
            }
            work.pop();
            if let Some(&(parent, _)) = work.last() {
                low[parent] = low[parent].min(low[v]);
            }
            if low[v] == index[v] {
                let mut group = Vec::new();
                while let Some(w) = stack.pop() {
                    on[w] = false;
                    group.push(w);
                    if w == v {
                        break;
                    }
                }
                group.sort_unstable();
                out.push(group);
            }
        }
    }
    out.reverse(); // Tarjan closes sinks first
    out
}

#[cfg(test)]
mod tests {
    use super::loops_in_order;

    #[test]
    fn drivers_come_first_and_loops_stay_together() {
        // 0 -> 1 <-> 2 -> 3
        let g = loops_in_order(&[vec![1], vec![2], vec![1, 3], vec![]]);
        assert_eq!(g, vec![vec![0], vec![1, 2], vec![3]]);
    }
}
