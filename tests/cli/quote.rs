//! Whole quotes and their files.

use std::fs;

use crate::{SHAPES, json, number, run, shotwright, with_shapes};

#[test]
fn a_quote_says_whether_it_fits_and_writes_its_files() {
    let (directory, layout) = with_shapes();
    let out = directory.path().join("out");
    let mut command = shotwright();
    command
        .arg("quote")
        .arg(&layout)
        .args(["--slot-h", "24", "--out"])
        .arg(&out);
    let (text, _) = run(&mut command, 0);
    for word in [
        "staircase",
        "overlap",
        "Fits the slot of 24 h",
        "profile shaped-400, sigma 14 nm",
        "for the clip alone",
        "This is an estimate",
    ] {
        assert!(text.contains(word), "{word}: {text}");
    }
    let quote = json(&fs::read_to_string(out.join("quote.json")).unwrap());
    for method in ["staircase", "tile", "overlap"] {
        let fracture = &quote["fractures"][method];
        let lines = |file: &str| fs::read_to_string(out.join(file)).unwrap().lines().count() as f64;
        if method != "staircase" {
            assert_eq!(
                lines(&format!("shots-{method}.csv")),
                1.0 + number(fracture, "/shots")
            );
            assert_eq!(fracture["prints_within_tolerance"], true);
        }
        for path in [
            "/smallest_side_nm",
            "/slivers",
            "/edge_error_nm/mean",
            "/edge_error_nm/p95",
            "/edge_error_nm/worst",
            "/out_of_tolerance_share",
            "/margin_nm_per_pct/median",
            "/margin_nm_per_pct/worst",
        ] {
            number(fracture, path);
        }
        let parts: f64 = ["flash_h", "settle_h", "subfield_h", "stage_h", "overhead_h"]
            .iter()
            .map(|part| number(fracture, &format!("/hours/{part}")))
            .sum();
        let total = number(fracture, "/hours/total_h");
        assert!((parts - total).abs() < 1e-9 * total);
    }
    assert!(quote["verdict"]["fits"] == "yes" && quote["flags"].is_array());
    assert!(quote["recommended"].is_string());
    assert!(fs::metadata(out.join("overview.png")).unwrap().len() > 1000);
    assert_eq!(
        fs::read_to_string(out.join("figures.csv"))
            .unwrap()
            .lines()
            .count(),
        3
    );

    let mut command = shotwright();
    command
        .arg("quote")
        .arg(&layout)
        .args(["--slot-h", "0.5", "--json"]);
    let (text, err) = run(&mut command, 1);
    assert_eq!(json(&text)["verdict"]["fits"], "no");
    assert!(err.contains("no files written"), "{err}");
}

#[test]
fn a_quote_of_a_field_counts_copies_of_the_clip() {
    let (_directory, layout) = with_shapes();
    let mut command = shotwright();
    command
        .arg("quote")
        .arg(&layout)
        .args(["--slot-h", "1000", "--effort", "quick"]);
    command.args([
        "--field-mm",
        "10x10",
        "--coverage",
        "0.5",
        "--settle-ns",
        "0",
        "--json",
    ]);
    let output = command.output().unwrap();
    let quote = json(&String::from_utf8(output.stdout).unwrap());
    let tile = &quote["fractures"]["tile"];
    assert_eq!(number(tile, "/hours/settle_h"), 0.0);
    // By hand: every shot of the clip at the shares of the field over the clip's box, flashed in D·Q/J.
    assert_eq!(number(&quote, "/scaled_to_field/coverage"), 0.5);
    assert!(number(tile, "/hours/flash_h") > 0.01, "{tile}");
    let mut command = shotwright();
    command
        .arg("quote")
        .arg(&layout)
        .args(["--field-mm", "10x10"]);
    let (_, error) = run(&mut command, 2);
    assert!(error.contains("--coverage"), "{error}");
}

#[test]
fn a_hair_is_flagged_as_not_printable() {
    let (directory, _) = with_shapes();
    let layout = directory.path().join("hair.wkt");
    let hair = "POLYGON ((0 600, 300 600, 300 610, 0 610, 0 600))";
    fs::write(&layout, format!("{SHAPES}{hair}\n")).unwrap();
    let mut command = shotwright();
    command
        .arg("quote")
        .arg(&layout)
        .args(["--effort", "quick", "--json"]);
    let (out, _) = run(&mut command, 0);
    let quote = json(&out);
    let flag = &quote["flags"][0];
    assert_eq!(flag["kind"], "not_printable_at_this_blur");
    assert!((number(flag, "/number") - 10.0).abs() < 0.2, "{flag}");
    let near = |path, expected: f64| (number(flag, path) - expected).abs() < 1.0;
    assert!(
        near("/place_nm/0", 0.0) && near("/place_nm/1", 600.0),
        "{flag}"
    );
    let remedy = flag["remedy"].as_str().unwrap();
    assert!(remedy.contains("widen it to 18.9 nm"), "{remedy}"); // 1.349 σ, σ = 14
}

#[test]
fn a_raster_writer_has_hours_but_no_shots() {
    let (_directory, layout) = with_shapes();
    let mut command = shotwright();
    command
        .arg("quote")
        .arg(&layout)
        .args(["--profile", "raster"]);
    let (_, error) = run(&mut command, 2);
    assert!(error.contains("raster writer flashes no shots"), "{error}");
    // 137.28 cm² at 100 µC/cm² and 1 µA: 3.813 h (t = D·A/I).
    let mut command = shotwright();
    command.args([
        "hours",
        "--shots",
        "0",
        "--beam-na",
        "1000",
        "--base-dose-uc-cm2",
        "100",
    ]);
    let (out, _) = run(command.args(["--field-mm", "104x132", "--json"]), 0);
    assert!(
        (number(&json(&out), "/total_h") - 3.813).abs() < 5e-4,
        "{out}"
    );
}
