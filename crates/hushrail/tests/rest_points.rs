//! Domains at rest: books that balance, states that are lost and said to be.

mod common;

use std::ops::ControlFlow;
use std::path::PathBuf;

use common::{CARDS, CELLS};
use hushrail::batch::study::read_study;
use hushrail::batch::{Estimate, estimate, load_study};
use hushrail::circuit::newton::SolveOptions;
use hushrail::read::Source;

fn run(schemes: &str) -> Estimate {
    let dir = std::env::temp_dir().join(format!("hushrail-rest-{}-{}", std::process::id(), schemes.len()));
    std::fs::create_dir_all(&dir).expect("folder");
    for (name, text) in
        [("c.lib", CARDS), ("cells.sp", CELLS), ("n.csv", "cell,count\ninv,300\nnand2,200\nlatch,50\n")]
    {
        std::fs::write(dir.join(name), text).expect("file");
    }
    let text = format!(
        "[process.tt]\nfiles=[\"c.lib\"]\n[cells]\nnetlists=[\"cells.sp\"]\n[grid]\nprocess=[\"tt\"]\nvdd_v=[1.0]\n\
         temp_c=[-40, 25, 125]\n[[domain]]\nname=\"d\"\ncounts=\"n.csv\"\n{schemes}"
    );
    let study = read_study(&Source::from_text("s.toml", &text)).expect("study");
    let loaded = load_study(&study, "s.toml", &PathBuf::from(&dir)).expect("files");
    let e = estimate(&loaded, &SolveOptions::default(), &mut |_, _| ControlFlow::Continue(()));
    std::fs::remove_dir_all(&dir).expect("removed");
    assert!(e.failures.is_empty(), "{:?}", e.failures);
    e
}

const SCHEMES: &str = r#"
[[scheme]]
name = "on"
[[scheme]]
name = "header"
header = { model = "px", width_m = 2e-5, length_m = 6e-8, overdrive_v = 0.2, well_bias_v = 0.1, diffusion_m = 1e-7 }
overhead_a = 1e-12
[[scheme]]
name = "footer"
footer = { model = "nx", width_m = 1e-5, length_m = 6e-8, overdrive_v = 0.1, diffusion_m = 1e-7 }
pwell = "virtual"
[[scheme]]
name = "both"
header = { model = "px", width_m = 2e-5, length_m = 6e-8, diffusion_m = 1e-7 }
footer = { model = "nx", width_m = 1e-5, length_m = 6e-8, diffusion_m = 1e-7 }
nwell = "virtual"
[[scheme]]
name = "wells"
nwell_bias_v = 0.3
pwell_bias_v = 0.3
"#;

/// Kirchhoff's law over the real supplies, and Tellegen's theorem between supplies and mechanisms.
#[test]
fn supplies_and_mechanisms_balance() {
    for p in run(SCHEMES).points {
        let a = &p.asleep;
        let what = format!("{} {}", p.scheme, p.corner);
        let overhead = if p.scheme == "header" { 1e-12 } else { 0.0 };
        let (sum, most) =
            a.supplies.iter().fold((0.0, 0.0f64), |(s, m), x| (s + x.current_a, m.max(x.current_a.abs())));
        // what makes the overdrive takes its current from the supply and returns it outside these books
        assert!((sum - overhead).abs() <= 1e-6 * most, "{what}: {sum} of {most}");
        let by: f64 = a.mechanisms.iter().sum::<f64>() + overhead;
        assert!((by - a.power_w).abs() <= 1e-6 * a.power_w, "{what}: {by} {}", a.power_w);
        assert!(a.residual < 1e-6 && a.mechanisms.iter().all(|m| *m >= 0.0), "{what}: {:?}", a.mechanisms);
        assert!(a.virtual_supply_v > a.virtual_ground_v, "{what}");
    }
}

#[test]
fn lost_states_are_called_out_and_kept_ones_are_not() {
    let strong = r#"
[[scheme]]
name = "off"
header = { model = "px", width_m = 1e-6, length_m = 6e-8, overdrive_v = 0.2 }
"#;
    for p in run(strong).points {
        assert!(p.asleep.virtual_supply_v < 0.1);
        assert!(p.asleep.notes.iter().any(|n| n.code == "state-lost"), "{}", p.corner);
    }
    for p in run("[[scheme]]\nname = \"on\"\n").points {
        assert!(p.asleep.notes.iter().all(|n| n.code != "state-lost"), "{}", p.corner);
    }
}
