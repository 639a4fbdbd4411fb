//! The same bytes for any number of threads.

use std::collections::BTreeMap;
use std::fs;
use std::path::Path;

use assert_cmd::Command;

/// Every file that a quote writes, and what it prints.
fn quote(threads: &str) -> BTreeMap<String, Vec<u8>> {
    let directory = tempfile::tempdir().unwrap();
    let layout = Path::new(env!("CARGO_MANIFEST_DIR")).join("sample-masks/shapes.wkt");
    let output = Command::new(env!("CARGO_BIN_EXE_shotwright"))
        .arg("quote")
        .arg(layout)
        .args([
            "--slot-h",
            "24",
            "--effort",
            "quick",
            "--threads",
            threads,
            "--out",
        ])
        .arg(directory.path().join("out"))
        .output()
        .unwrap();
    assert_eq!(output.status.code(), Some(0), "{output:?}");
    let mut files: BTreeMap<String, Vec<u8>> = fs::read_dir(directory.path().join("out"))
        .unwrap()
        .map(|entry| {
            let path = entry.unwrap().path();
            let name = path.file_name().unwrap().to_string_lossy().into_owned();
            (name, fs::read(path).unwrap())
        })
        .collect();
    files.insert("standard output".to_owned(), output.stdout);
    files
}

#[test]
fn one_thread_and_two_write_the_same_bytes() {
    let (one, two) = (quote("1"), quote("2"));
    assert!(one.len() >= 6, "{:?}", one.keys());
    assert_eq!(
        one.keys().collect::<Vec<_>>(),
        two.keys().collect::<Vec<_>>()
    );
    for (name, bytes) in &one {
        assert!(bytes == &two[name], "{name} differs");
    }
}
