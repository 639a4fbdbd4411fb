//! Shot lists: written, read back, judged, bounded.

use std::fs;
use std::path::Path;

use shotwright::geom::{Orientation, Point, Rect, Ring};
use shotwright::layout::{self, Layout};
use shotwright::units::Nm;

use crate::{SHAPES, json, number, run, shotwright, with_shapes};

#[test]
fn fractured_shots_are_judged_alike_when_read_back() {
    let (directory, layout) = with_shapes();
    let csv = directory.path().join("shots.csv");
    for method in ["staircase", "tile", "overlap"] {
        let mut command = shotwright();
        command
            .arg("fracture")
            .arg(&layout)
            .args(["--method", method]);
        command.args(["--sigma-nm", "12", "--tolerance-nm", "2", "--json", "-o"]);
        let output = command.arg(&csv).output().unwrap();
        let made = json(&String::from_utf8(output.stdout).unwrap());
        let mut command = shotwright();
        command.arg("judge").arg(&layout).arg(&csv);
        command.args(["--sigma-nm", "12", "--tolerance-nm", "2", "--json"]);
        let judged = command.output().unwrap();
        assert_eq!(judged.status.code(), output.status.code(), "{method}");
        let judged = json(&String::from_utf8(judged.stdout).unwrap());
        for same in [
            "shots",
            "smallest_side_nm",
            "slivers",
            "prints_within_tolerance",
            "shots_beyond_limits",
        ] {
            assert_eq!(made[same], judged[same], "{method}: {same}");
        }
        // Samples of a ring begin elsewhere in another frame, and sums round differently.
        for near in [
            "/edge_error_nm/worst",
            "/margin_nm_per_pct/median",
            "/out_of_tolerance_share",
        ] {
            let (a, b) = (number(&made, near), number(&judged, near));
            assert!((a - b).abs() < 0.02, "{method}: {near} is {a}, then {b}");
        }
        if method != "staircase" {
            assert_eq!(made["prints_within_tolerance"], true, "{method}");
            assert_eq!(output.status.code(), Some(0), "{method}");
        }
        let text = fs::read_to_string(&csv).unwrap();
        assert!(text.starts_with("figure,place,x_nm,y_nm,w_nm,h_nm,dose\n"));
        assert_eq!(text.lines().count() as f64, 1.0 + number(&made, "/shots"));
    }
}

/// Lower-left corner and size, pm, of every shot in a layout written by the program, sorted.
fn drawn_shots(layout: &Layout) -> Vec<[i64; 4]> {
    let unit = layout.unit.to_pm().unwrap();
    let top = &layout.cells[0];
    let mut found = Vec::new();
    for placement in &top.placements {
        for by in placement.repetition.displacements() {
            let at = |p: Point| {
                let p = Point::new(p.x, if placement.mirror { -p.y } else { p.y });
                let turns = (0..4).find(|&q| f64::from(q) * 90.0 == placement.angle_deg);
                Orientation::new(false, turns.unwrap()).apply(p) + placement.origin + by
            };
            for shape in layout.cells[placement.cell.0].shapes.iter() {
                if shape.layer.layer != 1 {
                    continue;
                }
                for d in shape.repetition.displacements() {
                    let around = Rect::around(shape.points.iter().map(|p| at(p + d))).unwrap();
                    let sides = [around.width(), around.height()];
                    found.push([around.min.x, around.min.y, sides[0], sides[1]].map(|v| v * unit));
                }
            }
        }
    }
    found.sort_unstable();
    found
}

#[test]
fn shots_go_into_a_layout_as_into_a_table() {
    let (directory, layout) = with_shapes();
    let fracture = |file: &str, more: &[&str]| {
        let path = directory.path().join(file);
        let mut command = shotwright();
        command
            .arg("fracture")
            .arg(&layout)
            .args(["--method", "tile"]);
        command
            .args(["--sigma-nm", "12", "-o"])
            .arg(&path)
            .args(more);
        run(&mut command, 0);
        path
    };
    let pm = |nm: &str| Nm(nm.parse().unwrap()).to_pm().unwrap();
    let table = fs::read_to_string(fracture("shots.csv", &[])).unwrap();
    let mut expected: Vec<[i64; 4]> = table
        .lines()
        .skip(1)
        .map(|line| line.split(',').skip(2).take(4).map(pm).collect::<Vec<_>>())
        .map(|four| four.try_into().unwrap())
        .collect();
    expected.sort_unstable();
    assert!(expected.len() > 4);
    for file in ["shots.oas", "shots.gds"] {
        let written = layout::open(fracture(file, &["--contours"])).unwrap();
        assert_eq!(drawn_shots(&written), expected, "{file}");
        // Both figures have one contour, at most the tolerance of 2 nm and the corners off the drawn outline.
        let contours: Vec<f64> = written
            .cells
            .iter()
            .flat_map(|cell| cell.shapes.iter())
            .filter(|shape| shape.layer.layer == 2)
            .map(|shape| Ring::new(shape.points.iter().collect()).unwrap())
            .map(|ring| ring.area_two() as f64 / 2.0 * written.unit.0.powi(2))
            .collect();
        let disc = 0.5 * 24.0 * 1e4 * 15_f64.to_radians().sin();
        let drawn = [disc, 180.0 * 180.0];
        assert_eq!(contours.len(), 2, "{file}");
        for want in drawn {
            let near = |found: &&f64| (**found - want).abs() < 0.04 * want;
            assert!(
                contours.iter().any(|c| near(&c)),
                "{file}: {contours:?}, {want}"
            );
        }
    }
    let mut command = shotwright();
    command
        .arg("fracture")
        .arg(&layout)
        .args(["--method", "tile"]);
    command.args(["--sigma-nm", "12", "--contours", "-o"]);
    let (_, err) = run(command.arg(directory.path().join("shots.csv")), 2);
    assert!(err.contains("--contours needs a layout"), "{err}");
}

/// A shot list with a gap, and one with a shot far off: both must fail.
#[test]
fn judge_sees_what_is_missing_and_what_is_too_much() {
    let (directory, layout) = with_shapes();
    let csv = directory.path().join("shots.csv");
    let square = "x_nm,y_nm,w_nm,h_nm\n400,-90,180,180\n";
    let only_square = directory.path().join("square.wkt");
    fs::write(&only_square, SHAPES.lines().nth(1).unwrap()).unwrap();
    let judge = |layout: &Path, shots: &str, status| {
        fs::write(&csv, shots).unwrap();
        let mut command = shotwright();
        command
            .arg("judge")
            .arg(layout)
            .arg(&csv)
            .args(["--sigma-nm", "12", "--json"]);
        let (out, err) = run(&mut command, status);
        (json(&out), err)
    };
    let (exact, _) = judge(&only_square, square, 0);
    // Where the corner zone ends, 2 σ along the edge, the other edge takes 1 − Φ(2) of the dose: (½ − ½·Φ(2))/(0.398942/σ).
    let greatest = 0.5 * 0.022_750 * 12.0 / 0.398_942;
    assert!(number(&exact, "/edge_error_nm/worst") < greatest, "{exact}");
    // Closed form: at a wide edge 1 % of dose moves the contour by 0.01·½/(0.398942/σ).
    let margin = number(&exact, "/margin_nm_per_pct/median");
    assert!(
        (margin - 0.005 * 12.0 / 0.398_942).abs() < 0.002,
        "{margin}"
    );
    let (missing, err) = judge(&layout, square, 1);
    assert_eq!(missing["figures_out_of_tolerance"], 1);
    assert!(err.contains("does not print within tolerance"), "{err}");
    let far = format!("{square}5000,5000,100,100\n");
    let (stray, err) = judge(&only_square, &far, 1);
    assert_eq!(stray["stray_shots"], 1);
    assert_eq!(stray["prints_within_tolerance"], false);
    assert!(err.contains("further than 5 σ"), "{err}");
    fs::write(&csv, "x_nm,y_nm,w_nm,h_nm\n0,0,nan,5\n").unwrap();
    let mut command = shotwright();
    command
        .arg("judge")
        .arg(&layout)
        .arg(&csv)
        .args(["--sigma-nm", "12"]);
    let (_, error) = run(&mut command, 2);
    assert!(
        error.contains("shots.csv: line 2, column w_nm: found `nan`"),
        "{error}"
    );
}

#[test]
fn shots_go_to_standard_output_and_the_summary_aside() {
    let (_directory, layout) = with_shapes();
    let mut command = shotwright();
    command.arg("fracture").arg(&layout);
    command.args(["--method", "overlap", "--sigma-nm", "12", "-o", "-"]);
    let (out, err) = run(&mut command, 0);
    assert!(out.starts_with("figure,place,"), "{out}");
    assert!(err.contains("prints within tolerance"), "{err}");
    let (_, error) = run(command.arg("--json"), 2);
    assert!(error.contains("standard output"), "{error}");
}

#[test]
fn a_lower_bound_is_proved_if_asked() {
    let (_directory, layout) = with_shapes();
    let mut command = shotwright();
    command.arg("fracture").arg(&layout);
    command.args(["--method", "overlap", "--sigma-nm", "12"]);
    let (out, _) = run(command.arg("--json"), 0);
    assert!(json(&out)["lower_bound"].is_null(), "{out}");
    let (out, _) = run(command.arg("--bound"), 0);
    let answer = json(&out);
    let (bound, shots) = (number(&answer, "/lower_bound"), number(&answer, "/shots"));
    // One shot at least for each of the two figures.
    assert!((2.0..=shots).contains(&bound), "{bound} of {shots}");
    let mut command = shotwright();
    command.arg("fracture").arg(&layout).arg("--bound");
    command.args(["--sigma-nm", "12", "--method"]);
    let (_, error) = run(command.arg("staircase"), 2);
    assert!(error.contains("--bound is for --method overlap"), "{error}");
}

/// By hand: the bump is cut off as one sliver of 10 nm, or three upright tiles have none.
#[test]
fn slivers_can_be_bought_off_and_the_price_is_shown() {
    let (directory, _) = with_shapes();
    let bump = directory.path().join("bump.wkt");
    fs::write(
        &bump,
        "POLYGON ((0 0, 300 0, 300 100, 200 100, 200 110, 100 110, 100 100, 0 100, 0 0))",
    )
    .unwrap();
    for (prefer, shots, slivers) in [("shots", 2.0, 1.0), ("slivers", 3.0, 0.0)] {
        let mut command = shotwright();
        command.arg("fracture").arg(&bump).args([
            "--method",
            "tile",
            "--exact",
            "--sigma-nm",
            "12",
            "--json",
        ]);
        command.args([
            "--sliver-nm",
            "20",
            "--min-side-nm",
            "8",
            "--tolerance-nm",
            "10",
            "--prefer",
            prefer,
        ]);
        let (out, _) = run(&mut command, 0);
        let answer = json(&out);
        assert_eq!(
            (number(&answer, "/shots"), number(&answer, "/slivers")),
            (shots, slivers),
            "{prefer}: {out}"
        );
        assert_eq!(
            out.contains("1 shots more than the least"),
            prefer == "slivers",
            "{out}"
        );
    }
}

#[test]
fn a_figure_out_of_tolerance_ends_a_fracture_with_status_1() {
    let (directory, _) = with_shapes();
    let hair = directory.path().join("hair.wkt");
    // 10 nm wide under a blur of 12 nm: under 1.349 σ no line prints at dose 1, and tiles do not overlap.
    fs::write(&hair, "POLYGON ((0 0, 300 0, 300 10, 0 10, 0 0))").unwrap();
    let mut command = shotwright();
    command
        .arg("fracture")
        .arg(&hair)
        .args(["--method", "tile", "--sigma-nm", "12"]);
    let (_, err) = run(&mut command, 1);
    assert!(
        err.contains("figure 0 at") && err.contains("must print"),
        "{err}"
    );
}
