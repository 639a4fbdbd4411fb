//! The program as its user meets it: every subcommand, good and bad input, exit status, where text goes.

use std::fs;
use std::path::{Path, PathBuf};

use assert_cmd::Command;
use serde_json::Value;
use shotwright::geom::{Orientation, Point, Rect, Ring};
use shotwright::layout::{self, Layout};

/// A disc of 24 edges, 200 nm across, and a square of 180 nm, 300 nm apart.
const SHAPES: &str = "POLYGON ((100 0, 96.6 25.9, 86.6 50, 70.7 70.7, 50 86.6, 25.9 96.6, 0 100, -25.9 96.6, -50 86.6, -70.7 70.7, -86.6 50, -96.6 25.9, -100 0, -96.6 -25.9, -86.6 -50, -70.7 -70.7, -50 -86.6, -25.9 -96.6, 0 -100, 25.9 -96.6, 50 -86.6, 70.7 -70.7, 86.6 -50, 96.6 -25.9, 100 0))
POLYGON ((400 -90, 580 -90, 580 90, 400 90, 400 -90))
";

fn shotwright() -> Command {
    Command::new(env!("CARGO_BIN_EXE_shotwright"))
}

fn sample(name: &str) -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR"))
        .join("sample-masks")
        .join(name)
}

fn two_layers() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/cli/two-layers.oas")
}

/// A directory that holds `shapes.wkt`.
fn with_shapes() -> (tempfile::TempDir, PathBuf) {
    let directory = tempfile::tempdir().unwrap();
    let layout = directory.path().join("shapes.wkt");
    fs::write(&layout, SHAPES).unwrap();
    (directory, layout)
}

/// Runs to the exit status expected; returns standard output and standard error.
fn run(command: &mut Command, status: i32) -> (String, String) {
    let output = command.output().unwrap();
    let text = |bytes: &[u8]| String::from_utf8(bytes.to_vec()).unwrap();
    let (out, err) = (text(&output.stdout), text(&output.stderr));
    assert_eq!(output.status.code(), Some(status), "{out}\n{err}");
    (out, err)
}

fn json(text: &str) -> Value {
    serde_json::from_str(text).unwrap_or_else(|error| panic!("{error}: {text}"))
}

fn number(value: &Value, path: &str) -> f64 {
    let found = value.pointer(path).and_then(Value::as_f64);
    found.unwrap_or_else(|| panic!("no number at {path} in {value}"))
}

/// Hours of CHECKS 5: µC/cm² ÷ A/cm² = µs by definition, worked by hand.
#[test]
fn hours_without_a_layout() {
    for (shots, dose, current, settle, expected) in [
        ("1e11", "20", "200", "100", 8.333),
        ("3e11", "25", "400", "60", 15.208),
        ("5e11", "30", "1200", "50", 17.361),
        ("1e12", "75", "1200", "50", 45.139),
    ] {
        let args = [
            "hours",
            "--shots",
            shots,
            "--base-dose-uc-cm2",
            dose,
            "--current-a-cm2",
            current,
            "--settle-ns",
            settle,
            "--passes",
            "2",
        ];
        let (out, err) = run(shotwright().args(args).arg("--json"), 0);
        assert!(err.is_empty(), "{err}");
        let hours = json(&out);
        let total = number(&hours, "/total_h");
        assert!((total - expected).abs() < 5e-4, "{shots}: {total}");
        let parts: f64 = ["flash_h", "settle_h", "subfield_h", "stage_h", "overhead_h"]
            .iter()
            .map(|part| number(&hours, &format!("/{part}")))
            .sum();
        assert!((parts - total).abs() < 1e-12 * total);
        let (out, _) = run(shotwright().args(args), 0);
        assert!(out.contains(&format!("{expected:.3} h")), "{out}");
    }
}

/// The other rows of CHECKS 5 through the command line. Flash times: with one pass and no settling, hours are shots × flash time.
#[test]
fn hours_of_flashes_stages_and_beams_are_those_of_the_table() {
    let hours = |arguments: &str| {
        let arguments = arguments.split(' ');
        let (out, _) = run(shotwright().arg("hours").args(arguments).arg("--json"), 0);
        json(&out)
    };
    for (dose, current, flash_ns) in [
        (10, 20, 500.0),
        (20, 200, 100.0),
        (25, 400, 62.5),
        (30, 1200, 25.0),
        (75, 1200, 62.5),
    ] {
        let found = hours(&format!(
            "--shots 1e9 --base-dose-uc-cm2 {dose} --current-a-cm2 {current}"
        ));
        let ns = number(&found, "/flash_h") * 3600.0 / 1e9 * 1e9;
        assert!((ns - flash_ns).abs() < 1e-9 * flash_ns, "{ns} ns");
        assert_eq!(number(&found, "/total_h"), number(&found, "/flash_h"));
    }
    for (arguments, expected, digits) in [
        // Gaussian-beam rule t = D·A/I, published clean-room figures: 34.7 h, 16.7 min.
        (
            "--shots 0 --beam-na 2 --base-dose-uc-cm2 250 --field-mm 10x10",
            34.7,
            0.05,
        ),
        (
            "--shots 0 --beam-na 1 --base-dose-uc-cm2 100 --field-mm 1x1",
            16.7 / 60.0,
            0.05 / 60.0,
        ),
        // 1300 stripes of 132 mm at 20 mm/s and 0.5 s a turn; at 50 mm/s the travel is (2.564 − 0.181) · 20/50 h.
        (
            "--shots 0 --base-dose-uc-cm2 25 --current-a-cm2 400 --field-mm 132x104 --stripe-um 80 --stage-mm-s 20 --turn-s 0.5",
            2.564,
            5e-4,
        ),
        (
            "--shots 0 --base-dose-uc-cm2 25 --current-a-cm2 400 --field-mm 132x104 --stripe-um 80 --stage-mm-s 50 --turn-s 0.5",
            1.134,
            5e-4,
        ),
        (
            "--shots 0 --beam-na 1000 --base-dose-uc-cm2 100 --field-mm 104x132",
            3.813,
            5e-4,
        ),
    ] {
        let found = hours(arguments);
        let total = number(&found, "/total_h");
        assert!((total - expected).abs() <= digits, "{arguments}: {total} h");
    }
}

/// By hand from 15.208 h (5.208 h of flashes, 10 h of settling; CHECKS 5): every number of the writer model that needs no place.
#[test]
fn each_number_of_the_writer_model_costs_what_it_says() {
    let base = "--shots 3e11 --base-dose-uc-cm2 25 --current-a-cm2 400 --settle-ns 60 --passes 2";
    let (flash, settle) = (3e11 * 62.5e-9 / 3600.0, 2.0 * 3e11 * 60e-9 / 3600.0);
    for (more, part, expected) in [
        // 30 whole intervals of half an hour in 15.208 h, a minute each.
        (
            " --calibration-every-min 30 --calibration-s 60",
            "overhead_h",
            0.5,
        ),
        (
            " --load-min 10 --soak-min 30 --align-min 5 --unload-min 5",
            "overhead_h",
            50.0 / 60.0,
        ),
        // 12.5 µC/cm² a pass in flashes of 10 at most: two each.
        (" --greatest-flash-uc-cm2 10", "settle_h", 2.0 * settle),
        (" --mean-dose 1.2", "flash_h", 1.2 * flash),
        // A stripe for every 100 µm of 104 mm, twice.
        (
            " --field-mm 132x104 --stripe-um 100 --turn-s 0.4",
            "stage_h",
            2.0 * 1040.0 * 0.4 / 3600.0,
        ),
        // Beam-bound: 15.208 h over 2080 stripes is 26 s each, and the stage needs 3.3 s.
        (
            " --field-mm 132x104 --stripe-um 100 --stage-mm-s 40",
            "stage_h",
            0.0,
        ),
        // Stage-bound: at 4 mm/s it needs 33 s, so it alone counts.
        (
            " --field-mm 132x104 --stripe-um 100 --stage-mm-s 4",
            "total_h",
            2080.0 * 33.0 / 3600.0,
        ),
        // 6.6 million sub-fields a pass in columns of 20 µm and 5 rows a stripe, 0.6 µs each.
        (
            " --field-mm 132x104 --stripe-um 100 --subfield-um 20 --subfield-us 0.6",
            "subfield_h",
            2.0 * 6600.0 * 5200.0 * 0.6e-6 / 3600.0,
        ),
    ] {
        let arguments = format!("{base}{more}");
        let (out, _) = run(
            shotwright()
                .arg("hours")
                .args(arguments.split(' '))
                .arg("--json"),
            0,
        );
        let found = number(&json(&out), &format!("/{part}"));
        assert!(
            (found - expected).abs() <= 1e-9 * expected,
            "{more}: {found}, expected {expected}"
        );
    }
}

#[test]
fn bad_numbers_are_refused_by_name() {
    let hours = |flag: &str, value: &str| {
        let mut command = shotwright();
        command.args(["hours", "--shots", "1e9", "--base-dose-uc-cm2", "25"]);
        command.args(["--current-a-cm2", "400"]);
        command.args([flag, value]);
        run(&mut command, 2).1
    };
    for (flag, value) in [
        ("--settle-ns", "nan"),
        ("--settle-ns", "-1"),
        ("--stage-mm-s", "inf"),
        ("--sigma-nm", "0"),
        ("--passes", "1.5"),
        ("--mean-dose", "-2"),
        ("--field-mm", "104"),
        ("--field-mm", "104x-1"),
        ("--threads", "0"),
    ] {
        let error = hours(flag, value);
        assert!(error.contains(flag) && error.contains(value), "{error}");
    }
    let (_, error) = run(
        shotwright().args(["hours", "--shots", "-3", "--current-a-cm2", "400"]),
        2,
    );
    assert!(
        error.contains("--shots") && error.contains("expected a whole number"),
        "{error}"
    );
    let (_, error) = run(shotwright().args(["hours", "--shots", "3"]), 2);
    assert!(error.contains("--current-a-cm2 is not given"), "{error}");
}

#[test]
fn profiles_are_listed_printed_and_read_again() {
    let (out, _) = run(shotwright().arg("profile"), 0);
    assert!(
        out.lines().count() >= 6 && out.contains("shaped-400"),
        "{out}"
    );
    let (text, _) = run(shotwright().args(["profile", "shaped-800"]), 0);
    let (directory, _) = with_shapes();
    let file = directory.path().join("mine.toml");
    fs::write(&file, &text).unwrap();
    let hours = |profile: &str| {
        let mut command = shotwright();
        command.args(["hours", "--shots", "1e10", "--profile", profile, "--json"]);
        run(&mut command, 0).0
    };
    assert_eq!(hours("shaped-800"), hours(file.to_str().unwrap()));
    fs::write(&file, text.replace("settle_ns", "setle_ns")).unwrap();
    let (_, error) = run(
        shotwright()
            .args(["hours", "--shots", "1", "--profile"])
            .arg(&file),
        2,
    );
    assert!(
        error.contains("mine.toml:") && error.contains("`setle_ns`"),
        "{error}"
    );
    let (_, error) = run(shotwright().args(["profile", "nobody"]), 2);
    assert!(error.contains("no built-in profile `nobody`"), "{error}");
}

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
    let unit = (layout.unit.0 * 1000.0).round() as i64;
    let top = &layout.cells[0];
    let mut found = Vec::new();
    for placement in &top.placements {
        for by in placement.repetition.displacements() {
            let at = |p: Point| {
                let p = Point::new(p.x, if placement.mirror { -p.y } else { p.y });
                let turns = (placement.angle_deg / 90.0) as u8;
                Orientation::new(false, turns).apply(p) + placement.origin + by
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
    let pm = |nm: &str| (nm.parse::<f64>().unwrap() * 1000.0).round() as i64;
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
