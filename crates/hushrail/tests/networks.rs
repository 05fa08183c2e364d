//! Random networks: Kirchhoff's law at every node, and no current at all when no voltage is applied.

mod common;

use std::sync::Arc;

use common::{AllRegion, uniform};
use hushrail::circuit::network::{Element, Network, Placed, Volt};
use hushrail::circuit::newton::{SolveOptions, Solver, Workspace};
use hushrail::circuit::plan::Plan;
use hushrail::device::{Device, Polarity};

const VT: f64 = 0.026;

/// A random network between ground (node 0) and supply (node 1) with gates at random levels (nodes 2 to 5).
fn network(seed: u64, vdd: f64) -> (Network, Vec<bool>, Vec<Volt>) {
    let mut k = 0;
    let mut u = || {
        k += 1;
        uniform(seed, k)
    };
    #[expect(clippy::cast_possible_truncation, clippy::cast_sign_loss, reason = "small counts")]
    let mut pick = |n: usize| (u() * n as f64) as usize;
    let inner = 1 + pick(8);
    let n = 6 + inner;
    let mut net = Network { n_nodes: n, ..Network::default() };
    let mut v = vec![Volt { rail: 0.0, offset: 0.5 * vdd }; n];
    let mut held = vec![false; n];
    let gates = [0.0, vdd, -0.4 * f64::from(u8::from(vdd > 0.0)), 0.6 * vdd];
    for (i, x) in [0.0, vdd].into_iter().chain(gates).enumerate() {
        v[i] = Volt::held(x);
        held[i] = true;
    }
    let any = |pick: &mut dyn FnMut(usize) -> usize| {
        let x = pick(inner + 2);
        if x < 2 { x } else { x + 4 }
    };
    // every inner node is reached by at least one device
    for node in 6..n {
        for _ in 0..=pick(2) {
            let other = any(&mut pick);
            let polarity = if pick(2) == 0 { Polarity::N } else { Polarity::P };
            let is_a = 10f64.powi(-6 - i32::try_from(pick(2)).expect("small"));
            let leak_s = 10f64.powi(-15 - i32::try_from(pick(8)).expect("small"));
            let vt0_v = 0.2 + 0.1 * pick(4) as f64;
            let device: Arc<dyn Device> =
                Arc::new(AllRegion { is_a, n: 1.3, vt0_v, vt_v: VT, polarity, leak_s });
            let body = usize::from(polarity == Polarity::P);
            let nodes = [node, 2 + pick(4), other, body];
            net.elements.push(Element::Transistor(Placed { device, count: 1.0 + pick(3) as f64, nodes }));
        }
    }
    (net, held, v)
}

fn solve(seed: u64, vdd: f64) -> (Network, Vec<bool>, Vec<Volt>) {
    let (net, held, mut v) = network(seed, vdd);
    let plan = Plan::new(&net, &held);
    let rails: Vec<f64> = v.iter().zip(&held).filter(|(_, h)| **h).map(|(x, _)| x.rail).collect();
    Solver::new(&net, &plan, &SolveOptions::default(), VT, &rails)
        .solve(&mut v, &mut Workspace::default())
        .unwrap_or_else(|e| panic!("network {seed} at {vdd} V: {e:?}"));
    (net, held, v)
}

#[test]
fn currents_balance_at_every_node() {
    // more on request: HUSHRAIL_NETWORKS=1000000 cargo test --release --test networks
    let count = std::env::var("HUSHRAIL_NETWORKS").ok().and_then(|n| n.parse().ok()).unwrap_or(4000);
    for seed in 0..count {
        let (net, held, v) = solve(seed, 0.3 + uniform(seed, 999));
        let (mut sum, mut top, mut noise) = (vec![0.0; v.len()], vec![0.0f64; v.len()], vec![0.0; v.len()]);
        for e in &net.elements {
            let s = net.stamp(e, &v);
            for t in 0..s.n {
                sum[s.nodes[t]] += s.current[t];
                top[s.nodes[t]] = top[s.nodes[t]].max(s.gross[t]);
                // one unit in the last place of a node voltage moves this much current
                noise[s.nodes[t]] += s.slope[t][t].abs() * 3.0 * 4.0 * f64::EPSILON;
            }
        }
        for i in 0..v.len() {
            assert!(
                held[i] || sum[i].abs() <= 2e-9 * top[i] + noise[i],
                "network {seed} node {i}: {}",
                sum[i]
            );
        }
        // what enters at the held nodes leaves at the held nodes
        let total: f64 = sum.iter().zip(&held).filter(|(_, h)| **h).map(|(s, _)| s).sum();
        let most = top.iter().zip(&held).filter(|(_, h)| **h).fold(0.0f64, |m, (t, _)| m.max(*t));
        let slack: f64 = noise.iter().sum();
        assert!(total.abs() <= 1e-7 * most + slack, "network {seed}: {total} of {most}");
    }
}

#[test]
fn no_voltage_means_no_current() {
    for seed in 0..1000 {
        let (net, _, v) = solve(seed, 0.0);
        for e in &net.elements {
            for i in net.stamp(e, &v).current {
                assert!(i.abs() < 1e-30, "network {seed}: {i} A at zero volts");
            }
        }
    }
}
