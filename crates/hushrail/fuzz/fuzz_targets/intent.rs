//! Any text as power intent: records or an error, within the limits.
#![no_main]

use hushrail::read::Source;
use hushrail::read::intent::{IntentOptions, read_intent};
use hushrail::read::tcl::Limits;
use libfuzzer_sys::fuzz_target;

fuzz_target!(|text: &str| {
    let options = IntentOptions::default().limits(Limits { steps: 20_000, ..Limits::default() });
    let _ = read_intent(&[Source::from_text("fuzz.upf", text)], &options);
});
