//! Records behind UNITS, in a library of 1 nm.
#![no_main]

use libfuzzer_sys::fuzz_target;
use shotwright::layout;

const HEAD: &[u8] = b"\x00\x06\x00\x02\x02\x58\x00\x14\x03\x05\
    \x3E\x41\x89\x37\x4B\xC6\xA7\xF0\x39\x44\xB8\x2F\xA0\x9B\x5A\x54";

fuzz_target!(|records: &[u8]| {
    if let Ok(layout) = layout::read(&[HEAD, records].concat(), "fuzz") {
        let _ = layout.summary();
    }
});
