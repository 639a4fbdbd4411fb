//! Stages take nouns and give nouns: no stage imports another, nouns import no stage; only `quote` and `cli` know the order.

use std::fs;
use std::path::{Path, PathBuf};

/// Modules that others may import.
const NOUNS: &[&str] = &[
    "units", "number", "geom", "shot", "blur", "target", "profile",
];
/// Modules that may import nouns, and the others named.
const STAGES: &[(&str, &[&str])] = &[
    ("layout", &[]),
    // The mask is made of the nouns of a layout.
    ("mask", &["layout"]),
    ("fracture", &[]),
    ("expose", &[]),
    ("judge", &[]),
    ("write_time", &[]),
    // Reports show the result of a quote.
    ("report", &["quote::result"]),
];
/// Modules that join the stages.
const JOINTS: &[&str] = &["quote", "cli"];

fn source() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("src")
}

/// The text of every file of a module, comments left out.
fn files_of(module: &str) -> Vec<(PathBuf, String)> {
    fn collect(path: &Path, found: &mut Vec<(PathBuf, String)>) {
        if path.is_dir() {
            for entry in fs::read_dir(path).unwrap() {
                collect(&entry.unwrap().path(), found);
            }
        } else if path.extension().is_some_and(|e| e == "rs") {
            let text = fs::read_to_string(path).unwrap();
            let code: Vec<&str> = text
                .lines()
                .map(|l| l.split("//").next().unwrap_or(""))
                .collect();
            found.push((path.to_owned(), code.join("\n")));
        }
    }
    let mut found = Vec::new();
    let root = source();
    for path in [root.join(format!("{module}.rs")), root.join(module)] {
        if path.exists() {
            collect(&path, &mut found);
        }
    }
    found
}

/// What a text imports of this crate: `a::b` for `crate::a::b::c`, each of `crate::{a::b, c}` too.
fn imports(code: &str) -> Vec<String> {
    let path = |text: &str| {
        let end = text.find(|c: char| !(c.is_alphanumeric() || c == '_' || c == ':'));
        let parts: Vec<&str> = text[..end.unwrap_or(text.len())]
            .split("::")
            .filter(|p| !p.is_empty())
            .take(2)
            .collect();
        parts.join("::")
    };
    let mut found = Vec::new();
    for (at, _) in code.match_indices("crate::") {
        let rest = &code[at + "crate::".len()..];
        let Some(group) = rest.strip_prefix('{') else {
            found.push(path(rest));
            continue;
        };
        let mut depth = 1;
        let mut item = String::new();
        for c in group.chars() {
            match c {
                '{' => depth += 1,
                '}' => depth -= 1,
                ',' if depth == 1 => found.push(path(&std::mem::take(&mut item))),
                c if !c.is_whitespace() => item.push(c),
                _ => {}
            }
            if depth == 0 {
                break;
            }
        }
        found.push(path(&item));
    }
    found.retain(|p| !p.is_empty());
    found
}

fn strays(module: &str, allowed: &[&str]) -> Vec<String> {
    let files = files_of(module);
    assert!(!files.is_empty(), "no file read for module `{module}`");
    let mut strays = Vec::new();
    for (path, code) in files {
        for import in imports(&code) {
            let head = import.split("::").next().unwrap_or_default();
            let fine = head == module
                || NOUNS.contains(&head)
                || allowed.iter().any(|a| import == *a || head == *a);
            if !fine {
                strays.push(format!("{} imports crate::{import}", path.display()));
            }
        }
    }
    strays
}

#[test]
fn no_stage_imports_another() {
    let strays: Vec<String> = STAGES
        .iter()
        .flat_map(|(module, allowed)| strays(module, allowed))
        .collect();
    assert!(strays.is_empty(), "{}", strays.join("\n"));
}

#[test]
fn nouns_import_no_stage() {
    let strays: Vec<String> = NOUNS
        .iter()
        .flat_map(|module| strays(module, &[]))
        .collect();
    assert!(strays.is_empty(), "{}", strays.join("\n"));
}

#[test]
fn every_module_is_named_here() {
    let lib = fs::read_to_string(source().join("lib.rs")).unwrap();
    let mut seen = 0;
    for module in lib
        .lines()
        .filter_map(|l| l.strip_prefix("pub mod ")?.strip_suffix(';'))
    {
        let named = NOUNS.contains(&module)
            || STAGES.iter().any(|(stage, _)| *stage == module)
            || JOINTS.contains(&module);
        assert!(
            named,
            "module `{module}` is neither a noun, a stage nor a joint"
        );
        seen += 1;
    }
    assert_eq!(seen, NOUNS.len() + STAGES.len() + JOINTS.len());
}

#[test]
fn imports_are_found_in_every_form() {
    let code = "use crate::judge::{self, Pieces};\nuse crate::{mask, expose::{Exposure, level_at}, units::Nm};\nlet x = crate::fracture::tile::f();";
    assert_eq!(
        imports(code),
        [
            "judge",
            "mask",
            "expose::Exposure",
            "units::Nm",
            "fracture::tile"
        ]
    );
}
