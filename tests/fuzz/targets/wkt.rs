//! Text, and any other file whose first bytes belong to a format.
#![no_main]

use libfuzzer_sys::fuzz_target;
use shotwright::layout;

fuzz_target!(|bytes: &[u8]| {
    if let Ok(layout) = layout::read(bytes, "fuzz") {
        let _ = layout.summary();
    }
});
