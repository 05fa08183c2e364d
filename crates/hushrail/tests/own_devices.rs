//! Netlists on compact and tabulated devices: named in a study, bound into cells, with sensitivities.

mod common;

use std::sync::Arc;

use common::CELLS;
use hushrail::batch::load::Library;
use hushrail::batch::study::read_study;
use hushrail::cell::{BoundCell, DeviceShelf, Levels};
use hushrail::circuit::newton::{SolveOptions, Workspace};
use hushrail::device::Bias;
use hushrail::device::process::Request;
use hushrail::device::sensitivity::Knob;
use hushrail::physics::Kelvin;
use hushrail::read::{Place, Source};

const STUDY: &str = r#"
[process.tt]
[process.ff.device.nx]
generic = "generic 28 nm n"
[device.nx]
generic = "generic 65 nm n"
[device.px]
generic = "generic 65 nm p"
[cells]
netlists = ["cells.sp"]
[[corner]]
name = "c"
process = "tt"
vdd_v = 1.1
temp_c = 25
"#;

fn library() -> Library {
    let dir = std::env::temp_dir().join(format!("hushrail-own-{}", std::process::id()));
    std::fs::create_dir_all(&dir).expect("scratch folder");
    std::fs::write(dir.join("cells.sp"), CELLS).expect("scratch file");
    let study = read_study(&Source::from_text("s.toml", STUDY)).expect("study");
    Library::load(&study, &dir).expect("library")
}

#[test]
fn every_state_of_every_cell_is_solved_on_generic_devices() {
    let lib = library();
    let cells = lib.cells(&[], &mut Vec::new()).expect("cells");
    assert_eq!(cells.len(), 3);
    for process in lib.processes.values() {
        for temp_c in [-40.0, 25.0, 125.0] {
            let temp = Kelvin::from_celsius(temp_c).expect("in range");
            for cell in &cells {
                let bound =
                    BoundCell::new(cell, process, temp, 0.0, &mut DeviceShelf::default()).expect("bound");
                assert!(bound.has_gidl);
                let states = bound.states().expect("states");
                assert_eq!(
                    states.len(),
                    match &*cell.name {
                        "inv" => 2,
                        "nand2" => 4,
                        _ => 6,
                    }
                );
                for s in &states {
                    let levels = Levels::powered(1.1);
                    let got = bound
                        .solve(s, &levels, &SolveOptions::default(), &mut Workspace::default())
                        .expect("solved");
                    let all: f64 = got.ports.iter().flatten().sum();
                    let most = got.ports.iter().flatten().fold(0.0f64, |m, i| m.max(i.abs()));
                    assert!(
                        most > 1e-14 && most < 1e-5 && all.abs() < 1e-8 * most,
                        "{} {}",
                        cell.name,
                        s.label
                    );
                    assert!(got.stable);
                }
            }
        }
    }
}

#[test]
fn sensitivities_of_a_compact_device_equal_differences() {
    let lib = library();
    let p = &lib.processes["tt"];
    let request = |w: f64, l: f64, dv: f64| Request {
        model: "px".into(),
        params: vec![("w".into(), w), ("l".into(), l), ("delvto".into(), dv)],
        at: Place::new(&Arc::from("test"), 1, 1),
    };
    let bias = Bias { vgs: 0.05, vds: -1.0, vbs: 0.1 };
    let at = |w: f64, l: f64, dv: f64, t: f64| {
        let t = Kelvin::from_celsius(t).expect("in range");
        p.transistor(&request(w, l, dv), t, &mut Vec::new())
            .expect("device")
            .device
            .branches(bias)
            .terminals()[0]
    };
    let temp = Kelvin::from_celsius(60.0).expect("in range");
    let d = p.varied(&request(1e-6, 70e-9, 0.0), temp, &mut Vec::new()).expect("varied").terminals(bias)[0];
    for (knob, h, up, down) in [
        (Knob::Threshold, 1e-5, at(1e-6, 70e-9, -1e-5, 60.0), at(1e-6, 70e-9, 1e-5, 60.0)),
        (Knob::Width, 1e-10, at(1.0001e-6, 70e-9, 0.0, 60.0), at(0.9999e-6, 70e-9, 0.0, 60.0)),
        (Knob::Length, 1e-12, at(1e-6, 70.001e-9, 0.0, 60.0), at(1e-6, 69.999e-9, 0.0, 60.0)),
        (Knob::Temperature, 1e-3, at(1e-6, 70e-9, 0.0, 60.001), at(1e-6, 70e-9, 0.0, 59.999)),
    ] {
        let slope = (up - down) / (2.0 * h);
        assert!((d.d[knob as usize] / slope - 1.0).abs() < 1e-5, "{knob:?}: {} {slope}", d.d[knob as usize]);
    }
}
