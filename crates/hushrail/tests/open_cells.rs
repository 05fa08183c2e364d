//! Cells and a whole block against published numbers of the open SKY130 kit (Apache-2.0), kept beside the project when
//! present. What the tables were made with is data of the comparison: see `examples/accuracy/comparison.toml`.

#![expect(clippy::print_stdout, reason = "skips are said aloud")]

use std::ops::ControlFlow;
use std::path::PathBuf;
use std::process::Command;

use hushrail::batch::study::read_study;
use hushrail::batch::{estimate, load_study};
use hushrail::circuit::newton::SolveOptions;
use hushrail::read::Source;

fn data() -> Option<PathBuf> {
    let dir = PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("../../../shared/data");
    if dir.is_dir() {
        Some(dir)
    } else {
        println!("skipped: the open data set is not beside the project");
        None
    }
}

/// Source: `leakage_by_state.csv` of the data set (published leakage of every state of 167 cells at 16 corners).
/// Bars: every state within 0.3 % at 100 °C; elsewhere medians, and the shares within 2 % that an implementation of the
/// published equations was seen to reach; the rest are rows of the table that a fallback conductance of its program made.
#[test]
fn published_leakage_is_predicted_without_fitted_constants() {
    let Some(dir) = data() else { return };
    let out = std::env::temp_dir().join(format!("hushrail-accuracy-{}.json", std::process::id()));
    // for the whole workspace, so that features are those of a test run and nothing is compiled a second time
    let built = Command::new(env!("CARGO"))
        .args(["build", "--quiet", "--offline", "--locked", "--workspace", "--example", "accuracy"])
        .current_dir(PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("../.."))
        .output()
        .expect("cargo runs");
    assert!(built.status.success(), "{}", String::from_utf8_lossy(&built.stderr));
    let folder = std::env::current_exe().expect("a path");
    let program = folder.ancestors().nth(2).expect("two up").join("examples/accuracy");
    let status = Command::new(program)
        .arg(dir.join("sky130"))
        .arg("--json")
        .arg(&out)
        .output()
        .expect("accuracy runs");
    assert!(status.status.success(), "{}", String::from_utf8_lossy(&status.stderr));
    let json: serde_json::Value =
        serde_json::from_str(&std::fs::read_to_string(&out).expect("result")).expect("JSON");
    std::fs::remove_file(&out).expect("removed");
    let rows = json["statistics"].as_array().expect("corners");
    assert_eq!(rows.len(), 16);
    assert!(json["unmatched"].as_array().expect("list").is_empty());
    for s in rows {
        let corner = s["corner"].as_str().expect("name");
        let get = |k: &str| s[k].as_f64().expect("number");
        assert_eq!(s["states"], 1404, "{corner}");
        assert!(get("median_decades") < 0.0005, "{corner}: median {}", get("median_decades"));
        if corner.contains("_100C") {
            assert!(get("within_0p3_percent") == 1.0, "{corner}: {}", get("within_0p3_percent"));
        } else {
            let bar = if corner.contains("025C") { 0.96 } else { 0.82 };
            assert!(get("within_2_percent") >= bar, "{corner}: {}", get("within_2_percent"));
        }
    }
}

/// Source: README of the two open netlists (sums of the published `cell_leakage_power` over the instances that have one:
/// 100472.602059192 nW for `tt_um_fpu` at ff 100 °C 1.95 V).
#[test]
fn a_real_block_is_predicted_and_a_header_saves_most_of_it() {
    let Some(dir) = data() else { return };
    let d = dir.display();
    let text = format!(
        r#"
[process.ff]
files = ["{d}/sky130/cards/continuous_leak.spice",
  "{d}/sky130/cards/diode/sky130_fd_pr__model__parasitic__diode_ps2nw.model.spice"]
[models]
nfet_01v8 = "sky130_fd_pr__nfet_01v8"
pfet_01v8_hvt = "sky130_fd_pr__pfet_01v8_hvt"
nwell_psub = "sky130_fd_pr__model__parasitic__diode_ps2nw"
[cells]
netlists = ["{d}/sky130/netlists/geometry.spice"]
[[corner]]
name = "ff hot"
process = "ff"
vdd_v = 1.95
temp_c = 100
[[domain]]
name = "fpu"
verilog = ["{d}/netlists/tt_um_fpu.v"]
[domain.policy]
"sky130_fd_sc_hd__fill*" = "zero"
"sky130_fd_sc_hd__tap*" = "zero"
"sky130_fd_sc_hd__decap*" = "zero"
"sky130_ef_sc_hd__*" = "zero"
[[scheme]]
name = "ungated"
[[scheme]]
name = "header"
header = {{ model = "pfet_01v8_hvt", width_m = 2e-3, length_m = 1.5e-7, finger_width_m = 1e-6, overdrive_v = 0.2 }}
[[scheme]]
name = "footer"
footer = {{ model = "nfet_01v8", width_m = 1e-3, length_m = 1.5e-7, finger_width_m = 1e-6, overdrive_v = 0.2 }}
"#
    );
    let study = read_study(&Source::from_text("study.toml", &text)).expect("study");
    let loaded = load_study(&study, "study.toml", &PathBuf::new()).expect("files");
    assert_eq!(loaded.domains[0].summary.instances, 21_823);
    let run = |threads: usize| {
        let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().expect("pool");
        pool.install(|| estimate(&loaded, &SolveOptions::default(), &mut |_, _| ControlFlow::Continue(())))
    };
    let e = run(2);
    assert!(e.failures.is_empty(), "{:?}", e.failures);
    let nw = e.points[0].asleep.power_w * 1e9;
    // 0.5 %: decoupling cells are counted as zero here and carry 1e-12 S·VDD² in the published sum
    assert!((nw / 100_472.602_059_192 - 1.0).abs() < 0.005, "{nw} nW");
    let p = &e.points[1];
    assert!(p.saving > 0.99 && p.asleep.residual < 1e-6, "{}", p.saving);
    // GIDL is on in the p-channel card at this width and off in every n-channel bin
    let called_out = |k: usize| e.points[k].asleep.notes.iter().any(|n| n.code == "no-gidl");
    assert!(!called_out(1) && called_out(2), "a card without GIDL must be called out");
    for threads in [1, 5] {
        assert_eq!(
            serde_json::to_string(&run(threads)).expect("JSON"),
            serde_json::to_string(&e).expect("JSON"),
            "{threads} threads"
        );
    }
}
