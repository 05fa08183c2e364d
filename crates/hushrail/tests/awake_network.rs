//! Rails with resistance: against closed forms, against a dense solution, ring against grid.

mod common;

use std::sync::Arc;

use common::process;
use hushrail::awake::Load;
use hushrail::awake::network::{Rail, Segment, Tie, solve_rail};
use hushrail::cell::DeviceShelf;
use hushrail::physics::Kelvin;
use hushrail::standby::SwitchSpec;
use hushrail::standby::switch::{Side, Switch};

fn constant(n: usize, a: f64) -> (usize, Load) {
    (n, Load::Constant { current_a: a })
}

/// One switch at the end of a ladder of equal loads: node k is `I·(N·Rs + r·Σ_{j=1..k}(N − j))` down.
#[test]
fn uniform_ladder_is_the_closed_form() {
    let (n, r, rs, i) = (50, 0.3, 0.5, 1e-3);
    let loads: Vec<_> = (0..n).map(|k| constant(k, i)).collect();
    let s =
        solve_rail(&Rail::ladder(n, r).expect("rail"), &[(0, Tie::Ohm(rs))], &loads, 10.0).expect("solved");
    let mut want = i * n as f64 * rs;
    for (k, d) in s.droop_v.iter().enumerate() {
        if k > 0 {
            want += i * r * (n - k) as f64;
        }
        assert!((d / want - 1.0).abs() < 1e-11, "{k}: {d} {want}");
    }
    assert!(s.worst_node == n - 1 && (s.tie_a[0] - i * n as f64).abs() < 1e-12, "{s:?}");
}

/// Gauss elimination with pivoting, written out.
fn dense(mut a: Vec<Vec<f64>>, mut b: Vec<f64>) -> Vec<f64> {
    let n = b.len();
    for p in 0..n {
        let best = (p..n).max_by(|&i, &j| a[i][p].abs().total_cmp(&a[j][p].abs())).expect("rows");
        a.swap(p, best);
        b.swap(p, best);
        for i in p + 1..n {
            let m = a[i][p] / a[p][p];
            for j in p..n {
                let x = a[p][j];
                a[i][j] -= m * x;
            }
            b[i] -= m * b[p];
        }
    }
    for p in (0..n).rev() {
        let s: f64 = (p + 1..n).map(|j| a[p][j] * b[j]).sum();
        b[p] = (b[p] - s) / a[p][p];
    }
    b
}

#[test]
fn irregular_grids_are_the_dense_solution() {
    for seed in 0..5 {
        let u = |k: usize| common::uniform(seed, k as u64);
        let mut rail = Rail::grid(9, 7, 1.0, 1.0).expect("rail");
        for (k, s) in rail.segments.iter_mut().enumerate() {
            s.ohm = 10f64.powf(3.0 * u(k) - 1.0);
        }
        rail.segments.push(Segment { a: 3, b: 50, ohm: 0.7 });
        let ties: Vec<_> = (0..6).map(|k| (10 * k, Tie::Ohm(0.1 + 5.0 * u(200 + k)))).collect();
        let loads: Vec<_> = (0..63).map(|k| constant(k, 1e-3 * u(300 + k))).collect();
        let s = solve_rail(&rail, &ties, &loads, 10.0).expect("solved");
        let mut a = vec![vec![0.0; 63]; 63];
        for s in &rail.segments {
            let g = 1.0 / s.ohm;
            a[s.a][s.a] += g;
            a[s.b][s.b] += g;
            a[s.a][s.b] -= g;
            a[s.b][s.a] -= g;
        }
        for (n, t) in &ties {
            let Tie::Ohm(r) = t else { unreachable!() };
            a[*n][*n] += 1.0 / r;
        }
        let want = dense(a, loads.iter().map(|(_, l)| l.at(10.0, 10.0)).collect());
        for (d, w) in s.droop_v.iter().zip(&want) {
            assert!((d / w - 1.0).abs() < 1e-9, "seed {seed}: {d} {w}");
        }
    }
}

fn switch(width_m: f64) -> Switch {
    let spec = SwitchSpec { finger_width_m: Some(1e-6), ..SwitchSpec::new("px", width_m, 60e-9) };
    let t = Kelvin::from_celsius(25.0).expect("in range");
    let origin = Arc::from("test");
    Switch::new(&spec, Side::Header, &process(), t, 1.0, &mut DeviceShelf::default(), &origin)
        .expect("switch")
}

/// Real switches: without rail resistance all carry the same, which is one switch of all their width; with it, more droop.
#[test]
fn real_switches_balance_at_every_node() {
    let ties: Vec<_> = (0..4).map(|k| (5 * k, Tie::Switch(switch(1e-5)))).collect();
    let loads: Vec<_> = (0..20).map(|k| (k, Load::Proportional { current_a: 5e-5 })).collect();
    let stiff = solve_rail(&Rail::ladder(20, 1e-6).expect("rail"), &ties, &loads, 1.0).expect("solved");
    let lumped = hushrail::awake::droop::settle_switches(
        &Load::Proportional { current_a: 1e-3 },
        Some(&switch(4e-5)),
        None,
    )
    .expect("settles")
    .0;
    assert!((stiff.worst_v / lumped.droop_v - 1.0).abs() < 1e-4, "{} {}", stiff.worst_v, lumped.droop_v);
    let soft = solve_rail(&Rail::ladder(20, 20.0).expect("rail"), &ties, &loads, 1.0).expect("solved");
    assert!(soft.worst_v > stiff.worst_v && soft.worst_node == 19, "{soft:?}");
    assert!((soft.tie_a.iter().sum::<f64>() / soft.load_a - 1.0).abs() < 1e-9);
    let e = solve_rail(&Rail::ladder(20, 1.0).expect("rail"), &ties, &[constant(7, 1.0)], 1.0)
        .expect_err("too much");
    assert!(e.to_string().contains("no operating point on the rail"), "{e}");
}

/// B9.9 (trend): the same switches around the edge droop more than spread over the grid.
#[test]
fn ring_droops_more_than_grid() {
    let n = 16;
    let rail = Rail::grid(n, n, 0.2, 0.2).expect("rail");
    let loads: Vec<_> = (0..n * n).map(|k| constant(k, 1e-5)).collect();
    let edge: Vec<usize> = (0..n * n)
        .filter(|k| {
            let (r, c) = (k / n, k % n);
            r == 0 || c == 0 || r == n - 1 || c == n - 1
        })
        .collect();
    let spread: Vec<usize> = (0..edge.len()).map(|k| (k * n * n) / edge.len()).collect();
    let worst = |at: &[usize]| {
        let ties: Vec<_> = at.iter().map(|&k| (k, Tie::Ohm(50.0))).collect();
        solve_rail(&rail, &ties, &loads, 1.0).expect("solved").worst_v
    };
    assert!(worst(&edge) > worst(&spread));
}

#[test]
fn what_no_switch_reaches_is_named() {
    let rail = Rail { nodes: 3, segments: vec![Segment { a: 0, b: 1, ohm: 1.0 }] };
    let e =
        solve_rail(&rail, &[(0, Tie::Ohm(1.0))], &[constant(2, 1.0)], 1.0).expect_err("island").to_string();
    assert!(e.contains("no switch reaches node 2"), "{e}");
    let rail = Rail::ladder(3, 1.0).expect("rail");
    for (tie, load, wanted) in [
        ((5, Tie::Ohm(1.0)), constant(0, 1.0), "want nodes 0 to 2"),
        ((0, Tie::Ohm(-1.0)), constant(0, 1.0), "resistance"),
        ((0, Tie::Ohm(1.0)), constant(9, 1.0), "want nodes 0 to 2"),
        ((0, Tie::Ohm(1.0)), constant(0, f64::INFINITY), "load current"),
    ] {
        let e = solve_rail(&rail, &[tie], &[load], 1.0).expect_err(wanted).to_string();
        assert!(e.contains(wanted), "{e}");
    }
    assert!(Rail::ladder(0, 1.0).is_err() && Rail::grid(usize::MAX, 2, 1.0, 1.0).is_err());
    assert!(Rail::ladder(2, 0.0).is_err());
}
