//! A million gates: values of sixty-four vectors at once, carried through. Prints times; `cargo bench --bench states`.

#![expect(clippy::print_stdout, clippy::expect_used, reason = "a bench tells its numbers")]

use std::fmt::Write as _;
use std::sync::Arc;
use std::time::Instant;

use hushrail::read::verilog::connect::{CellPorts, ConnectOptions, Direction, Port, connect};
use hushrail::read::{Input, Source};
use hushrail::states::cover::cover;
use hushrail::states::function::Output;
use hushrail::states::{CellFunction, Circuit, Values};

/// Gates.
const GATES: usize = 1_000_000;
/// Inputs.
const INPUTS: usize = 1_000;
/// How far back a gate looks, as placed logic does.
const REACH: usize = 4_000;

fn function(name: &str, inputs: &[&str], table: &[bool]) -> Arc<CellFunction> {
    let off: Vec<bool> = table.iter().map(|x| !x).collect();
    Arc::new(CellFunction {
        name: name.into(),
        inputs: inputs.iter().map(|x| (*x).to_owned()).collect(),
        outputs: vec![Output {
            name: "Y".into(),
            table: table.iter().map(|x| Some(*x)).collect(),
            can_one: cover(table),
            can_zero: cover(&off),
        }],
        keeps: None,
        states: (0..table.len()).map(|k| vec![u32::try_from(k).expect("few")]).collect(),
        state_count: table.len(),
    })
}

struct Ports<'a>(&'a [Arc<CellFunction>]);

impl CellPorts for Ports<'_> {
    fn ports(&self, cell: &str) -> Option<Vec<Port>> {
        let f = self.0.iter().find(|f| f.name == cell)?;
        let inputs = f.inputs.iter().map(|n| Port::new(n, Direction::Input));
        Some(inputs.chain([Port::new("Y", Direction::Output)]).collect())
    }
}

fn main() {
    let cells = [
        function("inv", &["A"], &[true, false]),
        function("nand2", &["A", "B"], &[true, true, true, false]),
        function("nor2", &["A", "B"], &[true, false, false, false]),
        function("aoi21", &["A1", "A2", "B"], &[true, true, true, false, false, false, false, false]),
        function("xor2", &["A", "B"], &[false, true, true, false]),
    ];
    let mut seed = 1u64;
    let mut random = |below: usize| {
        seed = seed.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        usize::try_from(seed >> 33).expect("31 bits") % below
    };
    let mut text = String::from("module top (i); input [999:0] i;\n");
    for k in 0..GATES {
        let f = &cells[random(cells.len())];
        write!(text, "{} g{k} (.Y(n{k})", f.name).expect("text");
        for pin in &f.inputs {
            let back = 1 + random(REACH);
            match k.checked_sub(back) {
                Some(from) => write!(text, ", .{pin}(n{from})").expect("text"),
                None => write!(text, ", .{pin}(i[{}])", random(INPUTS)).expect("text"),
            }
        }
        text.push_str(");\n");
    }
    text.push_str("endmodule\n");
    let start = Instant::now();
    let mut inputs = [Input::from(Source::from_text("top.v", &text))];
    let net = connect(&mut inputs, None, &Ports(&cells), &ConnectOptions::default()).expect("netlist");
    println!("connected: {GATES} gates in {:.2} s", start.elapsed().as_secs_f64());
    let start = Instant::now();
    let find = |name: &str| cells.iter().find(|f| f.name == name).cloned();
    let circuit = Circuit::new(&net, "", &find).expect("circuit");
    println!("ordered in {:.2} s", start.elapsed().as_secs_f64());
    let mut values = Values::new(&circuit);
    for (k, (_, n)) in circuit.sources.iter().enumerate() {
        let word = (k as u64 + 1).wrapping_mul(0x9e37_79b9_7f4a_7c15);
        values.rails[*n as usize] = [!word, word];
    }
    let mut best = f64::INFINITY;
    for _ in 0..10 {
        let start = Instant::now();
        values.propagate();
        best = best.min(start.elapsed().as_secs_f64());
    }
    let known = values.rails.iter().filter(|r| r[0] ^ r[1] == !0).count();
    println!(
        "64 vectors through {GATES} gates: {:.1} ms at best, {:.1} ns a gate, {known} nets known in all of them",
        1e3 * best,
        1e9 * best / GATES as f64
    );
}
