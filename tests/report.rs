//! What the user sees: CSV that round-trips, tables as text, JSON keys, pictures whose pixels are where they should be.

use std::collections::BTreeMap;

use shotwright::blur::Blur;
use shotwright::geom::{Figure, Orientation, Point, Rect, Repetition, Ring, Transform};
use shotwright::quote::result::{
    ByMethod, CAUTION, Count, DoseCorrection, EdgeError, FigureFracture, FigureResult, Fits, Flag,
    FlagKind, FractureSummary, Hours, Margin, Method, ProfileUsed, Quote, Source, Verdict,
};
use shotwright::report::figure_plot::{self, Contour, FigurePicture};
use shotwright::report::figures_csv;
use shotwright::report::overview_plot::{self, Mark, Overview, OverviewFigure};
use shotwright::report::progress::Progress;
use shotwright::report::shots_csv::{self, Rows, ShotWriter};
use shotwright::report::table::{self, TextOptions};
use shotwright::shot::{AddressUnit, Shot, ShotList};
use shotwright::target::Target;
use shotwright::units::{Dose, Nm};

fn address(nm: f64) -> AddressUnit {
    AddressUnit::new(Nm(nm)).unwrap()
}

fn shot(x0: i64, y0: i64, x1: i64, y1: i64, dose: f64) -> Shot {
    Shot {
        x0,
        y0,
        x1,
        y1,
        dose: Dose(dose),
    }
}

fn at(x: i64, y: i64) -> Transform {
    Transform {
        orientation: Orientation::IDENTITY,
        shift: Point::new(x, y),
    }
}

fn written(shots: &ShotList, places: &[(Transform, Repetition)], rows: Rows) -> String {
    let mut writer = ShotWriter::new(Vec::new(), rows).unwrap();
    let places = places.iter().map(|(t, r)| (*t, r));
    writer.figure(3, shots, places).unwrap();
    String::from_utf8(writer.finish().unwrap()).unwrap()
}

#[test]
fn shots_are_written_exact_to_the_picometre() {
    let shots = ShotList::new(
        address(0.05),
        vec![shot(-1, 0, 200, 30, 1.0), shot(0, 40, 1, 60, 0.85)],
    );
    assert_eq!(
        written(&shots, &[(at(0, 0), Repetition::Once)], Rows::Placed),
        "figure,place,x_nm,y_nm,w_nm,h_nm,dose\n\
         3,0,-0.05,0,10.05,1.5,1\n\
         3,0,0,2,0.05,1,0.85\n"
    );
    let fine = ShotList::new(
        AddressUnit::FINEST,
        vec![shot(-1_000_001, 7, 20, 1_000_000_007, 1.0)],
    );
    assert!(
        written(&fine, &[(at(0, 0), Repetition::Once)], Rows::Placed)
            .ends_with("\n3,0,-1000.001,0.007,1000.021,1000000,1\n")
    );
}

#[test]
fn every_place_gets_a_line_and_distinct_only_the_first() {
    let shots = ShotList::new(address(1.0), vec![shot(0, 0, 10, 4, 1.0)]);
    let lattice = Repetition::Lattice {
        columns: 2,
        rows: 1,
        a: Point::from_nm(100, 0),
        b: Point::from_nm(0, 0),
    };
    let turned = Transform {
        orientation: Orientation::all()
            .into_iter()
            .find(|o| o.apply(Point::new(1, 0)) == Point::new(0, 1) && !o.mirrors())
            .unwrap(),
        shift: Point::from_nm(0, 50),
    };
    let places = [(at(5_000, 0), lattice), (turned, Repetition::Once)];
    // By hand: a quarter turn takes [0,10]×[0,4] to [−4,0]×[0,10], then up by 50.
    assert_eq!(
        written(&shots, &places, Rows::Placed),
        "figure,place,x_nm,y_nm,w_nm,h_nm,dose\n3,0,5,0,10,4,1\n3,1,105,0,10,4,1\n3,2,-4,50,4,10,1\n"
    );
    assert_eq!(
        written(&shots, &places, Rows::Distinct),
        "figure,place,x_nm,y_nm,w_nm,h_nm,dose\n3,0,5,0,10,4,1\n"
    );
}

proptest::proptest! {
    #[test]
    fn csv_round_trips(
        unit in proptest::sample::select(vec![1_i64, 50, 100, 250, 1000]),
        sides in proptest::collection::vec((-1_000_000_000_i64..1_000_000_000, -1_000_000_i64..1_000_000, 1_i64..5000, 1_i64..5000, 1e-3_f64..3.0), 1..40),
    ) {
        let grid = AddressUnit::new(Nm::from_pm(unit)).unwrap();
        let shots = sides.iter().map(|&(x, y, w, h, d)| shot(x, y, x + w, y + h, d)).collect();
        let shots = ShotList::new(grid, shots);
        let csv = written(&shots, &[(at(0, 0), Repetition::Once)], Rows::Placed);
        let read = shots_csv::read(csv.as_bytes(), grid).unwrap();
        proptest::prop_assert_eq!(&read.shots, &shots);
        proptest::prop_assert!(read.notes.is_empty());
    }
}

#[test]
fn columns_may_come_in_any_order_and_dose_is_optional() {
    let csv = "\u{feff}h_nm, w_nm ,area,y_nm,x_nm\r\n4,10,40,-2,1e1\r\n";
    let read = shots_csv::read(csv.as_bytes(), address(1.0)).unwrap();
    assert_eq!(
        read.shots,
        ShotList::new(address(1.0), vec![shot(10, -2, 20, 2, 1.0)])
    );
    assert_eq!(
        read.notes,
        [
            "column `area` is not used",
            "no column `dose`: every shot has dose 1"
        ]
    );
}

#[test]
fn sides_off_the_grid_keep_their_place_on_a_finer_one() {
    let csv = "x_nm,y_nm,w_nm,h_nm,dose\n0.5,0,10,10,1\n";
    let read = shots_csv::read(csv.as_bytes(), address(1.0)).unwrap();
    assert_eq!(read.shots.address(), AddressUnit::FINEST);
    assert_eq!(read.shots.shots(), [shot(500, 0, 10_500, 10_000, 1.0)]);
    assert!(read.notes.is_empty());

    let csv = "x_nm,y_nm,w_nm,h_nm,dose\n0.0004,0,10,10,1\n";
    let read = shots_csv::read(csv.as_bytes(), address(1.0)).unwrap();
    assert_eq!(
        read.notes,
        ["shots with a side off the 0.001 nm grid, rounded to it: 1"]
    );
}

#[test]
fn a_header_alone_is_an_empty_list() {
    let read = shots_csv::read("x_nm,y_nm,w_nm,h_nm,dose\n".as_bytes(), address(1.0)).unwrap();
    assert!(read.shots.is_empty());
}

#[test]
fn bad_shots_are_refused_with_line_column_found_and_expected() {
    let long = "a finite number of nanometres within ±4.5 km";
    let side = "a side of 0.001 nm or more, in nanometres";
    let dose = "a dose above 0, as a multiple of dose-to-size";
    let head = "x_nm,y_nm,w_nm,h_nm,dose\n1,1,1,1,1\n";
    for (csv, said) in [
        (
            format!("{head}nan,0,1,1,1"),
            format!("line 3, column x_nm: found `nan`, expected {long}"),
        ),
        (
            format!("{head}0,inf,1,1,1"),
            format!("line 3, column y_nm: found `inf`, expected {long}"),
        ),
        (
            format!("{head}0,1e13,1,1,1"),
            format!("line 3, column y_nm: found `1e13`, expected {long}"),
        ),
        (
            format!("{head}0,0,0,1,1"),
            format!("line 3, column w_nm: found `0`, expected {side}"),
        ),
        (
            format!("{head}0,0,1,-2,1"),
            format!("line 3, column h_nm: found `-2`, expected {side}"),
        ),
        (
            format!("{head}0,0,1e-7,1,1"),
            format!("line 3, column w_nm: found `1e-7`, expected {side}"),
        ),
        (
            format!("{head}0,0,1,ten,1"),
            format!("line 3, column h_nm: found `ten`, expected {side}"),
        ),
        (
            format!("{head}0,0,1,1,0"),
            format!("line 3, column dose: found `0`, expected {dose}"),
        ),
        (
            format!("{head}\n0,0,1,1,"),
            format!("line 4, column dose: found ``, expected {dose}"),
        ),
        (
            format!("{head}\r\n0,0,1,1\r\n"),
            "line 4: found 4 cells, expected 5 as in line 1".to_owned(),
        ),
        (
            "x,y,w,h\n1,1,1,1\n".to_owned(),
            "line 1: found columns `x,y,w,h`, expected a column `x_nm` among them".to_owned(),
        ),
        (
            "x_nm,y_nm,w_nm,h_nm,x_nm\n".to_owned(),
            "line 1: found column `x_nm` twice, expected it once".to_owned(),
        ),
        (
            String::new(),
            "line 1: found columns ``, expected a column `x_nm` among them".to_owned(),
        ),
    ] {
        let error = shots_csv::read(csv.as_bytes(), address(1.0)).unwrap_err();
        assert_eq!(error.to_string(), said, "for {csv:?}");
    }
}

fn summary(shots: u128, total_h: f64) -> FractureSummary {
    FractureSummary {
        shots: Count(shots),
        shots_distinct: 1412,
        smallest_side_nm: Some(10.5),
        slivers: Count(12),
        edge_error_nm: EdgeError {
            mean: Some(-0.214),
            p95: Some(1.87),
            worst: Some(6.41),
        },
        out_of_tolerance_share: Some(0.0123),
        prints_within_tolerance: Some(true),
        figures_out_of_tolerance: Some(0),
        margin_nm_per_pct: Margin {
            median: Some(0.251),
            worst: Some(0.78),
        },
        edge_sd_nm: None,
        peak_dose: Some(1.9),
        scores: None,
        dose_map: None,
        hours: Some(hours(total_h)),
    }
}

fn hours(total_h: f64) -> Hours {
    Hours {
        total_h,
        flash_h: 0.5 * total_h,
        settle_h: 0.25 * total_h,
        subfield_h: 0.0,
        stage_h: 0.125 * total_h,
        overhead_h: 0.125 * total_h,
        low_h: total_h,
        high_h: total_h,
        ..Hours::default()
    }
}

fn quote() -> Quote {
    let unmeasured = FractureSummary {
        smallest_side_nm: None,
        slivers: Count(0),
        edge_error_nm: EdgeError::default(),
        out_of_tolerance_share: None,
        prints_within_tolerance: None,
        figures_out_of_tolerance: None,
        margin_nm_per_pct: Margin::default(),
        hours: None,
        ..summary(0, 0.0)
    };
    Quote {
        sources: vec![Source {
            name: "elbow.oas".to_owned(),
            layers: vec!["1/0".to_owned()],
            minus: Vec::new(),
            scale: 4.0,
            mirror: false,
            shift_nm: [0.0; 2],
            bias_nm: 0.0,
            background_of_nm: None,
            window_nm: None,
            extent_nm: Some([20_000.0, 8_400.0]),
            coverage: None,
            figures_distinct: 14,
            figures_placed: Count(1_200_000),
        }],
        profile: ProfileUsed {
            name: "example".to_owned(),
            numbers: BTreeMap::from([("base_dose_uc_cm2".to_owned(), 25.0)]),
        },
        tolerance_nm: 2.0,
        sigma_nm: 12.5,
        scaled_to_field: None,
        dose_correction: DoseCorrection {
            dose: 1.12,
            backscatter_ratio: 0.6,
            density: 0.36,
        },
        notes: vec!["1 × a zero-length path left out".to_owned()],
        fractures: ByMethod {
            staircase: Some(unmeasured),
            tile: Some(FractureSummary {
                prints_within_tolerance: Some(false),
                figures_out_of_tolerance: Some(2),
                ..summary(1_692_000_000, 31.0)
            }),
            overlap: Some(FractureSummary {
                hours: Some(Hours { low_h: 19.0, high_h: 19.54, ..hours(19.27) }),
                ..summary(759_600_000, 19.27)
            }),
        },
        verdict: Verdict {
            fits: Fits::Yes,
            slot_h: Some(24.0),
            sentence: "Fits the slot of 24 h as overlap (19.3 h), not as tile (31.0 h).".to_owned(),
        },
        recommended: Some(Method::Overlap),
        reason: "It is the only fracture that is written within the slot, and it prints within tolerance.".to_owned(),
        flips: Vec::new(),
        sensitivity: Vec::new(),
        raster: None,
        flags: vec![
            Flag {
                clip: 1,
                figure: 7,
                place_nm: [1200.25, -40.0],
                kind: FlagKind::ToleranceNotReached,
                number: Some(6.41),
                unit: "nm edge error".to_owned(),
                remedy: "smooth the notch to a radius of 18 nm, which costs at most 1.2 nm of edge error".to_owned(),
                picture: Some("figure-7.png".to_owned()),
            },
            Flag {
                clip: 1,
                figure: 9,
                place_nm: [0.0, 0.0],
                kind: FlagKind::BrokenOutline,
                number: None,
                unit: String::new(),
                remedy: String::new(),
                picture: None,
            },
        ],
        sample: None,
        remedies: Vec::new(),
        must_change: None,
        must_change_unknown: None,
        caution: CAUTION.to_owned(),
    }
}

#[test]
fn json_has_the_promised_keys_and_comes_back_equal() {
    let quote = quote();
    let json = serde_json::to_value(&quote).unwrap();
    for pointer in [
        "/verdict/fits",
        "/verdict/slot_h",
        "/recommended",
        "/flags/0/kind",
        "/fractures/staircase",
        "/fractures/tile/shots",
        "/fractures/tile/smallest_side_nm",
        "/fractures/tile/slivers",
        "/fractures/tile/edge_error_nm/mean",
        "/fractures/tile/edge_error_nm/p95",
        "/fractures/tile/edge_error_nm/worst",
        "/fractures/tile/out_of_tolerance_share",
        "/fractures/tile/prints_within_tolerance",
        "/fractures/tile/margin_nm_per_pct/median",
        "/fractures/tile/margin_nm_per_pct/worst",
        "/fractures/overlap/hours/total_h",
        "/fractures/overlap/hours/flash_h",
        "/fractures/overlap/hours/settle_h",
        "/fractures/overlap/hours/stage_h",
        "/fractures/overlap/hours/overhead_h",
    ] {
        assert!(json.pointer(pointer).is_some(), "no {pointer} in {json:#}");
    }
    assert_eq!(json["recommended"], "overlap");
    assert_eq!(json["flags"][0]["kind"], "tolerance_not_reached");
    assert_eq!(json["verdict"]["fits"], "yes");
    assert_eq!(json["fractures"]["tile"]["shots"], 1_692_000_000_u64);
    let unmeasured = &json["fractures"]["staircase"]["edge_error_nm"]["worst"];
    assert!(unmeasured.is_null(), "unmeasured is {unmeasured}");
    assert_eq!(serde_json::from_value::<Quote>(json).unwrap(), quote);
}

#[test]
fn names_in_text_and_json_are_the_same() {
    let kinds = [
        FlagKind::CostsMoreThanItsShare,
        FlagKind::NotPrintableAtThisBlur,
        FlagKind::ToleranceNotReached,
        FlagKind::ShotLimitsNotMet,
        FlagKind::PeakDoseOverLimit,
        FlagKind::BrokenOutline,
    ];
    for kind in kinds {
        assert_eq!(serde_json::to_value(kind).unwrap(), kind.name());
    }
    for method in Method::ALL {
        assert_eq!(serde_json::to_value(method).unwrap(), method.name());
    }
}

#[test]
fn a_count_beyond_64_bits_is_a_string() {
    let big = Count(u128::from(u64::MAX) + 1);
    let json = serde_json::to_string(&big).unwrap();
    assert_eq!(json, "\"18446744073709551616\"");
    assert_eq!(serde_json::from_str::<Count>(&json).unwrap(), big);
    assert_eq!(serde_json::to_string(&Count(7)).unwrap(), "7");
    let wrong = serde_json::from_str::<Count>("\"many\"").unwrap_err();
    assert!(
        wrong
            .to_string()
            .contains("whole number or a string of digits"),
        "{wrong}"
    );
    assert!(serde_json::from_str::<Count>("-1").is_err());
}

#[test]
fn numbers_keep_three_digits() {
    for (x, text) in [
        (0.0, "0"),
        (0.000_04, "4.0e-5"),
        (0.001_234, "0.00123"),
        (0.012_34, "0.0123"),
        (0.9996, "1.00"),
        (3.084, "3.08"),
        (9.996, "10.0"),
        (41.55, "41.5"),
        (412.4, "412"),
        (-2.0, "-2.00"),
        (1412.0, "1\u{202f}412"),
        (1e12, "1\u{202f}000\u{202f}000\u{202f}000\u{202f}000"),
        (f64::NAN, "–"),
    ] {
        assert_eq!(table::significant(x), text, "{x}");
    }
    assert_eq!(table::grouped(Count(999)), "999");
}

/// Thin spaces as `_`, so that the expected text shows them.
fn plain(text: &str) -> String {
    text.replace('\u{202f}', "_")
}

#[test]
fn wide_text() {
    let text = table::text(&quote(), TextOptions::default());
    assert_eq!(plain(&text), include_str!("report/quote-120.txt"));
    assert!(text.lines().all(|l| l.chars().count() <= 120));
}

#[test]
fn narrow_text() {
    let text = table::text(
        &quote(),
        TextOptions {
            width: 72,
            flags: 1,
        },
    );
    assert_eq!(plain(&text), include_str!("report/quote-72.txt"));
    assert!(text.lines().all(|l| l.chars().count() <= 72));
}

#[test]
fn unmeasured_is_never_zero() {
    let text = table::text(&quote(), TextOptions::default());
    let row = text.lines().find(|l| l.starts_with("staircase ")).unwrap();
    let cells: Vec<&str> = row.split_whitespace().collect();
    assert_eq!(cells[2], "–", "{row}");
    assert_eq!(cells[4..], ["–"; 12], "{row}");
}

#[test]
fn figures_csv_has_one_line_per_figure_and_empty_cells() {
    let figure = FigureResult {
        clip: 1,
        figure: 3,
        place_nm: [12.5, -4.0],
        fingerprint: "00112233445566ff".to_owned(),
        places: Count(40),
        outline_nm: 812.25,
        vertices: 96,
        rectilinear: false,
        fractures: ByMethod {
            staircase: None,
            tile: Some(FigureFracture {
                shots: 12,
                edge_error_nm: EdgeError {
                    mean: Some(-0.5),
                    p95: Some(1.5),
                    worst: None,
                },
                prints_within_tolerance: Some(true),
                scores: None,
                mean_dose: Some(1.0625),
                seconds: Some(0.25),
            }),
            overlap: None,
        },
        flags: vec![FlagKind::BrokenOutline, FlagKind::ShotLimitsNotMet],
    };
    let mut out = Vec::new();
    figures_csv::write(&mut out, [&figure]).unwrap();
    assert_eq!(
        String::from_utf8(out).unwrap(),
        "clip,figure,x_nm,y_nm,fingerprint,places,outline_nm,vertices,shape,\
         staircase_shots,staircase_edge_error_mean_nm,staircase_edge_error_p95_nm,staircase_edge_error_worst_nm,staircase_prints_within_tolerance,\
         staircase_corner_error_worst_nm,staircase_margin_median_nm_per_pct,staircase_margin_worst_nm_per_pct,staircase_edge_sd_median_nm,staircase_edge_sd_worst_nm,staircase_narrowest_drawn_nm,staircase_narrowest_printed_nm,staircase_printed_area_nm2,staircase_mean_dose,staircase_seconds,\
         tile_shots,tile_edge_error_mean_nm,tile_edge_error_p95_nm,tile_edge_error_worst_nm,tile_prints_within_tolerance,\
         tile_corner_error_worst_nm,tile_margin_median_nm_per_pct,tile_margin_worst_nm_per_pct,tile_edge_sd_median_nm,tile_edge_sd_worst_nm,tile_narrowest_drawn_nm,tile_narrowest_printed_nm,tile_printed_area_nm2,tile_mean_dose,tile_seconds,\
         overlap_shots,overlap_edge_error_mean_nm,overlap_edge_error_p95_nm,overlap_edge_error_worst_nm,overlap_prints_within_tolerance,\
         overlap_corner_error_worst_nm,overlap_margin_median_nm_per_pct,overlap_margin_worst_nm_per_pct,overlap_edge_sd_median_nm,overlap_edge_sd_worst_nm,overlap_narrowest_drawn_nm,overlap_narrowest_printed_nm,overlap_printed_area_nm2,overlap_mean_dose,overlap_seconds,\
         flags\n\
         1,3,12.5,-4,00112233445566ff,40,812.25,96,curved,,,,,,,,,,,,,,,,12,-0.5,1.5,,true,,,,,,,,,1.0625,0.25,,,,,,,,,,,,,,,,broken_outline shot_limits_not_met\n"
    );
}

/// A frame of 200 nm × 100 nm with a hole of 80 nm × 40 nm in the middle.
fn frame() -> Figure {
    let ring = |p: [[i64; 2]; 4]| Ring::new(p.map(|[x, y]| Point::from_nm(x, y)).to_vec()).unwrap();
    Figure::new(
        ring([[0, 0], [200, 0], [200, 100], [0, 100]]),
        vec![ring([[60, 30], [140, 30], [140, 70], [60, 70]])],
    )
}

/// Whether a colour fills most of a 5 × 5 block of pixels: text or a line may cross it, a wrong place may not pass.
fn mostly(image: &image::RgbImage, x: u32, y: u32, color: [u8; 3]) -> bool {
    let block = (0..25).map(|i| image.get_pixel(x + i % 5 - 2, y + i / 5 - 2).0);
    block.filter(|p| *p == color).count() > 15
}

#[test]
fn a_figure_picture_shows_the_figure_where_it_is() {
    let dir = tempfile::tempdir().unwrap();
    let figure = frame();
    let target = Target::new(&figure, Blur::new(Nm(5.0)).unwrap(), Nm(1.0));
    let shots = ShotList::new(address(1.0), Vec::new());
    let picture = FigurePicture {
        title: "figure 1",
        figure: &figure,
        target: &target,
        context: &[],
        shots: &shots,
        contours: &[],
        edge_error: &[],
    };
    let path = dir.path().join("figure.png");
    picture.png(&path).unwrap();
    let empty = image::open(&path).unwrap().to_rgb8();
    assert_eq!(empty.dimensions(), figure_plot::SIZE);
    let fill = figure_plot::TARGET_FILL;
    // The figure's box, found in the picture by its fill, must have the figure's aspect and its hole in the middle.
    let filled = |(_, _, p): &(u32, u32, &image::Rgb<u8>)| p.0 == fill;
    // The legend, at the right, has the fill too; the grey rims of letters are not four pixels wide.
    let wide = |x: u32, y: u32| (1..4).all(|i| empty.get_pixel(x + i, y).0 == fill);
    let pixels = || {
        empty
            .enumerate_pixels()
            .filter(filled)
            .filter(|&(x, y, _)| x < 940 && wide(x, y))
    };
    let (x0, x1) = (
        pixels().map(|p| p.0).min().unwrap(),
        pixels().map(|p| p.0).max().unwrap(),
    );
    let (y0, y1) = (
        pixels().map(|p| p.1).min().unwrap(),
        pixels().map(|p| p.1).max().unwrap(),
    );
    let aspect = f64::from(x1 - x0) / f64::from(y1 - y0);
    assert!((aspect - 2.0).abs() < 0.02, "aspect {aspect}");
    assert!(x1 - x0 > 600, "the figure is {} pixels wide", x1 - x0);
    let (mid_x, mid_y) = (u32::midpoint(x0, x1), u32::midpoint(y0, y1));
    assert!(mostly(&empty, mid_x, mid_y, [255; 3]), "the hole is white");
    assert!(
        mostly(&empty, x0 + (x1 - x0) / 8, mid_y, fill),
        "left of the hole"
    );
    assert!(!mostly(&empty, x0 - 12, mid_y, fill), "left of the figure");

    // One shot on the left part: the fill changes there and not at the right.
    let shots = ShotList::new(address(1.0), vec![shot(0, 0, 60, 100, 1.0)]);
    let line = [vec![[0.0, 0.0], [200.0, 0.0]]];
    let contours = [Contour {
        label: "dose as written",
        lines: &line,
    }; 3];
    let error: Vec<(f64, Option<f64>)> = (0..=840)
        .map(|i| (f64::from(i), (i % 100 > 10).then_some(0.5)))
        .collect();
    let picture = FigurePicture {
        shots: &shots,
        contours: &contours,
        edge_error: &error,
        ..picture
    };
    picture.png(&path).unwrap();
    let shot = image::open(&path).unwrap().to_rgb8();
    assert!(!mostly(&shot, x0 + (x1 - x0) / 8, mid_y, fill));
    assert!(mostly(&shot, x1 - (x1 - x0) / 8, mid_y, fill));

    let svg = dir.path().join("figure.svg");
    picture.svg(&svg).unwrap();
    let svg = std::fs::read_to_string(svg).unwrap();
    assert!(svg.starts_with("<svg") && svg.trim_end().ends_with("</svg>"));
    assert!(svg.contains("edge error, nm") && svg.contains("dose as written"));
}

#[test]
fn the_overview_shows_figures_at_their_places_and_boxes_for_many() {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("overview.png");
    let (square, once) = (Figure::from_rect(nm_rect(0, 0, 100, 100)), Repetition::Once);
    let many = Repetition::Lattice {
        columns: 1_000_000,
        rows: 1_000_000,
        a: Point::new(400, 0),
        b: Point::new(0, 400),
    };
    let figures = [
        OverviewFigure {
            figure: &square,
            places: vec![(at(0, 0), &once)],
            value: None,
        },
        OverviewFigure {
            figure: &square,
            places: vec![(at(500_000, 500_000), &many)],
            value: Some(4.0),
        },
    ];
    let marks = [Mark {
        number: 1,
        place: Point::from_nm(400_550, 550),
    }];
    let overview = Overview {
        title: "mask",
        value_label: "shots per figure",
        figures: &figures[..1],
        marks: &[],
        extent: nm_rect(0, 0, 100, 200),
    };
    overview.png(&path).unwrap();
    let picture = image::open(&path).unwrap().to_rgb8();
    assert_eq!(picture.dimensions(), overview_plot::SIZE);
    // The square fills the lower half of the extent: grey (no value) below the middle, white above.
    let column = 16 + (overview_plot::SIZE.0 - 190 - 32) / 2;
    assert!(mostly(&picture, column, 800, [190; 3]));
    assert!(mostly(&picture, column, 300, [255; 3]));

    // 10¹² places: one box, so it is drawn at once.
    let whole = Overview {
        figures: &figures,
        marks: &marks,
        extent: nm_rect(0, 0, 400_600, 400_600),
        ..overview
    };
    whole.png(&path).unwrap();
    let picture = image::open(&path).unwrap().to_rgb8();
    assert!(!mostly(&picture, column, 500, [255; 3]));
}

fn nm_rect(x0: i64, y0: i64, x1: i64, y1: i64) -> Rect {
    Rect::new(Point::from_nm(x0, y0), Point::from_nm(x1, y1))
}

#[test]
fn progress_counts_from_many_threads() {
    let progress = Progress::new("figures", 1000);
    std::thread::scope(|scope| {
        for _ in 0..4 {
            scope.spawn(|| (0..250).for_each(|_| progress.inc()));
        }
    });
    assert_eq!(progress.done(), 1000);
}
