//! Runs a study file from Rust and prints one line a point: the smallest embedding.

#![expect(clippy::print_stdout, reason = "a command-line example prints")]

use std::ops::ControlFlow;
use std::path::Path;
use std::process::ExitCode;

use hushrail::batch::study::read_study;
use hushrail::batch::{estimate, load_study};
use hushrail::circuit::newton::SolveOptions;
use hushrail::read::{ReadError, Source};

fn main() -> ExitCode {
    let Some(path) = std::env::args().nth(1) else {
        println!("usage: estimate STUDY.toml");
        return ExitCode::from(2);
    };
    match run(Path::new(&path)) {
        Ok(true) => ExitCode::SUCCESS,
        Ok(false) => ExitCode::from(1),
        Err(e) => {
            println!("{e}");
            ExitCode::from(2)
        }
    }
}

fn run(path: &Path) -> Result<bool, ReadError> {
    let source = Source::open(path)?;
    let study = read_study(&source)?;
    let loaded = load_study(&study, &source.path, &source.folder)?;
    let result = estimate(&loaded, &SolveOptions::default(), &mut |_, _| ControlFlow::Continue(()));
    for p in &result.points {
        println!(
            "{:<10} {:<18} {:<16} {:>11.4e} A  ungated {:>11.4e} A  saved {:>8.4} %  rails {:.4} / {:.4} V  {} evaluations",
            p.domain,
            p.scheme,
            p.corner,
            p.asleep.current_a,
            p.ungated_current_a,
            100.0 * p.saving,
            p.asleep.virtual_supply_v,
            p.asleep.virtual_ground_v,
            p.asleep.evaluations
        );
    }
    for f in &result.failures {
        println!("failed: {} / {} / {}: {}", f.domain, f.scheme, f.corner, f.reason);
    }
    for n in &result.notes {
        println!("note [{}] {}", n.code, n.text);
    }
    Ok(result.failures.is_empty() && result.points.iter().all(|p| p.limits.iter().all(|l| l.holds)))
}
