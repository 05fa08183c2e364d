//! Any bytes as Verilog, counted: a value or an error.
#![no_main]

use hushrail::read::Input;
use hushrail::read::verilog::read_verilog_from;
use libfuzzer_sys::fuzz_target;

fuzz_target!(|bytes: &[u8]| {
    let input = Input::stream("fuzz.v", std::io::Cursor::new(bytes.to_vec()));
    if let Ok(net) = read_verilog_from(&mut [input]) {
        for top in net.modules() {
            let _ = net.counts(Some(top));
            let _ = net.counts_under(Some(top), "u1/u2");
        }
    }
});
