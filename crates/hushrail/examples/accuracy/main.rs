//! Predicts every state of a published leakage table from cards and annotated netlists, and prints how well.
//!
//! `accuracy DIR [--json FILE] [--floor S]`: DIR holds `leakage_by_state.csv`, `corners.csv`, `cards/` and `netlists/`.

#![expect(clippy::print_stdout, reason = "a command-line example prints")]

use std::path::{Path, PathBuf};
use std::process::ExitCode;
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, AtomicUsize};
use std::time::Instant;

use hushrail::cell::{CellReader, RailNames};
use hushrail::check::compare::{Comparison, read_published, read_published_corners};
use hushrail::circuit::newton::SolveOptions;
use hushrail::device::process::Process;
use hushrail::read::{DeckOptions, ReadError, Source, read_deck};
use indexmap::IndexMap;
use serde::Deserialize;

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct Setup {
    floor_s: f64,
    cards: IndexMap<String, String>,
    diodes: Files,
    alias: IndexMap<String, String>,
    cells: Cells,
}
#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct Files {
    files: Vec<String>,
}
#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct Cells {
    netlist: String,
    prefix: String,
}

fn main() -> ExitCode {
    let mut args = std::env::args().skip(1);
    let (mut dir, mut json) = (PathBuf::from("../shared/data/sky130"), None);
    while let Some(a) = args.next() {
        match a.as_str() {
            "--json" => json = args.next().map(PathBuf::from),
            _ => dir = PathBuf::from(a),
        }
    }
    match run(&dir, json.as_deref()) {
        Ok(()) => ExitCode::SUCCESS,
        Err(e) => {
            println!("accuracy: {e}");
            ExitCode::from(2)
        }
    }
}

fn run(dir: &Path, json: Option<&Path>) -> Result<(), Box<dyn std::error::Error>> {
    let setup: Setup = toml::from_str(include_str!("comparison.toml"))?;
    let begin = Instant::now();
    let open = |f: &str| Source::open(&dir.join(f));
    let diodes = setup.diodes.files.iter().map(|f| open(f)).collect::<Result<Vec<_>, _>>()?;
    let mut processes = IndexMap::new();
    for (name, file) in &setup.cards {
        let mut sources = vec![open(file)?];
        sources.extend(diodes.iter().cloned());
        let mut p = Process::read(name, &sources, &DeckOptions::default())?;
        for (a, b) in &setup.alias {
            p = p.alias(a, b);
        }
        processes.insert(name.clone(), p);
    }
    let rows = read_published(&open("leakage_by_state.csv")?)?;
    let corners = read_published_corners(&open("corners.csv")?)?;
    let deck = read_deck(&[open(&setup.cells.netlist)?], &DeckOptions::default())?;
    let rails = RailNames::default();
    let mut notes = Vec::new();
    let mut cells = IndexMap::new();
    let mut missing: Vec<ReadError> = Vec::new();
    for r in &rows {
        if cells.contains_key(&r.cell) {
            continue;
        }
        let first = processes.values().next().ok_or("no cards")?;
        let reader = CellReader { deck: &deck, rails: &rails, is_device: &|n| first.defines(n) };
        match reader.cell(&format!("{}{}", setup.cells.prefix, r.cell), &mut notes) {
            Ok(c) => {
                cells.insert(r.cell.clone(), Arc::new(c));
            }
            Err(e) => missing.push(e),
        }
    }
    missing.dedup();
    let read_s = begin.elapsed().as_secs_f64();
    let solving = Instant::now();
    let comparison = Comparison {
        cells: &cells,
        processes: &processes,
        floor_s: setup.floor_s,
        options: SolveOptions::default(),
    };
    let result = comparison.run(&rows, &corners, &AtomicUsize::new(0), &AtomicBool::new(false))?;
    let solve_s = solving.elapsed().as_secs_f64();

    println!("{} cells, {} rows, {} predicted", cells.len(), rows.len(), result.rows.len());
    println!(
        "{:<22} {:>6} {:>8} {:>9} {:>9} {:>8} {:>7} {:>7} {:>7} {:>7}",
        "corner", "states", "median", "med|lg|", "p90|lg|", "max|lg|", "<0.3%", "<1%", "<2%", "<5%"
    );
    let statistics = result.statistics();
    for s in &statistics {
        println!(
            "{:<22} {:>6} {:>8.4} {:>9.6} {:>9.6} {:>8.4} {:>6.1}% {:>6.1}% {:>6.1}% {:>6.1}%",
            s.corner,
            s.states,
            s.median_ratio,
            s.median_decades,
            s.p90_decades,
            s.worst_decades,
            100.0 * s.within_0p3_percent,
            100.0 * s.within_1_percent,
            100.0 * s.within_2_percent,
            100.0 * s.within_5_percent,
        );
    }
    println!("\nfurthest off:");
    for r in result.worst(10) {
        println!(
            "  {:<14} {:<24} {:<28} published {:.6e} nW, predicted {:.6e} nW, ratio {:.4}",
            r.cell,
            r.corner,
            r.when,
            r.published_nw,
            r.predicted_nw,
            r.ratio()
        );
    }
    for e in &missing {
        println!("not predicted: {e}");
    }
    let mut reasons: IndexMap<String, usize> = IndexMap::new();
    for u in &result.unmatched {
        *reasons.entry(format!("{}: {}", u.cell, u.reason)).or_insert(0) += 1;
    }
    for (why, n) in &reasons {
        println!("not predicted: {why} ({n} rows)");
    }
    println!("\nread {read_s:.2} s, solved {solve_s:.2} s, {} threads", rayon::current_num_threads());
    if let Some(path) = json {
        let text = serde_json::json!({ "statistics": statistics, "worst": result.worst(10), "unmatched": result.unmatched,
            "rows": result.rows, "read_s": read_s, "solve_s": solve_s });
        std::fs::write(path, serde_json::to_string_pretty(&text)?)?;
    }
    Ok(())
}
