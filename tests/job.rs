//! Job files, the resolved job, clips that stand for a field, output directories, sweeps and comparisons, as their user meets them.

use std::collections::BTreeMap;
use std::fs;
use std::path::Path;

use assert_cmd::Command;
use serde_json::Value;

/// A square of 200 nm: one tile.
const SQUARE: &str = "POLYGON ((0 0, 200 0, 200 200, 0 200, 0 0))\n";
/// An L of six vertices: two tiles; and a bar.
const ELL: &str = "POLYGON ((0 0, 300 0, 300 100, 100 100, 100 300, 0 300, 0 0))
POLYGON ((1000 0, 1100 0, 1100 400, 1000 400, 1000 0))
";

fn run(arguments: &[&str], status: i32) -> (String, String) {
    let output = Command::new(env!("CARGO_BIN_EXE_shotwright"))
        .args(arguments)
        .output()
        .unwrap();
    let text = |bytes: &[u8]| String::from_utf8(bytes.to_vec()).unwrap();
    let (out, err) = (text(&output.stdout), text(&output.stderr));
    assert_eq!(
        output.status.code(),
        Some(status),
        "{arguments:?}\n{out}\n{err}"
    );
    (out, err)
}

/// A directory with `square.wkt` and `ell.wkt`, and a path in it as text.
struct Place(tempfile::TempDir);

impl Place {
    fn new() -> Self {
        let place = Self(tempfile::tempdir().unwrap());
        fs::write(place.at("square.wkt"), SQUARE).unwrap();
        fs::write(place.at("ell.wkt"), ELL).unwrap();
        place
    }

    fn at(&self, name: &str) -> String {
        self.0.path().join(name).display().to_string()
    }

    fn write(&self, name: &str, text: &str) -> String {
        fs::write(self.at(name), text).unwrap();
        self.at(name)
    }

    fn json(&self, name: &str) -> Value {
        serde_json::from_str(&fs::read_to_string(self.at(name)).unwrap()).unwrap()
    }
}

fn number(value: &Value, path: &str) -> f64 {
    let found = value.pointer(path).and_then(Value::as_f64);
    found.unwrap_or_else(|| panic!("no number at {path} in {value}"))
}

fn files(directory: &Path) -> BTreeMap<String, Vec<u8>> {
    let read = |entry: std::io::Result<fs::DirEntry>| {
        let path = entry.unwrap().path();
        let name = path.file_name().unwrap().to_string_lossy().into_owned();
        (name, fs::read(path).unwrap())
    };
    fs::read_dir(directory).unwrap().map(read).collect()
}

/// A profile of flashes and settling alone, so that hours can be worked by hand.
const PLAIN: &str = r#"
[profile]
name = "plain"
[profile.writer]
kind = "shaped"
current_a_cm2 = 400
settle_ns = 60
passes = 2
[profile.process]
sigma_nm = 12
base_dose_uc_cm2 = 25
"#;

#[test]
fn the_resolved_job_gives_the_same_bytes_again() {
    let place = Place::new();
    let job = place.write(
        "job.toml",
        r#"
slot_h = 100
effort = "quick"
profile = "shaped-800"
field_mm = [10, 20]
peak_dose = 3
[numbers]
settle_ns = { value = 45, plus_minus = 7 }
pass_shift = 0.25
[[clip]]
layout = "ell.wkt"
coverage = 0.25
mirror = true
bias_nm = 1.5
[[clip]]
layout = "square.wkt"
name = "pad"
coverage = 0.5
expose = "background"
frame = [-100, -100, 300, 300]
"#,
    );
    let (first, second) = (place.at("first"), place.at("second"));
    // A flag over the file is in the resolved job too.
    let (out, _) = run(
        &["quote", &job, "--tolerance-nm", "2.5", "--out", &first],
        0,
    );
    let resolved = place.at("first/job.toml");
    let (again, _) = run(&["quote", &resolved, "--out", &second], 0);
    assert_eq!(out, again);
    let (first, second) = (files(Path::new(&first)), files(Path::new(&second)));
    assert_eq!(
        first.keys().collect::<Vec<_>>(),
        second.keys().collect::<Vec<_>>()
    );
    for name in [
        "job.toml",
        "quote.json",
        "report.html",
        "stripes.csv",
        "clip-2-shots-tile.csv",
    ] {
        assert!(first.contains_key(name), "{name} of {:?}", first.keys());
    }
    for (name, bytes) in &first {
        assert!(bytes == &second[name], "{name} differs");
    }
    let quote = place.json("first/quote.json");
    assert_eq!(number(&quote, "/tolerance_nm"), 2.5);
    assert_eq!(number(&quote, "/profile/numbers/settle_ns"), 45.0);
    assert_eq!(quote["sources"][1]["name"], "pad");
    // The ± of the file is in the interval: without it there would be only that of the others.
    let hours = &quote["fractures"]["tile"]["hours"];
    assert!(
        number(hours, "/high_h") > number(hours, "/total_h"),
        "{hours}"
    );

    // Another layout under the same name is not the one of the job.
    fs::write(place.at("ell.wkt"), SQUARE).unwrap();
    let (_, error) = run(&["quote", &resolved], 2);
    assert!(
        error.contains("ell.wkt") && error.contains("CRC-32"),
        "{error}"
    );
}

#[test]
fn flags_override_the_file() {
    let place = Place::new();
    let text = format!(
        "tolerance_nm = 3\neffort = \"quick\"\nflags = 2\nmirror_ = 1\n[numbers]\nsettle_ns = 40\n[[clip]]\nlayout = \"ell.wkt\"\nmirror = true\nscale = 2\n{PLAIN}"
    );
    let job = place.write("job.toml", &text.replace("mirror_ = 1\n", ""));
    let quote = |flags: &[&str]| -> Value {
        let arguments = [&["quote", &job, "--json"], flags].concat();
        serde_json::from_str(&run(&arguments, 0).0).unwrap()
    };
    let file = quote(&[]);
    assert_eq!(number(&file, "/tolerance_nm"), 3.0);
    assert_eq!(number(&file, "/profile/numbers/settle_ns"), 40.0);
    assert_eq!(file["profile"]["name"], "plain");
    assert_eq!(file["sources"][0]["mirror"], true);
    let flags = quote(&[
        "--tolerance-nm",
        "2",
        "--settle-ns",
        "50",
        "--mirror=false",
        "--scale",
        "1",
        "--raster",
        "none",
    ]);
    assert_eq!(number(&flags, "/tolerance_nm"), 2.0);
    assert_eq!(number(&flags, "/profile/numbers/settle_ns"), 50.0);
    assert_eq!(number(&flags, "/profile/numbers/passes"), 2.0);
    assert_eq!(flags["sources"][0]["mirror"], false);
    assert_eq!(number(&flags, "/sources/0/scale"), 1.0);
    assert!(flags["raster"].is_null() && !file["raster"].is_null());
}

#[test]
fn what_a_job_file_cannot_say_is_refused_with_its_line() {
    let place = Place::new();
    let clip = "[[clip]]\nlayout = \"square.wkt\"\n";
    for (text, line, expected) in [
        (
            format!("slot_h = 24\nslothours = 24\n{clip}"),
            2,
            "expected one of `slot_h`",
        ),
        (
            format!("\n\nslot_h = -1\n{clip}"),
            3,
            "found -1, expected a finite number over 0",
        ),
        (format!("tolerance_nm = \"2\"\n{clip}"), 1, "expected f64"),
        (
            format!("effort = \"much\"\n{clip}"),
            1,
            "`quick`, `normal`, `thorough`",
        ),
        (
            format!("field_mm = [1, 2, 3]\n{clip}"),
            1,
            "two lengths over 0 in mm",
        ),
        (
            format!("{clip}window = [0, 0, 0, 9]\n"),
            3,
            "two corners of a rectangle",
        ),
        (
            format!("{clip}layer = [\"x\"]\n"),
            3,
            "expected layer/datatype",
        ),
        (format!("{clip}colour = 1\n"), 3, "unknown field `colour`"),
        (
            format!("{clip}[numbers]\nsetle_ns = 1\n"),
            4,
            "unknown key `setle_ns`",
        ),
        (
            format!("{clip}[numbers]\npasses = 1.5\n"),
            4,
            "a whole number",
        ),
        (
            format!(
                "{clip}[profile]\nname = \"x\"\n[profile.writer]\nkind = \"none\"\n[profile.process]\n"
            ),
            6,
            "\"shaped\" or \"raster\"",
        ),
        (format!("slot_h = 24 24\n{clip}"), 1, ""),
    ] {
        let job = place.write("bad.toml", &text);
        let (_, error) = run(&["quote", &job], 2);
        let at = format!("bad.toml:{line}");
        assert!(
            error.contains(&at) && error.contains(expected),
            "{text}: {error}"
        );
    }
    let (_, error) = run(&["quote", &place.write("none.toml", "slot_h = 1\n")], 2);
    assert!(error.contains("no [[clip]]"), "{error}");
    for alone in [
        "coverage = 0.5\n",
        "[numbers]\n[[clip]]\nlayout = \"ell.wkt\"\n",
    ] {
        let job = place.write("shares.toml", &format!("{clip}{alone}"));
        let (_, error) = run(&["quote", &job], 2);
        assert!(
            error.contains("--field-mm") && error.contains("--coverage"),
            "{error}"
        );
    }
    let text = format!("field_mm = [1, 1]\n{clip}coverage = 0.7\n{clip}coverage = 0.4\n");
    let (_, error) = run(
        &[
            "quote",
            &place.write("more.toml", &text),
            "--effort",
            "quick",
        ],
        2,
    );
    assert!(error.contains("up to 1 for all clips together"), "{error}");
}

/// Copies of each clip fill their share: 0.3 of 1 mm × 2 mm in boxes of 200 nm × 200 nm with one tile, 0.1 in boxes of 1100 nm ×
/// 400 nm with three; 25 µC/cm² ÷ 400 A/cm² = 62.5 ns and 2 × 60 ns a shot.
#[test]
fn clips_add_up_to_a_field_by_their_shares() {
    let place = Place::new();
    let text = format!(
        "effort = \"quick\"\nfield_mm = [1, 2]\n[[clip]]\nlayout = \"square.wkt\"\ncoverage = 0.3\n[[clip]]\nlayout = \"ell.wkt\"\ncoverage = 0.1\n{PLAIN}"
    );
    let job = place.write("job.toml", &text);
    let (out, _) = run(&["quote", &job, "--out", &place.at("out")], 0);
    assert!(
        out.contains("clip 2: ell.wkt") && out.contains("fills 10 % of the field"),
        "{out}"
    );
    let quote = place.json("out/quote.json");
    let shots = 0.3 * 2e12 / 4e4 + 3.0 * 0.1 * 2e12 / (1100.0 * 400.0);
    let hours = number(&quote, "/fractures/tile/hours/total_h");
    let expected = shots * 182.5e-9 / 3600.0;
    assert!(
        (hours - expected).abs() < 1e-6 * expected,
        "{hours}, expected {expected}"
    );
    assert_eq!(number(&quote, "/fractures/tile/shots"), 4.0);
    assert_eq!(number(&quote, "/scaled_to_field/coverage"), 0.4);
    // The seconds of all figures are those of the field.
    let csv = fs::read_to_string(place.at("out/figures.csv")).unwrap();
    let mut lines = csv.lines();
    let header: Vec<&str> = lines.next().unwrap().split(',').collect();
    let column = header
        .iter()
        .position(|name| *name == "tile_seconds")
        .unwrap();
    let rows: Vec<Vec<&str>> = lines.map(|line| line.split(',').collect()).collect();
    assert_eq!(
        rows.iter().map(|row| row[0]).collect::<Vec<_>>(),
        ["1", "2", "2"]
    );
    let seconds: f64 = rows
        .iter()
        .map(|row| row[column].parse::<f64>().unwrap())
        .sum();
    assert!((seconds - 3600.0 * expected).abs() < 1e-6 * seconds);
}

#[test]
fn a_directory_holds_the_files_of_one_run_and_what_is_not_ours() {
    let place = Place::new();
    let out = place.at("out");
    let job = |name: &str, clips: &str| {
        place.write(
            name,
            &format!("effort = \"quick\"\nfield_mm = [1, 1]\n{clips}"),
        )
    };
    let clip = "[[clip]]\nlayout = \"square.wkt\"\ncoverage = 0.3\n";
    run(
        &[
            "quote",
            &job("two.toml", &format!("{clip}{clip}")),
            "--out",
            &out,
        ],
        0,
    );
    fs::write(place.at("out/mine.txt"), "kept").unwrap();
    fs::create_dir(place.at("out/report")).unwrap();
    let names = |directory: &str| files_and_directories(Path::new(directory));
    assert!(names(&out).contains(&"clip-2-overview.png".to_owned()));
    // A name that leads elsewhere is left alone, whatever the list says.
    let elsewhere = place.write("elsewhere.txt", "kept");
    let list = place.at("out/files.txt");
    let tampered =
        fs::read_to_string(&list).unwrap() + "../elsewhere.txt\nreport\n" + &elsewhere + "\n";
    fs::write(&list, tampered).unwrap();
    run(&["quote", &job("one.toml", clip), "--out", &out], 0);
    let found = names(&out);
    assert!(
        !found.iter().any(|name| name.starts_with("clip-")),
        "{found:?}"
    );
    assert!(found.contains(&"overview.png".to_owned()), "{found:?}");
    assert!(found.contains(&"mine.txt".to_owned()) && found.contains(&"report".to_owned()));
    assert_eq!(fs::read_to_string(&elsewhere).unwrap(), "kept");
    // All but what is not ours is on the list.
    let list = fs::read_to_string(&list).unwrap();
    let mut listed: Vec<String> = list.lines().skip(1).map(str::to_owned).collect();
    listed.extend(["files.txt", "mine.txt", "report"].map(str::to_owned));
    listed.sort();
    assert_eq!(listed, found);
    // Another program's list is not read as ours, and nothing is removed.
    fs::write(place.at("out/files.txt"), "mine.txt\n").unwrap();
    let (_, error) = run(&["quote", &job("one.toml", clip), "--out", &out], 2);
    assert!(error.contains("is not a list of files"), "{error}");
    assert_eq!(
        fs::read_to_string(place.at("out/mine.txt")).unwrap(),
        "kept"
    );
}

fn files_and_directories(directory: &Path) -> Vec<String> {
    let entries = fs::read_dir(directory).unwrap();
    let name =
        |entry: std::io::Result<fs::DirEntry>| entry.unwrap().file_name().into_string().unwrap();
    let mut names: Vec<String> = entries.map(name).collect();
    names.sort();
    names
}

/// Three figures' worth of fractures (square; L and bar are two) would be made anew at every point if nothing were kept.
#[test]
fn a_sweep_fractures_only_what_a_number_touches() {
    let place = Place::new();
    let text = format!("effort = \"quick\"\nslot_h = 1\n[[clip]]\nlayout = \"ell.wkt\"\n{PLAIN}");
    let job = place.write("job.toml", &text);
    let sweep = |over: &[&str]| -> Value {
        let over: Vec<&str> = over.iter().flat_map(|axis| ["--over", axis]).collect();
        let arguments = [&["sweep", &job, "--json"], &over[..]].concat();
        serde_json::from_str(&run(&arguments, 0).0).unwrap()
    };
    // Two figures in three fractures.
    for (over, points, fractured) in [
        (&["current_a_cm2=200:800:4"][..], 4, 6.0),
        (&["base_dose_uc_cm2=20,30", "passes=1,2,4"], 6, 6.0),
        (&["settle_ns=50,100"], 2, 6.0),
        (&["tolerance_nm=2,3"], 2, 12.0),
        (&["sigma_nm=11,12,13"], 3, 18.0),
        (&["tolerance_nm=2,3", "current_a_cm2=200,400"], 4, 12.0),
        (&["greatest_side_nm=150,300"], 2, 12.0),
    ] {
        let swept = sweep(over);
        let found = swept["points"].as_array().unwrap().len();
        assert_eq!(found, points, "{over:?}");
        assert_eq!(number(&swept, "/fractured"), fractured, "{over:?}");
        assert_eq!(
            number(&swept, "/fractured") + number(&swept, "/reused"),
            6.0 * points as f64
        );
    }
    // A file says it too; the resolved job asks for the same sweep again; a flag stands in place of it.
    let over = "over = [\"tolerance_nm=2:3:2\", \"current_a_cm2=200,400\"]\n";
    let swept = sweep(&["tolerance_nm=2,3", "current_a_cm2=200,400"]);
    let of_file = place.write("over.toml", &format!("{over}{text}"));
    let json =
        |arguments: &[&str]| -> Value { serde_json::from_str(&run(arguments, 0).0).unwrap() };
    let out = place.at("swept");
    assert_eq!(json(&["sweep", &of_file, "--json", "--out", &out]), swept);
    assert_eq!(
        json(&["sweep", &format!("{out}/job.toml"), "--json"]),
        swept
    );
    let other = json(&["sweep", &of_file, "--json", "--over", "settle_ns=50,100"]);
    assert_eq!(other["parameters"], serde_json::json!(["settle_ns"]));
    let (_, error) = run(&["quote", &of_file], 2);
    assert!(error.contains("`over`, which is for sweep"), "{error}");
    let (_, error) = run(&["sweep", &job], 2);
    assert!(error.contains("no --over"), "{error}");
    let wrong = place.write("wrong.toml", &format!("over = [\"nobody=1\"]\n{text}"));
    let (_, error) = run(&["sweep", &wrong], 2);
    assert!(
        error.contains("wrong.toml:1") && error.contains("is no number"),
        "{error}"
    );
    // A point is the quote of its numbers.
    let swept = sweep(&["current_a_cm2=200,400", "tolerance_nm=2,3"]);
    let point = &swept["points"][1];
    assert_eq!(point["values"], serde_json::json!([200.0, 3.0]));
    let alone = [
        "quote",
        &job,
        "--json",
        "--current-a-cm2",
        "200",
        "--tolerance-nm",
        "3",
    ];
    let alone: Value = serde_json::from_str(&run(&alone, 0).0).unwrap();
    assert_eq!(point["fractures"], alone["fractures"]);
    assert_eq!(point["recommended"], alone["recommended"]);
}

#[test]
fn a_sweep_writes_table_csv_and_picture() {
    let place = Place::new();
    let text =
        format!("effort = \"quick\"\nslot_h = 1e-10\n[[clip]]\nlayout = \"ell.wkt\"\n{PLAIN}");
    let job = place.write("job.toml", &text);
    let out = place.at("out");
    let (text, _) = run(
        &["sweep", &job, "--over", "tolerance_nm=2,3", "--out", &out],
        0,
    );
    assert!(
        text.contains("tolerance_nm") && text.contains("2 points; 12 figures fractured"),
        "{text}"
    );
    let csv = fs::read_to_string(place.at("out/sweep.csv")).unwrap();
    let lines: Vec<&str> = csv.lines().collect();
    assert_eq!(lines.len(), 7);
    assert!(
        lines[0].starts_with("tolerance_nm,fracture,recommended,fits,shots"),
        "{csv}"
    );
    assert!(
        lines[5].starts_with("3,tile,") && lines[5].contains(",no,3,"),
        "{csv}"
    );
    let picture = image::open(place.at("out/sweep.png")).unwrap();
    assert_eq!(picture.width(), 1280);
    assert_eq!(
        files_and_directories(Path::new(&out)),
        [
            "files.txt",
            "job.toml",
            "sweep.csv",
            "sweep.json",
            "sweep.png"
        ]
    );
    for (over, expected) in [
        ("nobody=1", "is no number of a profile"),
        ("passes=1.5", "expected a whole number"),
        ("least_side_nm=10,2000", "contradicts"),
    ] {
        let (_, error) = run(&["sweep", &job, "--over", over], 2);
        assert!(error.contains(expected), "{over}: {error}");
    }
}

#[test]
fn a_comparison_names_the_figures_that_changed() {
    let place = Place::new();
    let quote = |layout: &str, out: &str, flags: &[&str]| {
        let text = format!("effort = \"quick\"\n[[clip]]\nlayout = \"{layout}\"\n{PLAIN}");
        let job = place.write(&format!("{out}.toml"), &text);
        let out = place.at(out);
        run(&[&["quote", &job, "--out", &out], flags].concat(), 0);
        out
    };
    // The bar of the second is gone, a square came.
    let ell = ELL.lines().next().unwrap();
    let far = "POLYGON ((5000 0, 5200 0, 5200 200, 5000 200, 5000 0))";
    place.write("later.wkt", &format!("{ell}\n{far}\n"));
    let (a, b) = (quote("ell.wkt", "a", &[]), quote("later.wkt", "b", &[]));
    let compare = |a: &str, b: &str| -> Value {
        serde_json::from_str(&run(&["compare", a, b, "--json"], 0).0).unwrap()
    };
    let found = compare(&a, &b);
    let changes = found["figures"].as_array().unwrap();
    assert_eq!(changes.len(), 2, "{found}");
    assert_eq!(number(&found, "/same"), 1.0);
    let places: Vec<&Value> = changes.iter().map(|change| &change["places"]).collect();
    assert!(places.contains(&&serde_json::json!([1, 0])), "{found}");
    assert!(places.contains(&&serde_json::json!([0, 1])), "{found}");
    // What came and went is all of the change: flashing and settling of the two quotes.
    let beam = |side: usize| {
        let hours = |part: &str| number(&found, &format!("/hours/{side}/{part}"));
        3600.0 * (hours("flash_h") + hours("settle_h"))
    };
    let by_figures = number(&found, "/time/figures_s");
    assert!((by_figures - (beam(1) - beam(0))).abs() < 1e-15, "{found}");
    assert_eq!(number(&found, "/time/writer_s"), 0.0);
    // Another writer: the same figures, each shot in less time.
    let fast = quote("ell.wkt", "fast", &["--current-a-cm2", "800"]);
    let found = compare(&a, &format!("{fast}/quote.json"));
    assert_eq!(found["figures"], serde_json::json!([]));
    let change = number(&found, "/time/writer_s");
    let before = number(&found, "/hours/0/flash_h");
    assert!(
        (change + 3600.0 * 0.5 * before).abs() < 1e-12,
        "half the flashing: {found}"
    );
    assert_eq!(number(&found, "/time/figures_s"), 0.0);
    let changed = serde_json::json!([{ "what": "current_a_cm2", "before": "400", "after": "800" }]);
    assert_eq!(found["changed"], changed);
    let (text, _) = run(&["compare", &a, &b], 0);
    assert!(
        text.contains("came") && text.contains("went") && text.contains("total"),
        "{text}"
    );
    // Without figures only the totals are compared.
    fs::remove_file(format!("{a}/figures.csv")).unwrap();
    let (text, _) = run(&["compare", &a, &b], 0);
    assert!(text.contains("not traced to figures"), "{text}");
    let (_, error) = run(&["compare", &place.at("square.wkt"), &b], 2);
    assert!(error.contains("is not the quote.json"), "{error}");
}
