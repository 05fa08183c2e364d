//! Nanoseconds per evaluation of a card of one's own and of a compact device, alone and in lanes, as JSON:
//! `speed CARDS MODEL COMPACT BIASES` with a card file, the name in it, a compact device as JSON, and lines `vgs,vds,vbs`.
#![expect(clippy::print_stdout, reason = "a command-line tool prints")]

use std::error::Error;
use std::path::Path;
use std::sync::Arc;
use std::time::Instant;

use hushrail::device::compact::CompactCard;
use hushrail::device::process::{Process, Request};
use hushrail::device::{Bias, Branches, Device, Geometry};
use hushrail::physics::Kelvin;
use hushrail::read::{DeckOptions, Place, Source};

/// The best of many runs: what the machine does when nobody else is on it.
fn best_ns(points: usize, mut run: impl FnMut()) -> f64 {
    let best = (0..400).map(|_| {
        let start = Instant::now();
        run();
        start.elapsed().as_secs_f64()
    });
    best.fold(f64::INFINITY, f64::min) / points as f64 * 1e9
}

fn main() -> Result<(), Box<dyn Error>> {
    let args: Vec<String> = std::env::args().skip(1).collect();
    let [cards, model, compact, biases] = &args[..] else {
        return Err("want CARDS MODEL COMPACT BIASES".into());
    };
    let mut points = Vec::new();
    for line in std::fs::read_to_string(biases)?.lines() {
        let v = line.split(',').map(str::parse).collect::<Result<Vec<f64>, _>>()?;
        let [vgs, vds, vbs] = v[..] else { return Err("want vgs,vds,vbs".into()) };
        points.push(Bias { vgs, vds, vbs });
    }
    let temp = Kelvin::from_celsius(27.0)?;
    let g = Geometry {
        ad_m2: 0.12e-12,
        as_m2: 0.12e-12,
        pd_m: 1.9e-6,
        ps_m: 1.9e-6,
        ..Geometry::new(0.8e-6, 70e-9)
    };
    let card: CompactCard = serde_json::from_str(&std::fs::read_to_string(compact)?)?;
    let compact = card.device(&g, temp)?;
    let process = Process::read("cards", &[Source::open(Path::new(cards))?], &DeckOptions::default())?;
    let params =
        [("w", 0.8e-6), ("l", 70e-9), ("ad", g.ad_m2), ("as", g.as_m2), ("pd", g.pd_m), ("ps", g.ps_m)];
    let request = Request {
        model: model.as_str().into(),
        params: params.map(|(n, v)| (Arc::from(n), v)).to_vec(),
        at: Place::new(&Arc::from("speed"), 1, 1),
    };
    let bsim4 = process.transistor(&request, temp, &mut Vec::new())?.device;
    let mut out = vec![Branches::zero(); points.len()];
    let mut all = serde_json::Map::new();
    for (name, device) in [("BSIM4", &*bsim4), ("compact", &compact as &dyn Device)] {
        let alone = best_ns(points.len(), || {
            for (b, o) in points.iter().zip(&mut out) {
                *o = device.branches(*b);
            }
        });
        let lanes = best_ns(points.len(), || device.branches_many(&points, &mut out));
        all.insert(name.into(), serde_json::json!({ "alone": alone, "lanes": lanes }));
    }
    println!("{}", serde_json::Value::Object(all));
    Ok(())
}
