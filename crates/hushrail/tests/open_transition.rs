//! A block of open SKY130 cells put to sleep and woken, when the open data set stands beside the project. Nothing here is
//! compared with silicon: what is held is what must be so whatever the numbers are.

use std::ops::ControlFlow;
use std::path::PathBuf;

use hushrail::batch::study::read_study;
use hushrail::batch::{TransitionSpec, load_study, transitions};
use hushrail::circuit::newton::SolveOptions;
use hushrail::read::Source;
use hushrail::transition::{CycleCosts, GateCapacitance, LadderSpec, RailCapacitance, WakeSpec};

#[test]
fn a_block_of_open_cells_sleeps_wakes_and_breaks_even() {
    let dir = PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("../../../shared/data/sky130");
    if !dir.is_dir() {
        println!("skipped: the open data set is not beside the project");
        return;
    }
    let d = dir.display();
    let folder = std::env::temp_dir().join(format!("hushrail-open-transition-{}", std::process::id()));
    std::fs::create_dir_all(&folder).expect("folder");
    let counts =
        "cell,count\nsky130_fd_sc_hd__inv_1,500\nsky130_fd_sc_hd__nand2_1,400\nsky130_fd_sc_hd__nor2_1,300\n";
    std::fs::write(folder.join("n.csv"), counts).expect("file");
    let text = format!(
        r#"
[process.ff]
files = ["{d}/cards/continuous_leak.spice",
  "{d}/cards/diode/sky130_fd_pr__model__parasitic__diode_ps2nw.model.spice"]
[models]
nfet_01v8 = "sky130_fd_pr__nfet_01v8"
pfet_01v8_hvt = "sky130_fd_pr__pfet_01v8_hvt"
nwell_psub = "sky130_fd_pr__model__parasitic__diode_ps2nw"
[cells]
netlists = ["{d}/netlists/geometry.spice"]
[[corner]]
name = "mild"
process = "ff"
vdd_v = 1.8
temp_c = 25
[[corner]]
name = "hot"
process = "ff"
vdd_v = 1.95
temp_c = 100
[[domain]]
name = "block"
counts = "n.csv"
[[scheme]]
name = "header"
header = {{ model = "pfet_01v8_hvt", width_m = 2e-4, length_m = 1.5e-7, finger_width_m = 1e-6, overdrive_v = 0.2, diffusion_m = 2.8e-7 }}
pump_efficiency = 0.5
[[scheme]]
name = "footer"
footer = {{ model = "nfet_01v8", width_m = 1e-4, length_m = 1.5e-7, finger_width_m = 1e-6, overdrive_v = 0.2, diffusion_m = 2.8e-7 }}
pump_efficiency = 0.5
"#
    );
    let study = read_study(&Source::from_text("study.toml", &text)).expect("study");
    let loaded = load_study(&study, "study.toml", &folder).expect("files");
    std::fs::remove_dir_all(&folder).expect("removed");
    let spec = TransitionSpec {
        // of the order of a gate's output; the test's own number
        rail: RailCapacitance { per_instance_f: Some(3e-15), ..Default::default() },
        costs: CycleCosts {
            gate: GateCapacitance { overlap_f_m: Some(5e-10), ..Default::default() },
            ..Default::default()
        },
        wake: WakeSpec { gate_slew_s: 1e-10, ..Default::default() },
        ladder: Some(LadderSpec { peak_a: 3e-3, segments: 5 }),
        ..Default::default()
    };
    let run = |spec: &TransitionSpec| {
        transitions(&loaded, spec, &SolveOptions::default(), &mut |_, _| ControlFlow::Continue(()))
    };
    let found = run(&spec);
    assert!(found.failures.is_empty(), "{:?}", found.failures);
    assert_eq!(found.points.len(), 4);
    for p in &found.points {
        let what = format!("{} {}", p.scheme, p.corner);
        let (c, w, b) = (&p.collapse, &p.wake, &p.break_even);
        println!(
            "{what}: rest {:.4} V, time constant {:.3e} s, ready {:.3e} s, peak {:.3e} A, pays from {:?} s, ratio {:?}",
            c.rest_span_v, c.time_constant_s, w.ready_s, w.peak_a, b.time_s, b.ratio
        );
        assert!(c.rest_span_v < 0.2 * p.vdd_v && c.ledger_mismatch < 1e-6, "{what}: {}", c.ledger_mismatch);
        assert!(c.span_v.windows(2).all(|x| x[1] <= x[0] + 1e-9), "{what}: the rail only falls");
        assert!(w.peak_a <= 3e-3 && w.charge_mismatch < 1e-6, "{what}");
        // a charge takes its time at a limited current
        assert!(w.ready_s >= p.rail_f * (0.95 * p.vdd_v - c.rest_span_v) / 3e-3, "{what}");
        assert!(b.time_s.is_some_and(|t| t > 0.0) && b.ratio.is_some_and(|r| r > 1.0), "{what}");
        // n-channel cards of this kit have GIDL switched off
        assert_eq!(w.notes.iter().any(|n| n.code == "no-gidl"), p.scheme == "footer", "{what}");
        assert!(p.stress.notes.iter().any(|n| n.code == "oxide-caution"), "{what}");
        assert!(
            (p.stress.oxide_v - (p.vdd_v + 0.2 - 0.0)).abs() < 0.2 * p.vdd_v,
            "{what}: {}",
            p.stress.oxide_v
        );
    }
    for pair in found.points.chunks(2) {
        let [mild, hot] = [&pair[0], &pair[1]].map(|p| p.break_even.time_s.expect("pays"));
        assert!(hot < mild / 3.0, "hot sleeps pay sooner (Usami et al. 2010): {mild:e} {hot:e}");
    }
    let missing = run(&TransitionSpec { rail: RailCapacitance::default(), ..spec });
    assert!(missing.points.is_empty() && missing.failures[0].reason.contains("transitions are not computed"));
}
