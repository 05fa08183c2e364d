//! Predicts every state of a published leakage table from cards and annotated netlists, and prints how well.
//!
//! `accuracy DIR [--json FILE] [--floor S]`: DIR holds `leakage_by_state.csv`, `corners.csv`, `cards/` and `netlists/`.

#![expect(clippy::print_stdout, reason = "a command-line example prints")]

use std::path::{Path, PathBuf};
use std::process::ExitCode;
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, AtomicUsize};
use std::time::Instant;

use hushrail::cell::{Cell, CellReader, RailNames};
use hushrail::check::compare::{
    Compared, ComparedRow, Comparison, PublishedCorner, PublishedRow, read_published, read_published_corners,
};
use hushrail::check::suspects::{SuspectRules, find_suspects};
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
    fallback: Fallback,
    suspects: Shared,
}
#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct Shared {
    same_cards: Vec<Vec<String>>,
}
#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct Fallback {
    floor_s: f64,
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
    rails: RailNames,
    extra: String,
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
    let extra =
        read_deck(&[Source::from_text("comparison.toml", &setup.cells.extra)], &DeckOptions::default())?;
    let rails = setup.cells.rails.clone();
    let mut notes = Vec::new();
    let mut cells = IndexMap::new();
    let mut missing: Vec<ReadError> = Vec::new();
    for r in &rows {
        if cells.contains_key(&r.cell) {
            continue;
        }
        let first = processes.values().next().ok_or("no cards")?;
        let name = format!("{}{}", setup.cells.prefix, r.cell);
        let source = if extra.subckts.contains_key(name.as_str()) { &extra } else { &deck };
        let reader = CellReader { deck: source, rails: &rails, is_device: &|n| first.defines(n) };
        match reader.cell(&name, &mut notes) {
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
    let reasons = reasons(&result, &rows, &corners, &cells, &processes, setup.fallback.floor_s, dir)?;

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
        let why = reasons.get(&(r.cell.clone(), r.corner.clone(), r.when.clone()));
        println!(
            "  {:<14} {:<22} {:<28} published {:.4e} nW, predicted {:.4e} nW, ratio {:.4}: {}",
            r.cell,
            r.corner,
            r.when,
            r.published_nw,
            r.predicted_nw,
            r.ratio(),
            why.map_or("", |w| w.as_str())
        );
    }
    println!("\nrows more than 2 % off, by reason:");
    let mut tally: IndexMap<&str, usize> = IndexMap::new();
    for why in reasons.values() {
        *tally.entry(why).or_insert(0) += 1;
    }
    tally.sort_by(|_, a, _, b| b.cmp(a));
    for (why, n) in &tally {
        println!("  {n:>6}  {why}");
    }
    let rules = SuspectRules { same_cards: setup.suspects.same_cards.clone(), ..SuspectRules::default() };
    let found = find_suspects(&rows, &corners, Some(&result), &rules);
    let own = found.iter().filter(|s| s.contradicts_table).count();
    println!(
        "\nrows that contradict others of the table: {own}; that only the prediction contradicts: {}",
        found.len() - own
    );
    let listed = listed_suspects(dir);
    if !listed.is_empty() {
        let hit = found
            .iter()
            .filter(|s| listed.contains(&(s.cell.clone(), s.corner.clone(), s.when.clone())))
            .count();
        println!("of the {} rows listed in leakage_suspects.csv {hit} are found", listed.len());
    }
    for e in &missing {
        println!("not predicted: {e}");
    }
    let mut lost: IndexMap<String, usize> = IndexMap::new();
    for u in &result.unmatched {
        *lost.entry(format!("{}: {}", u.cell, u.reason)).or_insert(0) += 1;
    }
    for (why, n) in &lost {
        println!("not predicted: {why} ({n} rows)");
    }
    println!("\nread {read_s:.2} s, solved {solve_s:.2} s, {} threads", rayon::current_num_threads());
    if let Some(path) = json {
        let text = serde_json::json!({ "statistics": statistics, "worst": result.worst(10), "unmatched": result.unmatched,
            "rows": result.rows, "reasons": reasons.iter().map(|((cell, corner, when), why)| serde_json::json!({ "cell": cell, "corner": corner, "when": when, "reason": why })).collect::<Vec<_>>(), "read_s": read_s, "solve_s": solve_s });
        std::fs::write(path, serde_json::to_string_pretty(&text)?)?;
    }
    Ok(())
}

type RowKey = (String, String, String);

/// Why each row that is more than 2 % off is off, as far as it can be told.
fn reasons(
    result: &Compared,
    rows: &[PublishedRow],
    corners: &[PublishedCorner],
    cells: &IndexMap<String, Arc<Cell>>,
    processes: &IndexMap<String, Process>,
    fallback_s: f64,
    dir: &Path,
) -> Result<IndexMap<RowKey, String>, Box<dyn std::error::Error>> {
    let off: Vec<&ComparedRow> = result.rows.iter().filter(|r| (r.ratio() - 1.0).abs() > 0.02).collect();
    let key = |r: &ComparedRow| (r.cell.clone(), r.corner.clone(), r.when.clone());
    let wanted: std::collections::HashSet<RowKey> = off.iter().map(|r| key(r)).collect();
    let again: Vec<PublishedRow> = rows
        .iter()
        .filter(|r| wanted.contains(&(r.cell.clone(), r.corner.clone(), r.when.clone())))
        .cloned()
        .collect();
    let c = Comparison { cells, processes, floor_s: fallback_s, options: SolveOptions::default() };
    let with_fallback = c.run(&again, corners, &AtomicUsize::new(0), &AtomicBool::new(false))?;
    let refit: IndexMap<RowKey, f64> = with_fallback.rows.iter().map(|r| (key(r), r.ratio())).collect();
    let mut equal: IndexMap<(&str, &str), bool> = IndexMap::new();
    let mut first: IndexMap<(&str, &str), f64> = IndexMap::new();
    for r in rows {
        let k = (r.cell.as_str(), r.corner.as_str());
        let v = *first.entry(k).or_insert(r.power_w);
        let same = equal.entry(k).or_insert(true);
        *same &= (v / r.power_w - 1.0).abs() < 1e-4;
    }
    let suspect = listed_suspects(dir);
    Ok(off
        .into_iter()
        .map(|r| {
            let k = key(r);
            let fits = refit.get(&k).is_some_and(|x| (x - 1.0).abs() < 0.02);
            let why = if equal.get(&(r.cell.as_str(), r.corner.as_str())) == Some(&true) {
                "the table gives one value for all states of the cell"
            } else if fits {
                "the published value is what 1e-12 S across every junction gives (within 2 %)"
            } else if refit.get(&k).is_some_and(|x| (x - 1.0) * (r.ratio() - 1.0) < 0.0) {
                "between what 1e-15 S and 1e-12 S across every junction give: a conductance in between was left"
            } else if suspect.contains(&k) {
                "listed as contradicting other rows of the table"
            } else if r.predicted_nw < r.published_nw {
                "predicted below the table; neither conductance explains it"
            } else {
                "predicted above the table; neither conductance explains it"
            };
            (k, why.to_owned())
        })
        .collect())
}

/// Rows that the data set lists as contradicting others; empty when it lists none.
fn listed_suspects(dir: &Path) -> std::collections::HashSet<RowKey> {
    let text = std::fs::read_to_string(dir.join("leakage_suspects.csv")).unwrap_or_default();
    text.lines()
        .skip(1)
        .filter_map(|l| {
            let f: Vec<&str> = l.splitn(4, ',').collect();
            (f.len() == 4).then(|| (f[0].to_owned(), f[1].to_owned(), f[2].to_owned()))
        })
        .collect()
}
