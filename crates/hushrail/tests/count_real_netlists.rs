//! Two published netlists of chips count as they are known to: totals from the list that came with them, counts
//! per master and sums from a script that shares no code with the reader.

#![expect(clippy::print_stdout, clippy::unwrap_used, reason = "helpers of tests are not seen as tests")]

use std::path::{Path, PathBuf};

use hushrail::read::counts::InstanceCounts;
use hushrail::read::verilog::read_verilog;
use hushrail::read::{ReadError, Source};

/// The folder of the data, or nothing when this machine lacks it.
fn data() -> Option<PathBuf> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("../../../shared/data");
    if folder.join("netlists").is_dir() {
        return Some(folder);
    }
    println!("skipped: no published netlists at {}", folder.display());
    None
}

fn count(folder: &Path, top: &str) -> InstanceCounts {
    let source = Source::open(&folder.join("netlists").join(format!("{top}.v"))).unwrap();
    let net = read_verilog(&[source]).unwrap();
    assert_eq!(net.tops(), [top]);
    assert_eq!(net.modules().count(), 1);
    net.counts(Some(top)).unwrap()
}

/// Instances that the cell table has a value for, and count times value summed over them, nW.
fn covered(folder: &Path, counts: &InstanceCounts, corner: &str) -> (u64, f64) {
    let mut table = csv::Reader::from_path(folder.join("sky130/cells.csv")).unwrap();
    let wanted = format!("cell_leakage_nw__{corner}");
    let column = table.headers().unwrap().iter().position(|h| h == wanted).unwrap();
    let (mut instances, mut sum_nw) = (0, 0.0);
    for row in table.records() {
        let row = row.unwrap();
        if let Some(&n) = counts.counts.get(&format!("sky130_fd_sc_hd__{}", &row[0])) {
            instances += n;
            sum_nw += n as f64 * row[column].parse::<f64>().unwrap();
        }
    }
    (instances, sum_nw)
}

#[test]
fn the_floating_point_unit_counts_as_published() {
    let Some(folder) = data() else { return };
    let c = count(&folder, "tt_um_fpu");
    assert_eq!(c.total(), 21_823);
    assert_eq!(c.counts.len(), 192);
    let without = ["sky130_fd_sc_hd__fill_1", "sky130_fd_sc_hd__fill_2", "sky130_fd_sc_hd__tapvpwrvgnd_1"];
    let without: u64 = without.iter().map(|m| c.counts[*m]).sum();
    assert_eq!(without + c.counts["sky130_ef_sc_hd__decap_12"], 7_518);
}

#[test]
fn the_housekeeping_block_counts_its_arrays() {
    let Some(folder) = data() else { return };
    let c = count(&folder, "housekeeping");
    assert_eq!(c.total(), 33_592);
    assert_eq!(c.counts.len(), 159);
    assert_eq!(c.counts["sky130_ef_sc_hd__decap_12"], 1816);
    assert_eq!(c.counts["sky130_ef_sc_hd__fill_4"], 605);
    assert_eq!(c.counts["sky130_ef_sc_hd__fill_8"], 605);
}

/// The published sums cover all cells of the library and the table only some, so the sums here are smaller.
#[test]
fn known_cells_sum_to_what_a_script_finds() {
    let Some(folder) = data() else { return };
    // (instances covered, nW) of the script; published: all instances but those without any value
    for (top, corner, instances, script_nw, published_nw) in [
        ("tt_um_fpu", "tt_025C_1v80", 12_327, 43.776_204_365_038_01, 53.487_642_597_938),
        ("tt_um_fpu", "ff_100C_1v95", 12_327, 80_228.412_476_191_97, 100_472.602_059_192),
        ("housekeeping", "tt_025C_1v80", 16_287, 48.135_645_646_621_02, 73.215_866_188_821),
        ("housekeeping", "ff_100C_1v95", 16_287, 69_199.536_112_944, 127_129.450_179_944),
    ] {
        let (n, sum_nw) = covered(&folder, &count(&folder, top), corner);
        assert_eq!(n, instances, "{top}");
        // the order of summation differs: 200 terms of rounding at 1e-16 each
        assert!((sum_nw / script_nw - 1.0).abs() < 1e-13, "{top} {corner}: {sum_nw} nW");
        assert!(sum_nw < published_nw);
    }
}

#[test]
fn a_netlist_cut_anywhere_is_an_error_with_a_place_inside() {
    let Some(folder) = data() else { return };
    let source = Source::open(&folder.join("netlists/tt_um_fpu.v")).unwrap();
    let last = source.text.rfind("endmodule").unwrap();
    // a prime step visits all kinds of places
    for cut in (7..last).step_by(99_991).chain(last - 40..last) {
        let part = Source::from_text("part.v", &source.text[..cut]);
        assert!(matches!(read_verilog(&[part]), Err(ReadError::Syntax { .. })), "cut at byte {cut}");
    }
}

#[test]
fn the_same_netlist_twice_is_named() {
    let Some(folder) = data() else { return };
    let source = Source::open(&folder.join("netlists/tt_um_fpu.v")).unwrap();
    let error = read_verilog(&[source.clone(), source]).unwrap_err().to_string();
    assert!(error.contains("tt_um_fpu.v:1:8: module `tt_um_fpu` is defined twice, first at "), "{error}");
}
