//! The program as its user meets it: every subcommand, good and bad input, exit status, where text goes.

mod fracture;
mod hours;
mod layouts;
mod quote;

use std::fs;
use std::path::{Path, PathBuf};

use assert_cmd::Command;
use serde_json::Value;

/// A disc of 24 edges, 200 nm across, and a square of 180 nm, 300 nm apart.
pub(crate) const SHAPES: &str = "POLYGON ((100 0, 96.6 25.9, 86.6 50, 70.7 70.7, 50 86.6, 25.9 96.6, 0 100, -25.9 96.6, -50 86.6, -70.7 70.7, -86.6 50, -96.6 25.9, -100 0, -96.6 -25.9, -86.6 -50, -70.7 -70.7, -50 -86.6, -25.9 -96.6, 0 -100, 25.9 -96.6, 50 -86.6, 70.7 -70.7, 86.6 -50, 96.6 -25.9, 100 0))
POLYGON ((400 -90, 580 -90, 580 90, 400 90, 400 -90))
";

pub(crate) fn shotwright() -> Command {
    Command::new(env!("CARGO_BIN_EXE_shotwright"))
}

pub(crate) fn sample(name: &str) -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR"))
        .join("sample-masks")
        .join(name)
}

pub(crate) fn two_layers() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/cli/two-layers.oas")
}

/// A directory that holds `shapes.wkt`.
pub(crate) fn with_shapes() -> (tempfile::TempDir, PathBuf) {
    let directory = tempfile::tempdir().unwrap();
    let layout = directory.path().join("shapes.wkt");
    fs::write(&layout, SHAPES).unwrap();
    (directory, layout)
}

/// Runs to the exit status expected; returns standard output and standard error.
pub(crate) fn run(command: &mut Command, status: i32) -> (String, String) {
    let output = command.output().unwrap();
    let text = |bytes: &[u8]| String::from_utf8(bytes.to_vec()).unwrap();
    let (out, err) = (text(&output.stdout), text(&output.stderr));
    assert_eq!(output.status.code(), Some(status), "{out}\n{err}");
    (out, err)
}

pub(crate) fn json(text: &str) -> Value {
    serde_json::from_str(text).unwrap_or_else(|error| panic!("{error}: {text}"))
}

pub(crate) fn number(value: &Value, path: &str) -> f64 {
    let found = value.pointer(path).and_then(Value::as_f64);
    found.unwrap_or_else(|| panic!("no number at {path} in {value}"))
}

#[test]
fn help_and_version_go_to_standard_output() {
    let (out, _) = run(shotwright().arg("--version"), 0);
    assert!(out.starts_with("shotwright "), "{out}");
    for command in [
        "quote", "sweep", "compare", "inspect", "fracture", "judge", "hours", "profile",
    ] {
        let (out, err) = run(shotwright().args([command, "--help"]), 0);
        assert!(
            out.contains("Usage: shotwright") && out.contains("Examples:"),
            "{out}"
        );
        assert!(err.is_empty(), "{err}");
    }
}
