//! Any bytes as a layout: a value or an error.
#![no_main]

use hushrail::read::Input;
use hushrail::read::def::count_def;
use libfuzzer_sys::fuzz_target;

fuzz_target!(|bytes: &[u8]| {
    let _ = count_def(&mut Input::stream("fuzz.def", std::io::Cursor::new(bytes.to_vec())));
});
