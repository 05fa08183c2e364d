//! Off devices in series, and a rail between block and switch, against closed references.
//!
//! Values B4 and B8 of the project's reference sheet: computed there in double precision from the printed law by an
//! independent program; they check the solver, not silicon. The N-stack invariant is exact algebra (the terms telescope).

mod common;

use std::sync::Arc;

use common::{Gate, Ideal, Symmetric, chain, r1};
use hushrail::device::{Device, Polarity};

fn stack(device: &Ideal, widths: &[f64], vdd: f64) -> (Vec<f64>, f64, f64) {
    let make = |w: f64| Arc::new(Ideal { width: w, ..device.clone() }) as Arc<dyn Device>;
    let off = vec![Gate::At(0.0); widths.len()];
    let (nodes, i) = chain(widths.iter().map(|w| make(*w)).collect(), &off, vdd, device.vt_v);
    let (_, one) = chain(vec![make(1.0)], &off[..1], vdd, device.vt_v);
    (nodes, i, one / i)
}

fn close(got: f64, want: f64, rel: f64, what: &str) {
    assert!((got / want - 1.0).abs() < rel, "{what}: {got} instead of {want}");
}

#[test]
fn two_stack_reference_values_are_met() {
    // vdd, Vx mV, stack factor (B4.1, B4.4, B4.5, B4.6); printed to six digits
    for (vdd, vx, x) in [
        (1.0, 73.0105, 13.769366),
        (0.5, 41.5079, 4.441140),
        (0.8, 59.8328, 8.577305),
        (1.2, 86.6364, 22.463038),
    ] {
        let (nodes, _, factor) = stack(&r1(), &[1.0, 1.0], vdd);
        close(nodes[0] * 1e3, vx, 2e-6, "Vx");
        close(factor, x, 1e-6, "factor");
    }
    // unequal widths (B4.7, B4.8)
    let (nodes, i, _) = stack(&r1(), &[2.0, 1.0], 1.0);
    close(nodes[0] * 1e3, 90.1509, 2e-6, "Vx");
    close(i, 7.850009e-12, 1e-6, "I");
    let (nodes, i, _) = stack(&r1(), &[1.0, 2.0], 1.0);
    close(nodes[0] * 1e3, 56.5820, 2e-6, "Vx");
    close(i, 1.310667e-11, 1e-6, "I");
}

#[test]
fn deeper_stacks_and_other_laws_are_met() {
    // B4.10, B4.11
    let (nodes, _, x) = stack(&r1(), &[1.0; 3], 1.0);
    close(x, 27.359525, 1e-6, "N = 3");
    close(nodes[0] * 1e3, 20.490, 5e-5, "lowest node");
    close(nodes[1] * 1e3, 92.126, 5e-5, "upper node");
    let (_, _, x) = stack(&r1(), &[1.0; 4], 1.0);
    close(x, 40.970799, 1e-6, "N = 4");
    // no DIBL, no body effect (B4.12)
    let plain = Ideal { eta: 0.0, kg: 0.0, ..r1() };
    for (n, want) in [(2, 1.791906), (3, 2.554869), (4, 3.304903)] {
        close(stack(&plain, &vec![1.0; n], 1.0).2, want, 1e-6, "plain");
    }
    // kg = n − 1 with DIBL (B4.14)
    let body = Ideal { kg: 0.4, ..r1() };
    for (n, want) in [(2, 14.456912), (3, 29.617289), (4, 45.059072)] {
        close(stack(&body, &vec![1.0; n], 1.0).2, want, 1e-6, "body");
    }
    // hot (B4.15): stacks help less
    let hot = Ideal { vt_v: 34.309912e-3, ..r1() };
    close(stack(&hot, &[1.0; 2], 1.0).2, 7.708162, 1e-6, "hot");
}

#[test]
fn n_equal_symmetric_devices_leak_one_nth() {
    let vt = 25.851999786e-3;
    for slope in [1.1, 1.4, 1.7] {
        let d = || {
            Arc::new(Symmetric { i0_a: 1e-12, n: slope, vt_v: vt, polarity: Polarity::N, leak_s: 0.0 })
                as Arc<dyn Device>
        };
        let (_, one) = chain(vec![d()], &[Gate::At(0.0)], 2.0, vt);
        for n in 2..=8u32 {
            let (nodes, i) = chain((0..n).map(|_| d()).collect(), &vec![Gate::At(0.0); n as usize], 2.0, vt);
            close(one / i, f64::from(n), 1e-9, "invariant");
            // nodes at −vT·ln(1 − j/N)
            for (j, v) in nodes.iter().enumerate() {
                close(*v, -vt * (1.0 - (j + 1) as f64 / f64::from(n)).ln(), 1e-9, "node");
            }
        }
    }
}

#[test]
fn rail_between_block_and_footer_settles_as_computed() {
    // Ws, Vts, Vod, kg, Vv, reduction (B8); block of 100 um with Vt 0.30
    for (ws, vts, vod, kg, vv, reduction) in [
        (50.0, 0.30, 0.0, 0.0, 0.625435, 5.629745),
        (50.0, 0.30, 0.0, 0.2, 0.312718, 13.357793),
        (50.0, 0.30, 0.05, 0.0, 0.874044, 11.275722),
        (50.0, 0.35, 0.0, 0.0, 0.874044, 11.275722),
        (10.0, 0.30, 0.0, 0.0, 0.910840, 12.793431),
        (200.0, 0.30, 0.0, 0.0, 0.374565, 2.814872),
        (50.0, 0.45, 0.0, 0.0, 0.996599, 127.359563),
        (50.0, 0.45, 0.10, 0.0, 0.999795, 2000.527526),
        (50.0, 0.45, 0.0, 0.2, 0.687717, 299.001997),
        (50.0, 0.45, 0.10, 0.2, 0.931172, 2418.174776),
    ] {
        let block = Ideal { width: 100.0, vt0_v: 0.30, kg, ..r1() };
        let switch = Ideal { width: ws, vt0_v: vts, kg, ..r1() };
        let (_, open) = chain(vec![Arc::new(block.clone())], &[Gate::OnSource], 1.0, block.vt_v);
        close(open, 3.982040e-8, 1e-6, "ungated");
        let (nodes, i) =
            chain(vec![Arc::new(block), Arc::new(switch)], &[Gate::OnSource, Gate::At(-vod)], 1.0, r1().vt_v);
        close(nodes[0], vv, 2e-6, "Vv");
        close(open / i, reduction, 2e-6, "reduction");
    }
}
