//! The curve of a block of cells: against the block itself where it was not sampled, and rest points on it.

mod common;

use std::sync::Arc;
use std::sync::atomic::AtomicBool;

use common::{CARDS, CELLS};
use hushrail::batch::load_study;
use hushrail::batch::study::read_study;
use hushrail::block::{BlockCurve, Book, BoundBlock, Draw};
use hushrail::cell::DeviceShelf;
use hushrail::circuit::newton::SolveOptions;
use hushrail::physics::Kelvin;
use hushrail::read::Source;
use hushrail::standby::switch::Side;
use hushrail::standby::{Scheme, Switch, settle_with};

const SCHEMES: &str = r#"
[[scheme]]
name = "header"
header = { model = "px", width_m = 2e-5, length_m = 6e-8, overdrive_v = 0.1, diffusion_m = 1e-7 }
[[scheme]]
name = "header, own wells"
header = { model = "px", width_m = 2e-5, length_m = 6e-8, diffusion_m = 1e-7 }
nwell = "virtual"
[[scheme]]
name = "footer"
footer = { model = "nx", width_m = 1e-5, length_m = 6e-8, diffusion_m = 1e-7 }
pwell_bias_v = 0.2
[[scheme]]
name = "footer, own wells"
footer = { model = "nx", width_m = 1e-5, length_m = 6e-8, diffusion_m = 1e-7 }
pwell = "virtual"
"#;

fn each(mut f: impl FnMut(&Scheme, &BoundBlock, &BlockCurve, Switch, f64)) {
    let dir = std::env::temp_dir().join(format!("hushrail-curve-{}-{}", std::process::id(), std::line!()));
    let dir = dir.join(format!("{:?}", std::thread::current().id()));
    std::fs::create_dir_all(&dir).expect("folder");
    for (name, text) in
        [("c.lib", CARDS), ("cells.sp", CELLS), ("n.csv", "cell,count\ninv,300\nnand2,200\nlatch,50\n")]
    {
        std::fs::write(dir.join(name), text).expect("file");
    }
    let text = format!(
        "[process.tt]\nfiles=[\"c.lib\"]\n[cells]\nnetlists=[\"cells.sp\"]\n[grid]\nprocess=[\"tt\"]\nvdd_v=[1.0]\n\
         temp_c=[25]\n[[domain]]\nname=\"d\"\ncounts=\"n.csv\"\n{SCHEMES}"
    );
    let study = read_study(&Source::from_text("s.toml", &text)).expect("study");
    let loaded = load_study(&study, "s.toml", &dir).expect("files");
    std::fs::remove_dir_all(&dir).expect("removed");
    let stop = AtomicBool::new(false);
    let process = &loaded.processes["tt"];
    for temp_c in [-40.0, 100.0] {
        let temp = Kelvin::from_celsius(temp_c).expect("in range");
        let mut shelf = DeviceShelf::default();
        let options = SolveOptions::default();
        let block = BoundBlock::new(&loaded.domains[0].block, process, temp, 1.0, &mut shelf, &options)
            .expect("block");
        for s in &loaded.schemes {
            let (spec, side) = match (&s.header, &s.footer) {
                (Some(h), _) => (h, Side::Header),
                (_, Some(f)) => (f, Side::Footer),
                _ => continue,
            };
            let switch =
                Switch::new(spec, side, process, temp, 1.0, &mut shelf, &Arc::from("s")).expect("switch");
            let curve = s.curve(&block, 1.0, 1e-3, &stop).expect("curve");
            f(s, &block, &curve, switch, temp_c);
        }
    }
}

/// At points that are no knots: within twice the stated accuracy of each book's mechanisms together, but for jumps.
#[test]
fn a_curve_is_as_accurate_as_it_says() {
    let stop = AtomicBool::new(false);
    each(|s, block, curve, _, temp_c| {
        let p = curve.points();
        assert!(p.accuracy > 0.0 && p.accuracy <= 1e-3);
        let levels = |x: f64| {
            let (supply, ground) = p.collapsing.rails(1.0, x);
            s.levels(1.0, supply, ground)
        };
        for k in 0..60 {
            let x = 10f64.powf(-5.0 + 5.0 * common::uniform(7, k));
            if p.jumps_v.iter().any(|j| (j - x).abs() < 1e-4) {
                continue;
            }
            let (got, want) = (curve.currents(x), block.draw(&levels(x), &stop).expect("block"));
            for (a, b) in [
                (got.supply, want.supply),
                (got.ground, want.ground),
                (got.nwell, want.nwell),
                (got.power_w, want.power_w),
            ] {
                let gross: f64 = b.iter().map(|v| v.abs()).sum();
                let miss: f64 = a.iter().sum::<f64>() - b.iter().sum::<f64>();
                assert!(
                    miss.abs() <= 2e-3 * gross,
                    "{} at {temp_c} °C, {x:.3e} V: {:e}",
                    s.name,
                    miss / gross
                );
            }
            // the slope is that of the curve
            let h = 1e-6 * x;
            let (lo, hi) = (curve.book(Book::Supply, x - h), curve.book(Book::Supply, x + h));
            let d = curve.book(Book::Supply, x).per_v;
            let by_difference = (hi.value - lo.value) / (2.0 * h);
            let scale = d.abs().max(curve.book(Book::Supply, x).value.abs() / x);
            assert!((d - by_difference).abs() <= 1e-4 * scale, "{}: {d:e} {by_difference:e}", s.name);
        }
        let text = serde_json::to_string(curve).expect("JSON");
        let back: BlockCurve = serde_json::from_str(&text).expect("curve");
        assert_eq!(back.points().knots.len(), p.knots.len());
        assert!(
            serde_json::from_str::<BlockCurve>(&text.replacen("\"span_v\":0.0", "\"span_v\":0.5", 1))
                .is_err()
        );
    });
}

/// The rest point on the curve has the current of the direct one within three times the curve's accuracy.
#[test]
fn rest_points_on_a_curve_are_those_of_the_block() {
    let stop = AtomicBool::new(false);
    each(|s, block, curve, switch, temp_c| {
        let settle = |b: &dyn Draw| {
            let (h, f) =
                if s.header.is_some() { (Some(switch.clone()), None) } else { (None, Some(switch.clone())) };
            settle_with(s, b, 1.0, h, f, &stop).expect("rest")
        };
        let (direct, quick) = (settle(block), settle(curve));
        let off = quick.power_w / direct.power_w - 1.0;
        assert!(off.abs() <= 3.0 * curve.points().accuracy, "{} at {temp_c} °C: {off:e}", s.name);
        assert!(quick.residual < 1e-6);
        let span = |a: &hushrail::standby::Asleep| a.virtual_supply_v - a.virtual_ground_v;
        assert!(
            (span(&direct) - span(&quick)).abs() < 1e-3,
            "{}: {} {}",
            s.name,
            span(&direct),
            span(&quick)
        );
    });
}
