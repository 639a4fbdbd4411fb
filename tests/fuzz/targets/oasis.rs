//! Records between START and END, 1 nm, without validation: a checksum would stop every mutation.
#![no_main]

use libfuzzer_sys::fuzz_target;
use shotwright::layout;

const START: &[u8] = b"%SEMI-OASIS\r\n\x01\x031.0\x00\xE8\x07\x01";

fuzz_target!(|records: &[u8]| {
    let mut file = [START, records, &[2]].concat();
    // Twelve table offsets, a padding string of 240 bytes behind two of length, no validation.
    file.extend([0; 12]);
    file.extend([0xF0, 0x01]);
    file.extend([0; 241]);
    if let Ok(layout) = layout::read(&file, "fuzz") {
        let _ = layout.summary();
    }
});
