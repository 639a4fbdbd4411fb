//! A quote as text and as JSON, and the progress that goes with it.

use std::collections::BTreeMap;

use shotwright::quote::result::{
    ByMethod, CAUTION, Count, DoseCorrection, EdgeError, Fits, Flag, FlagKind, FractureSummary,
    Hours, Margin, Method, ProfileUsed, Quote, Source, Verdict,
};
use shotwright::report::progress::Progress;
use shotwright::report::table;
use shotwright::report::text::{TextOptions, text};

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
    let text = text(&quote(), TextOptions::default());
    assert_eq!(plain(&text), include_str!("quote-120.txt"));
    assert!(text.lines().all(|l| l.chars().count() <= 120));
}

#[test]
fn narrow_text() {
    let text = text(
        &quote(),
        TextOptions {
            width: 72,
            flags: 1,
        },
    );
    assert_eq!(plain(&text), include_str!("quote-72.txt"));
    assert!(text.lines().all(|l| l.chars().count() <= 72));
}

#[test]
fn unmeasured_is_never_zero() {
    let text = text(&quote(), TextOptions::default());
    let row = text.lines().find(|l| l.starts_with("staircase ")).unwrap();
    let cells: Vec<&str> = row.split_whitespace().collect();
    assert_eq!(cells[2], "–", "{row}");
    assert_eq!(cells[4..], ["–"; 12], "{row}");
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
