//! Two published netlists, connected: counts as counted and as a plain look at the lines finds, memory, names, drivers.

#![expect(clippy::print_stdout, clippy::unwrap_used, reason = "helpers of tests are not seen as tests")]

use std::collections::BTreeMap;
use std::path::{Path, PathBuf};

use hushrail::read::Input;
use hushrail::read::verilog::connect::{ConnectOptions, Connected, NetId, connect};
use hushrail::read::verilog::read_verilog_from;

fn netlists() -> Option<PathBuf> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("../../../shared/data/netlists");
    if folder.is_dir() {
        return Some(folder);
    }
    println!("skipped: no published netlists at {}", folder.display());
    None
}

fn connected(file: &Path) -> Connected {
    connect(&mut [Input::file(file)], None, &(), &ConnectOptions::default()).unwrap()
}

/// Instances by master, from the first words of lines.
fn by_lines(text: &str) -> BTreeMap<String, u64> {
    let mut counts = BTreeMap::new();
    for line in text.lines().filter(|l| l.trim_start().starts_with("sky130_")) {
        let mut words = line.split_whitespace();
        let (master, name) = (words.next().unwrap(), words.next().unwrap());
        let range =
            name.strip_suffix(']').and_then(|n| n.rsplit_once('[')).and_then(|(_, r)| r.split_once(':'));
        let members = range.map_or(1, |(a, b)| a.parse::<u64>().unwrap().abs_diff(b.parse().unwrap()) + 1);
        *counts.entry(master.to_owned()).or_insert(0) += members;
    }
    counts
}

#[test]
fn three_ways_of_counting_agree() {
    let Some(folder) = netlists() else { return };
    for (name, instances) in [("tt_um_fpu", 21_823), ("housekeeping", 33_592)] {
        let file = folder.join(format!("{name}.v"));
        let net = connected(&file);
        let counted = read_verilog_from(&mut [Input::file(&file)]).unwrap().counts(None).unwrap();
        assert_eq!(net.counts(), counted);
        let lines = by_lines(&std::fs::read_to_string(&file).unwrap());
        assert_eq!(counted.counts.into_iter().collect::<BTreeMap<_, _>>(), lines);
        assert_eq!((net.instance_count(), net.top()), (instances, name));
    }
}

#[test]
fn a_pin_takes_a_few_words_of_memory() {
    let Some(folder) = netlists() else { return };
    for name in ["tt_um_fpu", "housekeeping"] {
        let net = connected(&folder.join(format!("{name}.v")));
        println!("{name}: {:.1} bytes for each of {} pins", net.bytes_per_pin(), net.pin_count());
        assert!(net.bytes_per_pin() <= 64.0, "{name}: {} bytes per pin", net.bytes_per_pin());
    }
}

#[test]
fn names_find_what_they_name() {
    let Some(folder) = netlists() else { return };
    let net = connected(&folder.join("tt_um_fpu.v"));
    for instance in net.instances() {
        assert_eq!(net.instance(&net.instance_path(instance)), Some(instance));
    }
    for id in net.nets().filter(|n| !n.is_constant()) {
        assert_eq!(net.net(&net.net_path(id)), Some(id), "{}", net.net_path(id));
    }
    // the last lines of the file tie eight outputs to the constants that cells make
    assert_eq!(net.net("uio_oe[0]"), net.net("net73"));
    assert_eq!(net.net_path(net.net("net73").unwrap()), "uio_oe[0]");
    let wire10 = net.instance("wire10").unwrap();
    let at: Vec<String> = net.pins(wire10).iter().map(|&n| net.net_path(n)).collect();
    assert_eq!(at, ["_04613_", "VGND", "VGND", "VPWR", "VPWR", "net115"]);
    assert!(net.net_pins(net.net("VPWR").unwrap()).all(|(i, k)| net.pins(i)[k] != NetId::OPEN));
}
