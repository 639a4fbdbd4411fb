//! One quote of each kind on a sample mask: fits, does not fit, fits only with overlap, fits only after remedies.

use std::path::Path;

use assert_cmd::Command;
use serde_json::Value;

/// A quote of the isolated features as a clip of half a field, with its exit status.
fn quoted(slot_h: Option<f64>, flags: &[&str]) -> (Value, i32) {
    quoted_of("iso.oas", slot_h, flags)
}

/// The same of any sample mask.
fn quoted_of(mask: &str, slot_h: Option<f64>, flags: &[&str]) -> (Value, i32) {
    let masks = Path::new(env!("CARGO_MANIFEST_DIR")).join("sample-masks");
    let layout = masks.join(mask);
    let mut command = Command::new(env!("CARGO_BIN_EXE_shotwright"));
    command.arg("quote").arg(layout).args([
        "--field-mm",
        "104x132",
        "--coverage",
        "0.5",
        "--effort",
        "quick",
        "--json",
    ]);
    if let Some(slot) = slot_h {
        command.arg(format!("--slot-h={slot}"));
    }
    let output = command.args(flags).output().unwrap();
    let text = String::from_utf8(output.stdout).unwrap();
    let quote = serde_json::from_str(&text).unwrap_or_else(|error| {
        panic!("{error}: {text}{}", String::from_utf8_lossy(&output.stderr))
    });
    (quote, output.status.code().unwrap())
}

fn number(quote: &Value, path: &str) -> f64 {
    let found = quote.pointer(path).and_then(Value::as_f64);
    found.unwrap_or_else(|| panic!("no number at {path} in {quote}"))
}

fn text<'a>(quote: &'a Value, path: &str) -> &'a str {
    let found = quote.pointer(path).and_then(Value::as_str);
    found.unwrap_or_else(|| panic!("no text at {path} in {quote}"))
}

/// One number of the hours of a fracture.
fn hours(quote: &Value, method: &str, part: &str) -> f64 {
    number(quote, &format!("/fractures/{method}/hours/{part}"))
}

#[test]
fn each_kind_of_verdict_on_the_isolated_features() {
    let (free, status) = quoted(None, &[]);
    assert_eq!((status, text(&free, "/verdict/fits")), (0, "cannot_say"));
    assert_eq!(text(&free, "/recommended"), "overlap");
    let (overlap_high, tile_low) = (
        hours(&free, "overlap", "high_h"),
        hours(&free, "tile", "low_h"),
    );
    assert!(overlap_high < tile_low, "{overlap_high} {tile_low}");
    let beam = hours(&free, "overlap", "flash_h") + hours(&free, "overlap", "settle_h");

    // Fits in both fractures.
    let (fits, status) = quoted(Some(hours(&free, "tile", "high_h") + 0.1), &[]);
    assert_eq!((status, text(&fits, "/verdict/fits")), (0, "yes"));
    assert!(text(&fits, "/verdict/sentence").contains("and as tile"));
    assert!(fits["must_change"].is_null());

    // Fits only with overlap.
    let (only, status) = quoted(Some(0.5 * (overlap_high + tile_low)), &[]);
    assert_eq!((status, text(&only, "/verdict/fits")), (0, "yes"));
    assert_eq!(text(&only, "/recommended"), "overlap");
    assert!(text(&only, "/verdict/sentence").contains("not surely as tile"));

    // Fits only after remedies: the list brings it in, is the shortest, and is quoted again.
    let slot = overlap_high - 0.1 * beam;
    let directory = tempfile::tempdir().unwrap();
    let out = directory.path().join("quote");
    let (late, status) = quoted(Some(slot), &["--out", out.to_str().unwrap()]);
    assert_eq!(status, 1);
    assert_ne!(text(&late, "/verdict/fits"), "yes");
    let change = &late["must_change"];
    assert_eq!(text(change, "/fits_after"), "yes", "{change}");
    assert!(number(change, "/hours_after/high_h") <= slot && change["missing_h"].is_null());
    let changes = change["changes"].as_array().unwrap();
    assert!(!changes.is_empty() && changes.len() < 7, "{change}");
    let saved: Vec<f64> = changes
        .iter()
        .map(|c| number(c, "/trial/saved_s"))
        .collect();
    assert!(saved.is_sorted_by(|a, b| a >= b) && saved.iter().all(|s| *s > 0.0));
    // All that is saved is beam time, so the hours fall by it; without the last change it would not fit.
    let fallen =
        3600.0 * (hours(&late, "overlap", "total_h") - number(change, "/hours_after/total_h"));
    let sum: f64 = saved.iter().sum();
    // Calibrations of 60 s come off in whole ones, one for every half hour.
    let calibrations = 60.0 * (sum / 1800.0).ceil();
    assert!(
        (fallen - sum).abs() < 0.02 * sum + calibrations,
        "{fallen} {sum}"
    );
    let least = saved.last().unwrap() / 3600.0;
    assert!(number(change, "/hours_after/high_h") + 1.2 * least + 0.05 > slot);
    // Edge error is what it is paid with.
    assert!(number(change, "/edge_error_after_nm/worst") <= 4.0 + 1e-9);
    assert!(
        changes
            .iter()
            .all(|c| number(c, "/trial/edge_error_nm/worst") <= 4.0 + 1e-9)
    );
    let csv = std::fs::read_to_string(out.join("remedies.csv")).unwrap();
    let must = csv
        .lines()
        .filter(|line| line.split(',').nth(2) == Some("true"));
    assert_eq!(must.count(), changes.len(), "{csv}");

    // Does not fit whatever is changed: hours are missing.
    let little = hours(&late, "overlap", "total_h") - 0.8 * beam;
    let (hopeless, status) = quoted(Some(little), &[]);
    assert_eq!((status, text(&hopeless, "/verdict/fits")), (1, "no"));
    let change = &hopeless["must_change"];
    assert_ne!(text(change, "/fits_after"), "yes");
    let missing = number(change, "/missing_h");
    assert!(
        (missing - (number(change, "/hours_after/high_h") - little)).abs() < 1e-9 && missing > 0.0
    );
    assert_eq!(change["changes"].as_array().unwrap().len(), 7);

    // Nor if nothing is flashed at all.
    let (never, status) = quoted(Some(0.5), &[]);
    assert_eq!(status, 1);
    assert!(text(&never, "/must_change/sentence").contains("without a single flash"));
}

/// A list from a sample would not be the shortest: it is said that there is none, in the place of the list.
#[test]
fn what_must_change_is_not_worked_out_from_a_sample() {
    let directory = tempfile::tempdir().unwrap();
    let out = directory.path().join("quote");
    let flags = ["--sample", "30", "--out", out.to_str().unwrap()];
    let (late, status) = quoted_of("mixed.oas", Some(8.0), &flags);
    assert_eq!((status, number(&late, "/sample/figures_drawn")), (1, 30.0));
    assert!(late["must_change"].is_null());
    let why = text(&late, "/must_change_unknown");
    assert!(why.contains("not worked out from a sample"), "{why}");
    let page = std::fs::read_to_string(out.join("report.html")).unwrap();
    assert!(page.contains("What must change: not worked out from a sample"));
    // What no list can mend is known without one.
    let (never, _) = quoted_of("mixed.oas", Some(0.5), &["--sample", "30"]);
    let why = text(&never, "/must_change_unknown");
    assert!(why.contains("without a single flash"), "{why}");
    let (fits, status) = quoted_of("mixed.oas", Some(100.0), &["--sample", "30"]);
    assert_eq!((status, &fits["must_change_unknown"]), (0, &Value::Null));
}

/// Where every figure is drawn, the quote is the exact one: of figures apart, and of dense ones, some of which their neighbours' shots undo and which
/// are fitted anew.
#[test]
fn a_sample_of_all_figures_is_the_exact_quote() {
    for (mask, window) in [
        ("iso.oas", &[][..]),
        ("dense.oas", &["--window=0,0,1500,1500"]),
    ] {
        let (mut exact, _) = quoted_of(mask, None, window);
        let (mut drawn, _) = quoted_of(mask, None, &[window, &["--within", "2%"]].concat());
        assert_eq!(text(&drawn, "/sample/stopped"), "all_drawn");
        let figures = number(&drawn, "/sources/0/figures_distinct");
        assert_eq!(number(&drawn, "/sample/figures_drawn"), figures);
        for quote in [&mut exact, &mut drawn] {
            quote["sample"] = Value::Null;
        }
        assert_eq!(exact, drawn, "{mask}");
    }
}
