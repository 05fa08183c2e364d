//! Any bytes as Verilog, connected: an error, or a graph whose pins and nets agree and whose counts are those counted.
#![no_main]

use hushrail::read::Input;
use hushrail::read::verilog::connect::{ConnectOptions, NetId, connect};
use hushrail::read::verilog::read_verilog_from;
use libfuzzer_sys::fuzz_target;

fuzz_target!(|bytes: &[u8]| {
    let input = || [Input::stream("fuzz.v", std::io::Cursor::new(bytes.to_vec()))];
    // arrays multiply what a few bytes describe
    let counted = read_verilog_from(&mut input()).and_then(|net| net.counts(None));
    if counted.as_ref().is_ok_and(|c| c.total() > 1 << 16) {
        return;
    }
    if let Ok(net) = connect(&mut input(), None, &(), &ConnectOptions::default()) {
        if let Ok(counted) = counted {
            assert_eq!(net.counts(), counted);
        }
        for instance in net.instances().take(1 << 10) {
            let _ = net.instance(&net.instance_path(instance));
            for (k, &id) in net.pins(instance).iter().enumerate().filter(|(_, n)| **n != NetId::OPEN) {
                assert!(net.net_pins(id).any(|pin| pin == (instance, k)));
            }
        }
    }
});
