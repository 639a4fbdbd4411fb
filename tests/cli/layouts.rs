//! What is taken of a layout, how it goes onto the mask, and what is refused.

use std::fs;

use crate::{json, number, run, sample, shotwright, two_layers, with_shapes};

#[test]
fn inspect_counts_what_a_layout_holds() {
    let (out, _) = run(shotwright().arg("inspect").arg(two_layers()), 0);
    assert!(out.contains("1/0") && out.contains("10/0"), "{out}");
    let (out, _) = run(
        shotwright()
            .arg("inspect")
            .arg(sample("array-block.gds"))
            .arg("--json"),
        0,
    );
    let contents = json(&out);
    assert_eq!(contents["layers"][0]["layer"], "1/0");
    assert_eq!(number(&contents, "/layers/0/polygons"), 1431.0);
    assert_eq!(number(&contents, "/layers/0/curved_share"), 0.0);
    let (out, _) = run(
        shotwright()
            .args(["inspect", "--layer", "1/0", "--scale", "4", "--json"])
            .arg(two_layers()),
        0,
    );
    let contents = json(&out);
    assert_eq!(contents["layers"].as_array().map(Vec::len), Some(1));
    assert_eq!(number(&contents, "/layers/0/extent_nm/0"), 4.0 * 2594.0);
}

#[test]
fn layouts_that_cannot_be_taken_are_refused_with_place_found_and_expected() {
    let (directory, _) = with_shapes();
    let broken = directory.path().join("broken.wkt");
    fs::write(&broken, "POLYGON ((0 0, 1 x, 2 2, 0 0))").unwrap();
    let (_, error) = run(shotwright().arg("inspect").arg(&broken), 2);
    assert!(
        error.contains("broken.wkt: line 1, column") && error.contains("expected"),
        "{error}"
    );
    let (_, error) = run(
        shotwright()
            .args(["quote", "--slot-h", "24"])
            .arg(two_layers()),
        2,
    );
    assert!(
        error.contains("1/0 (7 polygons), 10/0 (1 polygon)") && error.contains("hint: "),
        "{error}"
    );
    let (_, error) = run(
        shotwright()
            .args([
                "fracture",
                "--method",
                "tile",
                "--sigma-nm",
                "12",
                "--layer",
                "7/7",
            ])
            .arg(two_layers()),
        2,
    );
    assert!(error.contains("layer 7/7 holds no polygon"), "{error}");
    let (_, error) = run(shotwright().args(["inspect", "nowhere.gds"]), 2);
    assert!(error.contains("nowhere.gds: cannot be read"), "{error}");
}

/// Shots (x, y, w, h) of a bar from (0, 0) to (300, 200) nm, taken as the arguments say.
fn bar_shots(arguments: &[&str], status: i32) -> Vec<[f64; 4]> {
    let directory = tempfile::tempdir().unwrap();
    let layout = directory.path().join("bar.wkt");
    fs::write(&layout, "POLYGON ((0 0, 300 0, 300 200, 0 200, 0 0))").unwrap();
    let mut command = shotwright();
    command.arg("fracture").arg(&layout).args(arguments);
    command.args(["--method", "tile", "--sigma-nm", "10", "-o", "-"]);
    let (out, _) = run(&mut command, status);
    let rows = out.lines().skip(1).map(|line| {
        let fields: Vec<f64> = line.split(',').map(|x| x.parse().unwrap()).collect();
        [fields[2], fields[3], fields[4], fields[5]]
    });
    rows.collect()
}

#[test]
fn a_layout_goes_onto_the_mask_as_asked() {
    for (arguments, expected) in [
        (&["--mirror"][..], [-300.0, 0.0, 300.0, 200.0]),
        (&["--shift-nm", "-50,7.5"], [-50.0, 7.5, 300.0, 200.0]),
        // Mirrored first, then shifted.
        (
            &["--shift-nm", "100,0", "--mirror"],
            [-200.0, 0.0, 300.0, 200.0],
        ),
        (&["--bias-nm", "4"], [-4.0, -4.0, 308.0, 208.0]),
        (&["--bias-nm", "-4"], [4.0, 4.0, 292.0, 192.0]),
        // Scaled first: a bias is at mask scale.
        (
            &["--scale", "2", "--bias-nm", "1"],
            [-1.0, -1.0, 602.0, 402.0],
        ),
        (&["--window", "100,-50,1000,50"], [100.0, 0.0, 200.0, 50.0]),
    ] {
        assert_eq!(bar_shots(arguments, 0), [expected], "{arguments:?}");
    }
}

#[test]
fn what_is_not_drawn_of_a_frame_is_exposed() {
    let shots = bar_shots(
        &["--expose", "background", "--frame", "-100,-100,400,300"],
        0,
    );
    // A ring of four sides: 500 × 400 nm without 300 × 200 nm, in four tiles at least.
    let area: f64 = shots.iter().map(|[_, _, w, h]| w * h).sum();
    assert_eq!((shots.len(), area), (4, 140_000.0));
    let within =
        |[x, y, w, h]: &[f64; 4]| *x >= -100.0 && *y >= -100.0 && x + w <= 400.0 && y + h <= 300.0;
    assert!(shots.iter().all(within), "{shots:?}");
}

#[test]
fn a_layer_is_subtracted() {
    let area = |arguments: &[&str]| {
        let mut command = shotwright();
        command.arg("inspect").arg(two_layers()).arg("--json");
        let (out, _) = run(command.args(arguments), 0);
        number(&json(&out), "/layers/0/area_um2")
    };
    let (first, second) = (area(&["--layer", "1/0"]), area(&["--layer", "10/0"]));
    let less = area(&["--layer", "1/0", "--minus", "10/0"]);
    let other = area(&["--layer", "10/0", "--minus", "1/0"]);
    // What both cover is missing from each: |A| − |A∖B| = |B| − |B∖A|.
    let (common, same) = (first - less, second - other);
    assert!(
        common > 0.01 && (common - same).abs() < 1e-6,
        "{common} and {same}"
    );
}

#[test]
fn strict_refuses_what_would_be_repaired() {
    let directory = tempfile::tempdir().unwrap();
    let bow = directory.path().join("bow.wkt");
    fs::write(&bow, "POLYGON ((0 0, 200 200, 200 0, 0 200, 0 0))").unwrap();
    let (out, _) = run(shotwright().arg("inspect").arg(&bow), 0);
    assert!(out.contains("self-crossing"), "{out}");
    let (_, error) = run(shotwright().args(["inspect", "--strict"]).arg(&bow), 2);
    assert!(
        error.contains("bow.wkt: cell `wkt`: polygon 0 with a self-crossing outline"),
        "{error}"
    );
}

#[test]
fn a_quote_says_how_the_layout_went_onto_the_mask() {
    let (_directory, layout) = with_shapes();
    let mut command = shotwright();
    command.arg("quote").arg(&layout).args(["--bias-nm", "3"]);
    command.args(["--mirror", "--window", "-1000,-200,-350,200"]);
    let (text, _) = run(&mut command, 0);
    let said = "scale 1, mirrored, bias 3 nm, window (-1000, -200) to (-350, 200) nm";
    assert!(text.contains(said), "{text}");
    let (out, _) = run(command.arg("--json"), 0);
    let quote = json(&out);
    assert_eq!(number(&quote, "/sources/0/bias_nm"), 3.0);
    // Of the two figures only the square of 180 nm is in the window.
    assert_eq!(number(&quote, "/sources/0/extent_nm/0"), 186.0);
    assert_eq!(quote["sources"][0]["window_nm"][2], -350.0);
}

#[test]
fn rectangles_and_places_that_are_none_are_refused_by_name() {
    let (_directory, layout) = with_shapes();
    for (arguments, expected) in [
        (&["--window", "0,0,0,9"][..], "two corners of a rectangle"),
        (&["--window", "0,0,9"], "two corners of a rectangle"),
        (&["--shift-nm", "nan,0"], "two lengths in nm"),
        (&["--bias-nm", "inf"], "a finite number"),
        (&["--expose", "background"], "--frame"),
        (
            &["--frame", "0,0,9,9"],
            "--frame is for --expose background",
        ),
        (
            &["--minus", "0/0", "--layer", "0/0"],
            "layer 0/0 is both taken and subtracted",
        ),
    ] {
        let (_, error) = run(shotwright().arg("inspect").arg(&layout).args(arguments), 2);
        assert!(error.contains(expected), "{arguments:?}: {error}");
    }
}

#[test]
fn a_mask_without_a_figure_is_no_success() {
    let (_directory, layout) = with_shapes();
    for command in [
        &["fracture", "--method", "tile", "--sigma-nm", "12"][..],
        &["quote"],
    ] {
        let mut far = shotwright();
        far.args(command).arg(&layout);
        far.args(["--window", "5000,5000,6000,6000"]);
        let (_, error) = run(&mut far, 2);
        assert!(error.contains("none in the window"), "{error}");
    }
    let mut command = shotwright();
    command.arg("quote").arg(&layout);
    let (_, error) = run(command.args(["--tolerance-nm", "1e9"]), 2);
    assert!(error.contains("up to 1000"), "{error}");
}
