//! Hours without a layout, profiles, and numbers that are refused.

use std::fs;

use crate::{json, number, run, shotwright, with_shapes};

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
