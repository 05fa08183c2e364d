//! Any bytes: a library or an error, and what is written of it reads back.

#![no_main]

use hushrail::read::{LibertyOptions, Source, read_liberty, write_liberty};
use libfuzzer_sys::fuzz_target;

fuzz_target!(|bytes: &[u8]| {
    let text = String::from_utf8_lossy(bytes);
    let read = |text: &str| read_liberty(&Source::from_text("f.lib", text), &LibertyOptions::default());
    if let Ok(library) = read(&text) {
        for name in library.cells.keys().take(4) {
            let _ = library.states(name);
        }
        let _ = read(&write_liberty(&library));
    }
});
