//! Layout readers against a general-purpose reader, against the standard's rules, and against broken files.

mod bytes;
mod fixtures;
mod flat;
mod hostile;
mod rules;
mod written;

/// The bytes of a fixture.
fn fixture(name: &str) -> Vec<u8> {
    let path = format!("{}/tests/data/layout/{name}", env!("CARGO_MANIFEST_DIR"));
    std::fs::read(&path).unwrap_or_else(|e| panic!("{path}: {e}"))
}
