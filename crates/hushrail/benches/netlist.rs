//! Speed of reading a netlist of 120 MB, as ratios in one run: counting lines, counting instances, connecting.
//!
//! The text repeats the published netlists under new module names when they are there, and an invented block
//! otherwise; it stays in the target folder. `wc -l` includes the start of its process. Memory is that of a child
//! process which does nothing but count.

#![expect(clippy::print_stdout, reason = "a bench reports")]

use std::fmt::Write as _;
use std::io::Write as _;
use std::path::{Path, PathBuf};
use std::process::Command;
use std::time::Instant;

use hushrail::read::Input;
use hushrail::read::verilog::connect::{ConnectOptions, connect};
use hushrail::read::verilog::read_verilog_from;

const BYTES: usize = 120_000_000;
const ROUNDS: usize = 7;

/// The blocks to repeat: names of modules and their texts.
fn blocks() -> Vec<(String, String)> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("../../../shared/data/netlists");
    let published = ["tt_um_fpu", "housekeeping"]
        .map(|n| std::fs::read_to_string(folder.join(format!("{n}.v"))).map(|t| (n.to_owned(), t)));
    if let [Ok(a), Ok(b)] = published {
        return vec![a, b];
    }
    let mut text = "module block (VPWR, VGND);\n input VPWR;\n input VGND;\n".to_owned();
    for i in 0..20_000 {
        let _ = writeln!(
            text,
            " wire \\n[{i}] ;\n nand2_1 _{i:05}_ (.A(\\n[{i}] ),\n    .B(net{}),\n    .VGND(VGND),\n    .VPWR(VPWR),\n    .Y(net{i}));",
            i * 7919 % 20_000,
        );
    }
    vec![("block".into(), text + "endmodule\n")]
}

fn make(file: &Path) -> std::io::Result<()> {
    let blocks = blocks();
    let mut out = std::io::BufWriter::new(std::fs::File::create(file)?);
    let (mut written, mut top) = (0, "module top ();\n".to_owned());
    for copy in 0.. {
        for (name, text) in &blocks {
            let renamed = text.replacen(&format!("module {name}"), &format!("module {name}_{copy}"), 1);
            out.write_all(renamed.as_bytes())?;
            written += renamed.len();
            let _ = writeln!(top, " {name}_{copy} u_{name}_{copy} ();");
        }
        if written >= BYTES {
            break;
        }
    }
    out.write_all((top + "endmodule\n").as_bytes())?;
    out.flush()
}

/// The shortest of some times, s: what else the machine does only adds.
fn shortest(mut work: impl FnMut()) -> f64 {
    let once = |_| {
        let start = Instant::now();
        work();
        start.elapsed().as_secs_f64()
    };
    (0..ROUNDS).map(once).fold(f64::INFINITY, f64::min)
}

fn count(file: &Path) -> u64 {
    let net = read_verilog_from(&mut [Input::file(file)]).expect("a netlist");
    net.counts(Some("top")).expect("instances").total()
}

/// The most memory this process has held, MB; nothing where the system does not say.
fn peak_mb() -> Option<f64> {
    let status = std::fs::read_to_string("/proc/self/status").ok()?;
    let line = status.lines().find_map(|l| l.strip_prefix("VmHWM:"))?;
    Some(line.trim().strip_suffix(" kB")?.parse::<f64>().ok()? / 1000.0)
}

fn main() {
    let mut arguments = std::env::args().skip(1);
    if arguments.next().as_deref() == Some("--only-count") {
        let file = PathBuf::from(arguments.next().expect("a file"));
        let total = count(&file);
        println!("{total} {}", peak_mb().map_or("unknown".into(), |mb| format!("{mb:.1} MB")));
        return;
    }
    let file = Path::new(env!("CARGO_TARGET_TMPDIR")).join("netlist-120-mb.v");
    if !file.exists() {
        make(&file).expect("room for 120 MB");
    }
    let mb = std::fs::metadata(&file).expect("made").len() as f64 / 1e6;
    let lines = shortest(|| {
        Command::new("wc").arg("-l").arg(&file).output().expect("wc");
    });
    let mut instances = 0;
    let counting = shortest(|| instances = count(&file));
    let mut connected = None;
    let connecting = shortest(|| {
        connected = None;
        connected = connect(&mut [Input::file(&file)], Some("top"), &(), &ConnectOptions::default()).ok();
    });
    let net = connected.expect("a netlist");
    println!("{mb:.0} MB, {instances} instances, {} pins, {} nets", net.pin_count(), net.net_count());
    for (name, time) in [("wc -l", lines), ("count", counting), ("connect", connecting)] {
        println!("{name:8} {:6.0} MB/s  {:5.1} times wc -l", mb / time, time / lines);
    }
    println!("connected: {:.1} bytes for each pin", net.bytes_per_pin());
    let me = std::env::current_exe().expect("this bench");
    let child = Command::new(me).arg("--only-count").arg(&file).output().expect("a child");
    let said = String::from_utf8_lossy(&child.stdout).into_owned();
    println!("peak memory of a count: {}", said.trim().split_once(' ').map_or("unknown", |s| s.1));
}
