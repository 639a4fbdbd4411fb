//! Hours against worked values, and against counting copy by copy.
//!
//! Values named "CHECKS 5" were derived from the definitions with scipy 1.17 unless another source is named.

use proptest::prelude::*;
use shotwright::geom::{Orientation, Point, Rect, Repetition, Transform};
use shotwright::profile::{Key, Kind, Profile};
use shotwright::shot::{AddressUnit, Shot, ShotList};
use shotwright::units::{Amperes, Area, BaseDose, CurrentDensity, Dose, Hours, Nm};
use shotwright::write_time::{
    Bound, Clip, Counts, Field, Pattern, Placed, WriteTime, WriteTimeError, flash_time, interval,
    sensitivity, tie,
};

fn shaped(numbers: &[(&str, f64)]) -> Profile {
    Profile::from_numbers("test", Kind::Shaped, numbers.iter().copied()).unwrap()
}

fn raster(numbers: &[(&str, f64)]) -> Profile {
    Profile::from_numbers("test", Kind::Raster, numbers.iter().copied()).unwrap()
}

fn shots(number: u128) -> Pattern<'static> {
    Pattern::Counts {
        counts: Counts::of(number),
        field: None,
    }
}

/// CHECKS 6: scanner field 26×33 mm at 4:1.
const FIELD: Field = Field {
    width: Nm(132e6),
    height: Nm(104e6),
};

const CURRENT: (&str, f64) = ("current_a_cm2", 400.0);
const DOSE: (&str, f64) = ("base_dose_uc_cm2", 25.0);

/// Equal to the four digits that CHECKS gives.
fn same(found: f64, digits: f64) {
    assert!(
        (found - digits).abs() <= 5e-4 * digits,
        "{found}, expected {digits}"
    );
}

/// Equal to three decimals, as CHECKS prints hours.
fn same_hours(found: Hours, hours: f64) {
    assert!(
        (found.0 - hours).abs() <= 5.1e-4,
        "{found}, expected {hours} h"
    );
}

// ---- worked values

/// CHECKS 5 (derived).
#[test]
fn flash_times() {
    for (base, density, ns) in [
        (10.0, 20.0, 500.0),
        (20.0, 200.0, 100.0),
        (25.0, 400.0, 62.5),
        (30.0, 1200.0, 25.0),
        (75.0, 1200.0, 62.5),
    ] {
        let time = flash_time(Dose(1.0), BaseDose(base), CurrentDensity(density), 1);
        assert!((time.0 * 1e9 - ns).abs() < 1e-9, "{time}");
        let shared = flash_time(Dose(1.5), BaseDose(base), CurrentDensity(density), 2);
        assert!((shared.0 * 1e9 - 0.75 * ns).abs() < 1e-9, "{shared}");
    }
}

/// CHECKS 5: 34.7 h (published university clean-room FAQ), 16.7 min (published clean-room guide).
#[test]
fn gaussian_beam_rule() {
    let hours = BaseDose(250.0)
        .exposure_time(Area(1.0), Amperes(2e-9))
        .hours();
    assert!((hours - 34.7).abs() < 0.05, "{hours}");
    let area = Nm::from_mm(1.0).by(Nm::from_mm(1.0)); // 10⁶ µm²
    let minutes = BaseDose(100.0).exposure_time(area, Amperes(1e-9)).0 / 60.0;
    assert!((minutes - 16.7).abs() < 0.05, "{minutes}");
}

/// CHECKS 5 (derived).
#[test]
fn hours_of_shot_counts() {
    for (number, base, density, settle, hours) in [
        (100_000_000_000, 20.0, 200.0, 100.0, 8.333),
        (300_000_000_000, 25.0, 400.0, 60.0, 15.208),
        (500_000_000_000, 30.0, 1200.0, 50.0, 17.361),
        (1_000_000_000_000, 75.0, 1200.0, 50.0, 45.139),
    ] {
        let profile = shaped(&[
            ("base_dose_uc_cm2", base),
            ("current_a_cm2", density),
            ("settle_ns", settle),
            ("passes", 2.0),
        ]);
        let time = WriteTime::new(&profile, &shots(number)).unwrap();
        same_hours(time.total_h, hours);
        same(time.total_h.0, hours);
        if number == 100_000_000_000 {
            same_hours(time.flash_h, 2.778);
            same_hours(time.settle_h, 5.556);
        }
        assert_eq!(time.stage_h, Hours(0.0));
        assert_eq!(time.overhead_h, Hours(0.0));
        assert_eq!(time.flashes, 2 * number);
    }
}

/// CHECKS 5 (derived).
#[test]
fn stage_and_turns_of_an_empty_field() {
    for (speed, hours) in [(20.0, 2.564), (50.0, 1.134)] {
        let profile = shaped(&[
            CURRENT,
            DOSE,
            ("stripe_um", 80.0),
            ("stage_mm_s", speed),
            ("turn_s", 0.5),
        ]);
        let pattern = Pattern::Counts {
            counts: Counts::of(0),
            field: Some(FIELD),
        };
        let time = WriteTime::new(&profile, &pattern).unwrap();
        same_hours(time.total_h, hours);
        let stripes: usize = time.stripes.iter().map(|s| s.count).sum();
        assert_eq!(stripes, 1300);
        assert_eq!(time.stripes.len(), 1, "alike stripes stand together");
        assert_eq!(time.stripes[0].bound, Bound::Stage);
        assert_eq!(time.flash_h, Hours(0.0));
    }
}

/// CHECKS 5 (derived): 137.28 cm² (CHECKS 6), 100 µC/cm², 1 µA.
#[test]
fn raster_floor() {
    assert!((FIELD.width.by(FIELD.height).0 - 137.28).abs() < 1e-9);
    for passes in [1.0, 4.0] {
        let profile = raster(&[
            ("beam_na", 1000.0),
            ("base_dose_uc_cm2", 100.0),
            ("stripe_um", 80.0),
            ("passes", passes),
        ]);
        let mut hours = Vec::new();
        for number in [0, 1_000_000_000_000] {
            let pattern = Pattern::Counts {
                counts: Counts::of(number),
                field: Some(FIELD),
            };
            let time = WriteTime::new(&profile, &pattern).unwrap();
            same_hours(time.total_h, 3.813);
            hours.push(time.total_h);
        }
        assert_eq!(hours[0], hours[1], "whatever the pattern");
    }
}

#[test]
fn raster_is_stage_bound_when_the_stage_is_slow() {
    // By hand: 1300 stripes of 132 mm at 5 mm/s, 2 passes: 1300 · 26.4 s · 2 = 68640 s; the beam needs 13728 s.
    let profile = raster(&[
        ("beam_na", 1000.0),
        ("base_dose_uc_cm2", 100.0),
        ("stripe_um", 80.0),
        ("stage_mm_s", 5.0),
        ("passes", 2.0),
    ]);
    let pattern = Pattern::Counts {
        counts: Counts::of(0),
        field: Some(FIELD),
    };
    let time = WriteTime::new(&profile, &pattern).unwrap();
    assert!((time.total_h.0 - 68640.0 / 3600.0).abs() < 1e-9);
    assert!((time.flash_h.0 - 13728.0 / 3600.0).abs() < 1e-9);
    let no_field = WriteTime::new(&profile, &shots(5));
    assert_eq!(no_field, Err(WriteTimeError::NoField));
}

#[test]
fn calibrations_come_in_whole_intervals_of_writing() {
    // By hand: 3·10¹¹ shots as in CHECKS 5 write for 15.208 h = 912.5 min, so 30 whole intervals of 30 min.
    let profile = shaped(&[
        CURRENT,
        DOSE,
        ("settle_ns", 60.0),
        ("passes", 2.0),
        ("calibration_every_min", 30.0),
        ("calibration_s", 60.0),
        ("load_min", 10.0),
        ("soak_min", 30.0),
        ("align_min", 5.0),
        ("unload_min", 15.0),
    ]);
    let time = WriteTime::new(&profile, &shots(300_000_000_000)).unwrap();
    assert_eq!(time.calibrations, 30);
    assert!((time.overhead.calibration_h.0 - 0.5).abs() < 1e-12);
    assert!((time.overhead.handling_h.0 - 1.0).abs() < 1e-12);
    same_hours(time.total_h, 15.208 + 1.5);
}

// ---- placed shots

const PM: i64 = 1000; // pm in a nm

fn address() -> AddressUnit {
    AddressUnit::new(Nm(1.0)).unwrap()
}

/// A list of (x0, y0, x1, y1) in nm at dose 1.
fn list(rects: &[(i64, i64, i64, i64)]) -> ShotList {
    let shots = rects.iter().map(|&(x0, y0, x1, y1)| Shot {
        x0,
        y0,
        x1,
        y1,
        dose: Dose(1.0),
    });
    ShotList::new(address(), shots.collect())
}

fn placed<'a>(shots: &'a ShotList, repetition: &'a Repetition) -> Placed<'a> {
    Placed {
        shots,
        transform: Transform::IDENTITY,
        repetition,
        dose: Dose(1.0),
    }
}

fn frame_nm(x: i64, y: i64) -> Rect {
    Rect {
        min: Point::new(0, 0),
        max: Point::from_nm(x, y),
    }
}

#[test]
fn one_stripe_waits_for_the_beam_and_the_next_for_the_stage() {
    // Two stripes of 10 µm, 10 µm long at 1 mm/s: 10 ms each. One shot: 62.5 + 37.5 ns = 100 ns.
    // 200 000 shots in the lower stripe take 20 ms, 1000 in the upper one 0.1 ms: 20 + 10 ms, of which 9.9 waiting.
    let profile = shaped(&[
        CURRENT,
        DOSE,
        ("settle_ns", 37.5),
        ("stripe_um", 10.0),
        ("stage_mm_s", 1.0),
    ]);
    let square = list(&[(0, 0, 10, 10)]);
    let lattice = |rows, y| Repetition::Lattice {
        columns: 500,
        rows,
        a: Point::from_nm(20, 0),
        b: Point::from_nm(0, y),
    };
    let (dense, sparse) = (lattice(400, 20), lattice(2, 20));
    let mut upper = placed(&square, &sparse);
    upper.transform.shift = Point::from_nm(0, 15_000);
    let both = [placed(&square, &dense), upper];
    let pattern = Pattern::Placed {
        placed: &both,
        frame: frame_nm(10_000, 20_000),
    };
    let time = WriteTime::new(&profile, &pattern).unwrap();
    let bounds: Vec<_> = time.stripes.iter().map(|s| (s.flashes, s.bound)).collect();
    assert_eq!(bounds, [(200_000, Bound::Beam), (1000, Bound::Stage)]);
    assert!((time.total_h.0 * 3600.0 - 30e-3).abs() < 1e-12);
    assert!((time.stage_h.0 * 3600.0 - 9.9e-3).abs() < 1e-12);
}

#[test]
fn shots_across_borders_are_cut_and_counted() {
    // Stripes of 10 µm, sub-fields of 5 µm. By hand: inside one cell 1; across a stripe border 2; across the corner of
    // four sub-fields 4; a side that lies on a border is not cut.
    let profile = shaped(&[
        CURRENT,
        DOSE,
        ("stripe_um", 10.0),
        ("subfield_um", 5.0),
        ("subfield_us", 1.0),
    ]);
    for (rect, pieces) in [
        ((100, 100, 200, 200), 1),
        ((100, 9_950, 200, 10_050), 2),
        ((4_950, 4_950, 5_050, 5_050), 4),
        ((4_900, 4_900, 5_000, 5_000), 1),
        ((5_000, 10_000, 5_100, 10_100), 1),
        ((1_000, 1_000, 11_000, 1_100), 3),
        ((-100, -100, 100, 100), 2), // overhangs the frame: only x is cut, below there is no stripe
    ] {
        let shot = list(&[rect]);
        let one = [placed(&shot, &Repetition::Once)];
        let pattern = Pattern::Placed {
            placed: &one,
            frame: frame_nm(20_000, 20_000),
        };
        let time = WriteTime::new(&profile, &pattern).unwrap();
        assert_eq!((time.shots, time.flashes), (1, pieces), "{rect:?}");
        assert_eq!(time.cuts.border, pieces - 1);
    }
}

#[test]
fn a_border_near_a_side_cuts_off_a_sliver_unless_shots_may_reach_over_it() {
    // Sub-fields of 5 µm, slivers under 20 nm. By hand: 100 nm with 15 nm over a border gives a piece of 15 nm; 30 nm cut in the
    // middle gives two of 15; a corner 15 nm off both borders gives one piece of 85 × 85 and three slivers.
    for (rect, reach, expected) in [
        ((4_915, 100, 5_015, 200), 0.0, (2, 1)),
        ((4_985, 100, 5_015, 200), 0.0, (2, 2)),
        ((4_915, 4_915, 5_015, 5_015), 0.0, (4, 3)),
        ((4_980, 100, 5_080, 200), 0.0, (2, 0)),
        ((4_985, 100, 5_000, 200), 0.0, (1, 0)),
        ((4_990, 100, 5_005, 200), 0.0, (2, 0)), // a sliver before
        ((4_915, 100, 5_015, 200), 10.0, (2, 1)),
        ((4_915, 100, 5_015, 200), 15.0, (1, 0)),
        ((4_985, 100, 5_015, 200), 20.0, (1, 0)),
        ((4_915, 4_915, 5_015, 5_015), 20.0, (1, 0)),
        ((4_950, 100, 5_050, 200), 20.0, (2, 0)),
    ] {
        let profile = shaped(&[
            CURRENT,
            DOSE,
            ("subfield_um", 5.0),
            ("sliver_nm", 20.0),
            ("border_reach_nm", reach),
        ]);
        let shot = list(&[rect]);
        let one = [placed(&shot, &Repetition::Once)];
        let pattern = Pattern::Placed {
            placed: &one,
            frame: frame_nm(20_000, 20_000),
        };
        let time = WriteTime::new(&profile, &pattern).unwrap();
        let found = (time.flashes, time.cuts.border_slivers);
        assert_eq!(found, expected, "{rect:?}, reach {reach} nm");
    }
}

#[test]
fn a_shifted_grid_cuts_elsewhere() {
    // Across a stripe border of the first pass only: 2 + 1 flashes. The shifted grid has one stripe more.
    let profile = shaped(&[
        CURRENT,
        DOSE,
        ("stripe_um", 10.0),
        ("passes", 2.0),
        ("pass_shift", 0.5),
    ]);
    let shot = list(&[(100, 9_950, 200, 10_050)]);
    let one = [placed(&shot, &Repetition::Once)];
    let pattern = Pattern::Placed {
        placed: &one,
        frame: frame_nm(20_000, 20_000),
    };
    let time = WriteTime::new(&profile, &pattern).unwrap();
    assert_eq!((time.shots, time.flashes, time.cuts.border), (1, 3, 1));
    let stripes: usize = time.stripes.iter().map(|s| s.count).sum();
    assert_eq!(stripes, 2 + 3);
}

#[test]
fn flash_limits_cost_flashes() {
    let shot = list(&[(0, 0, 1000, 400)]); // 4e-9 cm² at 400 A/cm²: 1600 nA
    let one = [placed(&shot, &Repetition::Once)];
    let pattern = Pattern::Placed {
        placed: &one,
        frame: frame_nm(20_000, 20_000),
    };
    let time = |numbers: &[(&str, f64)]| {
        let all: Vec<_> = [CURRENT, DOSE].iter().chain(numbers).copied().collect();
        WriteTime::new(&shaped(&all), &pattern).unwrap()
    };
    let whole = time(&[]);
    // A beam of 800 nA: exactly two halves, each flashed as long.
    let halved = time(&[("greatest_beam_na", 800.0)]);
    assert_eq!((halved.flashes, halved.cuts.beam), (2, 1));
    assert!((halved.flash_h / whole.flash_h - 2.0).abs() < 1e-12);
    assert_eq!(time(&[("greatest_beam_na", 799.0)]).flashes, 3);
    // 25 µC/cm² in flashes of 10 at most: three, which share the time of one.
    let repeated = time(&[("greatest_flash_uc_cm2", 10.0)]);
    assert_eq!((repeated.flashes, repeated.cuts.repeated), (3, 2));
    assert!((repeated.flash_h / whole.flash_h - 1.0).abs() < 1e-12);
    // 62.5 ns.
    assert_eq!(time(&[("shortest_flash_ns", 62.5)]).cuts.too_short, 0);
    assert_eq!(time(&[("shortest_flash_ns", 62.6)]).cuts.too_short, 1);
    let halves = time(&[("shortest_flash_ns", 62.5), ("passes", 2.0)]);
    assert_eq!(halves.cuts.too_short, 2, "once in each pass");
}

#[test]
fn settling_grows_with_jump_and_side() {
    // Centres (50, 50), (650, 50), (650, 2050) nm: jumps 600 and 2000 nm; the first comes from the mean distance of
    // figures, here the side of a 10 µm frame with one figure. Greater sides 100, 300, 100 nm.
    let shot = list(&[(0, 0, 100, 100), (500, 0, 800, 100), (600, 2000, 700, 2100)]);
    let one = [placed(&shot, &Repetition::Once)];
    let pattern = Pattern::Placed {
        placed: &one,
        frame: frame_nm(10_000, 10_000),
    };
    let settle = |numbers: &[(&str, f64)]| {
        let all: Vec<_> = [CURRENT, DOSE].iter().chain(numbers).copied().collect();
        let time = WriteTime::new(&shaped(&all), &pattern).unwrap();
        time.settle_h.0 * 3600.0 * 1e9
    };
    let jumps = settle(&[("settle_ns_per_um_jump", 3.0)]);
    assert!((jumps - 3.0 * (10.0 + 0.6 + 2.0)).abs() < 1e-6, "{jumps}");
    let sides = settle(&[("settle_ns_per_um_side", 100.0)]);
    assert!((sides - 100.0 * (0.1 + 0.3 + 0.1)).abs() < 1e-6, "{sides}");
}

#[test]
fn astronomically_many_copies_are_counted_exactly() {
    // 10⁶ × 10⁶ copies at 100 nm over 100 mm: by hand 10¹² shots over 1000 stripes of 100 µm.
    let square = list(&[(0, 0, 50, 50), (50, 0, 90, 50)]);
    let lattice = Repetition::Lattice {
        columns: 1_000_000,
        rows: 1_000_000,
        a: Point::from_nm(0, 100),
        b: Point::from_nm(100, 0),
    };
    let all = [placed(&square, &lattice)];
    let pattern = Pattern::Placed {
        placed: &all,
        frame: frame_nm(100_000_000, 100_000_000),
    };
    let profile = shaped(&[CURRENT, DOSE, ("stripe_um", 100.0)]);
    let time = WriteTime::new(&profile, &pattern).unwrap();
    assert_eq!(time.flashes, 2_000_000_000_000);
    assert_eq!(time.cuts.border, 0);
    assert_eq!(time.stripes.len(), 1);
    assert_eq!(time.stripes[0].count, 1000);
    assert_eq!(time.stripes[0].flashes, 2_000_000_000);
}

#[test]
fn a_clip_stands_for_a_field() {
    // Clip of 10 × 10 µm with 1000 shots; field of 1 cm², 60 % covered: 1000 · 0.6 · 10⁶ shots. Shots of 100 × 100 nm on
    // stripes of 50 µm in sub-fields of 10 µm are cut in (1 + 0.01)² pieces on average.
    let square = list(&[(0, 0, 100, 100)]);
    let lattice = Repetition::Lattice {
        columns: 50,
        rows: 20,
        a: Point::from_nm(200, 0),
        b: Point::from_nm(0, 500),
    };
    let all = [placed(&square, &lattice)];
    let clip = Clip {
        placed: &all,
        frame: frame_nm(10_000, 10_000),
        coverage: 0.6,
    };
    let pattern = Pattern::Sample {
        clips: &[clip],
        field: Field {
            width: Nm::from_mm(10.0),
            height: Nm::from_mm(10.0),
        },
    };
    let profile = shaped(&[
        CURRENT,
        DOSE,
        ("stripe_um", 50.0),
        ("subfield_um", 10.0),
        ("stage_mm_s", 1000.0),
    ]);
    let time = WriteTime::new(&profile, &pattern).unwrap();
    assert_eq!(time.shots, 600_000_000);
    assert_eq!(time.flashes, 612_060_000);
    let flashes: Vec<_> = time.stripes.iter().map(|s| s.flashes).collect();
    let stripes: usize = time.stripes.iter().map(|s| s.count).sum();
    assert_eq!(stripes, 200);
    assert!(
        flashes.iter().all(|&f| f == 612_060_000 / 200),
        "{flashes:?}"
    );
}

#[test]
fn impossible_patterns_are_refused() {
    let profile = shaped(&[CURRENT, DOSE]);
    let square = list(&[(0, 0, 100, 100)]);
    let negative = ShotList::new(
        address(),
        vec![Shot {
            x0: 0,
            y0: 0,
            x1: 1,
            y1: 1,
            dose: Dose(-1.0),
        }],
    );
    let frame = frame_nm(1000, 1000);
    let refused = |shots: &ShotList, repetition: &Repetition, frame| {
        let one = [placed(shots, repetition)];
        let pattern = Pattern::Placed {
            placed: &one,
            frame,
        };
        WriteTime::new(&profile, &pattern).unwrap_err().to_string()
    };
    let lattice = |columns, a| Repetition::Lattice {
        columns,
        rows: 1,
        a,
        b: Point::new(0, 0),
    };
    let once = Repetition::Once;
    for (said, expected) in [
        (
            refused(&square, &once, frame_nm(0, 10)),
            "a side or length is 0 nm, expected a positive one up to 1 m",
        ),
        (refused(&negative, &once, frame), "a shot has dose -1"),
        (
            refused(&square, &lattice(3, Point::new(i64::MAX, 0)), frame),
            "a shot stands at (1152921504606846976, 0) pm, expected within 1 m",
        ),
        (
            refused(&square, &lattice(u64::MAX, Point::new(0, 0)), frame),
            "18446744073709551615 shots or copies, expected at most",
        ),
        (
            refused(
                &square,
                &Repetition::List(vec![Point::new(i64::MIN, 0)]),
                frame,
            ),
            "a shot stands at (-1152921504606846976, 0) pm",
        ),
        (
            refused(
                &square,
                &Repetition::nested(vec![lattice(1 << 20, Point::default()); 4]),
                frame,
            ),
            "1152921504606846976 shots or copies, expected at most",
        ),
    ] {
        assert!(said.starts_with(expected), "{said}");
    }
    for coverage in [0.0, -0.5, 1.01, f64::NAN] {
        let one = [placed(&square, &once)];
        let clip = Clip {
            placed: &one,
            frame,
            coverage,
        };
        let pattern = Pattern::Sample {
            clips: &[clip],
            field: FIELD,
        };
        let error = WriteTime::new(&profile, &pattern).unwrap_err();
        assert!(matches!(error, WriteTimeError::Coverage { .. }), "{error}");
    }
    for width in [f64::NAN, -1.0, 0.0, 1e10] {
        let field = Field {
            width: Nm(width),
            ..FIELD
        };
        let pattern = Pattern::Counts {
            counts: Counts::of(1),
            field: Some(field),
        };
        let error = WriteTime::new(&profile, &pattern).unwrap_err();
        assert!(matches!(error, WriteTimeError::Side { .. }), "{error}");
    }
    let error = WriteTime::new(&profile, &shots(u128::MAX)).unwrap_err();
    assert!(matches!(error, WriteTimeError::TooMany { .. }), "{error}");
}

// ---- how sure, how sensitive, when even

#[test]
fn the_interval_adds_independent_uncertainties_as_squares() {
    // Hours are 2N(Q/2J + t): with N = 3·10¹¹, ±5 ns of settling moves them by 0.8333 h, ±10 of J by 5.208·(1/0.975 − 1) =
    // 0.13355 h up and 5.208·(1 − 1/1.025) = 0.12703 h down.
    let text = "name = \"x\"\n[writer]\nkind = \"shaped\"\npasses = 2\ncurrent_a_cm2 = { value = 400, plus_minus = 10 }\n\
                settle_ns = { value = 60, plus_minus = 5 }\n[process]\nbase_dose_uc_cm2 = 25\n";
    let profile = Profile::parse(text, "x").unwrap();
    let all = interval(&profile, &shots(300_000_000_000)).unwrap();
    same_hours(all.total_h, 15.208);
    same_hours(all.high_h, 15.208 + 0.833_333_f64.hypot(0.133_547));
    same_hours(all.low_h, 15.208 - 0.833_333_f64.hypot(0.127_033));

    let exact = interval(&shaped(&[CURRENT, DOSE]), &shots(300_000_000_000)).unwrap();
    assert_eq!((exact.low_h, exact.high_h), (exact.total_h, exact.total_h));
}

#[test]
fn the_number_that_moves_the_total_most_comes_first() {
    // 3·10¹¹ shots as in CHECKS 5: 10 h of settling, 5.208 h of flashing.
    let profile = shaped(&[CURRENT, DOSE, ("settle_ns", 60.0), ("passes", 2.0)]);
    let found = sensitivity(&profile, &shots(300_000_000_000)).unwrap();
    let keys: Vec<_> = found.iter().map(|s| s.key).collect();
    // One pass more or less: ±5 h; 10 % of settling: ±1 h; of J: +0.579 − 0.473 h; of Q: ±0.521 h.
    assert_eq!(
        keys,
        [Key::Passes, Key::Settle, Key::Current, Key::BaseDose]
    );
    same_hours(found[0].at_lower_h, 10.208);
    same_hours(found[0].at_upper_h, 20.208);
    same_hours(found[1].at_lower_h, 14.208);
    same_hours(found[1].at_upper_h, 16.208);
    same_hours(found[2].at_lower_h, 15.208 + 5.208_333 / 9.0);
    let json = serde_json::to_value(found[1]).unwrap();
    assert_eq!(json["key"], "settle_ns");
}

#[test]
fn numbers_that_the_stage_hides_move_nothing() {
    let profile = shaped(&[
        CURRENT,
        DOSE,
        ("settle_ns", 60.0),
        ("stripe_um", 80.0),
        ("stage_mm_s", 1.0),
    ]);
    let pattern = Pattern::Counts {
        counts: Counts::of(33_796_982_921),
        field: Some(FIELD),
    };
    let found = sensitivity(&profile, &pattern).unwrap();
    let keys: Vec<_> = found.iter().map(|s| s.key).collect();
    assert_eq!(keys, [Key::Passes, Key::Stripe, Key::Stage]);
}

#[test]
fn two_writers_tie_where_their_hours_meet() {
    let fast = raster(&[("beam_na", 1000.0), ("base_dose_uc_cm2", 100.0)]);
    let pattern = Pattern::Counts {
        counts: Counts::of(0),
        field: Some(FIELD),
    };
    let hours = WriteTime::new(&fast, &pattern).unwrap().total_h;
    // 13728 s at 2·(31.25 + 60) ns a shot: by hand 75 221 917 808.2, so the next whole number.
    let shaped = shaped(&[CURRENT, DOSE, ("settle_ns", 60.0), ("passes", 2.0)]);
    let found = tie(&shaped, Counts::of(0), FIELD, hours).unwrap();
    assert_eq!(found, Some(75_221_917_809));
    // A writer whose fixed parts alone take longer never is the faster.
    let mut slow = shaped.clone();
    slow.set("load_min", 600.0).unwrap();
    assert_eq!(tie(&slow, Counts::of(0), FIELD, hours).unwrap(), None);
}

#[test]
fn json_has_the_causes_in_hours() {
    let time = WriteTime::new(&Profile::builtin("shaped-400").unwrap(), &shots(1_000_000)).unwrap();
    let json = serde_json::to_value(&time).unwrap();
    for key in ["total_h", "flash_h", "settle_h", "stage_h", "overhead_h"] {
        assert!(json[key].is_number(), "{key} in {json}");
    }
    assert_eq!(json["total_h"].as_f64(), Some(time.total_h.0));
}

// ---- against counting copy by copy

#[derive(Clone, Debug)]
struct Scene {
    rects: Vec<(i64, i64, i64, i64, f64)>,
    lattice: Repetition,
    orientation: usize,
    dose: f64,
    stripe: i64,
    rows: i64,
    passes: u32,
    shift: f64,
    /// nm.
    reach: i64,
    /// nm.
    sliver: i64,
}

fn point(reach: i64) -> impl Strategy<Value = Point> {
    (-reach..reach, -reach..reach, 0..4).prop_map(|(x, y, kind)| match kind {
        0 => Point::from_nm(x, 0),
        1 => Point::from_nm(0, y),
        _ => Point::from_nm(x, y),
    })
}

fn scene() -> impl Strategy<Value = Scene> {
    let rect = (0i64..3000, 0i64..3000, 1i64..2500, 1i64..2500, 0.5f64..2.0)
        .prop_map(|(x, y, w, h, d)| (x, y, x + w, y + h, d));
    let lattice = (1u64..7, 1u64..7, point(4000), point(4000)).prop_map(|(columns, rows, a, b)| {
        Repetition::Lattice {
            columns,
            rows,
            a,
            b,
        }
    });
    let arrays = prop::collection::vec(lattice, 1..3).prop_map(Repetition::nested);
    (
        prop::collection::vec(rect, 1..4),
        arrays,
        0usize..8,
        0.5f64..2.0,
        1i64..8,
        1i64..4,
        1u32..4,
        prop::sample::select(vec![0.0, 0.5, 0.25]),
        (prop::sample::select(vec![0i64, 20, 400]), 0i64..600),
    )
        .prop_map(
            |(rects, lattice, orientation, dose, cell, rows, passes, shift, (reach, sliver))| {
                Scene {
                    rects,
                    lattice,
                    orientation,
                    dose,
                    stripe: cell * rows * PM * PM,
                    rows,
                    passes,
                    shift,
                    reach,
                    sliver,
                }
            },
        )
}

impl Scene {
    const FRAME: i64 = 40 * PM * PM;

    fn shots(&self) -> ShotList {
        let shots = self.rects.iter().map(|&(x0, y0, x1, y1, dose)| Shot {
            x0,
            y0,
            x1,
            y1,
            dose: Dose(dose),
        });
        ShotList::new(address(), shots.collect())
    }

    fn transform(&self) -> Transform {
        Transform {
            orientation: Orientation::all()[self.orientation],
            shift: Point::new(Self::FRAME / 2, Self::FRAME / 2),
        }
    }

    fn cell(&self) -> i64 {
        self.stripe / self.rows
    }

    fn profile(&self) -> Profile {
        shaped(&[
            CURRENT,
            DOSE,
            ("settle_ns", 60.0),
            ("settle_ns_per_um_jump", 2.0),
            ("settle_ns_per_um_side", 7.0),
            ("stripe_um", Nm::from_pm(self.stripe).um()),
            ("subfield_um", Nm::from_pm(self.cell()).um()),
            ("subfield_us", 1.0),
            ("stage_mm_s", 500.0),
            ("turn_s", 0.01),
            ("passes", f64::from(self.passes)),
            ("pass_shift", self.shift),
            ("border_reach_nm", self.reach as f64),
            ("sliver_nm", self.sliver as f64),
        ])
    }

    fn time(&self, profile: &Profile, repetition: &Repetition) -> WriteTime {
        let shots = self.shots();
        let one = [Placed {
            transform: self.transform(),
            dose: Dose(self.dose),
            ..placed(&shots, repetition)
        }];
        let pattern = Pattern::Placed {
            placed: &one,
            frame: Rect {
                min: Point::new(0, 0),
                max: Point::new(Self::FRAME, Self::FRAME),
            },
        };
        WriteTime::new(profile, &pattern).unwrap()
    }

    /// Pieces of one shot in one pass as (stripe, pieces, slivers): borders are looked at one by one.
    fn pieces(&self, rect: Rect, pass: u32) -> Vec<(i64, u128, u128)> {
        let part = (f64::from(pass) * self.shift).fract();
        let before = |length: i64| (Nm::from_pm(length) * part).to_pm().unwrap();
        let (bottom, left) = (-before(self.stripe), -before(self.cell()));
        let reach = self.reach * PM;
        let cut = |from: i64, to: i64, start: i64, cell: i64, least: i64, most: i64| {
            let borders = (-100..200).map(|k| start + k * cell);
            let inside =
                borders.filter(|&b| b - from > reach && to - b > reach && b > least && b < most);
            let mut ends = vec![from];
            ends.extend(inside);
            ends.push(to);
            ends
        };
        let stripes = (Self::FRAME - bottom + self.stripe - 1) / self.stripe;
        let top = bottom + stripes * self.stripe;
        let columns = cut(
            rect.min.x,
            rect.max.x,
            left,
            self.cell(),
            i64::MIN,
            i64::MAX,
        );
        let thin = |ends: &[i64]| ends[1] - ends[0] < self.sliver * PM;
        let is_sliver = rect.width().min(rect.height()) < self.sliver * PM;
        let rows = cut(rect.min.y, rect.max.y, bottom, self.cell(), bottom, top);
        rows.windows(2)
            .map(|ends| {
                let middle = (ends[0] + ends[1]).div_euclid(2);
                // A shot flashed whole is written where its middle lies.
                let stripe = (middle - bottom).div_euclid(self.stripe);
                let slim = columns
                    .windows(2)
                    .filter(|&c| !is_sliver && (thin(c) || thin(ends)))
                    .count();
                (
                    stripe.clamp(0, stripes - 1),
                    columns.len() as u128 - 1,
                    slim as u128,
                )
            })
            .collect()
    }
}

/// What looking at copies one by one finds.
#[derive(Debug, PartialEq)]
struct Counted {
    flashes: u128,
    slivers: u128,
    dose: f64,
    /// Flashes of stripes that have any, in order of size.
    by_stripe: Vec<u128>,
}

impl Scene {
    fn counted(&self, copies: &[Point]) -> Counted {
        let (mut flashes, mut slivers, mut dose) = (0, 0, 0.0);
        let mut by_stripe = std::collections::BTreeMap::new();
        for pass in 0..self.passes {
            for (rect, shot_dose) in self.shots().rects() {
                for &copy in copies {
                    let rect = self.transform().apply_rect(rect).translated(copy);
                    for (stripe, pieces, slim) in self.pieces(rect, pass) {
                        slivers += slim;
                        flashes += pieces;
                        dose += pieces as f64 * shot_dose.0 * self.dose;
                        *by_stripe.entry((pass, stripe)).or_insert(0) += pieces;
                    }
                }
            }
        }
        let mut by_stripe: Vec<u128> = by_stripe.into_values().collect();
        by_stripe.sort_unstable();
        Counted {
            flashes,
            slivers,
            dose,
            by_stripe,
        }
    }
}

fn filled_stripes(time: &WriteTime) -> Vec<u128> {
    let mut filled: Vec<u128> = time
        .stripes
        .iter()
        .flat_map(|s| std::iter::repeat_n(s.flashes, s.count * usize::try_from(s.passes).unwrap()))
        .filter(|&f| f > 0)
        .collect();
    filled.sort_unstable();
    filled
}

/// Many copies to a sub-field, arrays in arrays, steps downward, copies beyond the frame: as looking at each copy finds.
#[test]
fn large_arrays_are_spread_as_their_copies_would_be() {
    let lattice = |columns, rows, a: (i64, i64), b: (i64, i64)| Repetition::Lattice {
        columns,
        rows,
        a: Point::from_nm(a.0, a.1),
        b: Point::from_nm(b.0, b.1),
    };
    let arrays = [
        lattice(7, 1500, (130, 0), (0, 29)),
        lattice(900, 9, (0, -31), (170, 0)),
        Repetition::nested(vec![
            lattice(3, 40, (210, 0), (0, 17)),
            lattice(2, 30, (2000, 0), (0, -701)),
        ]),
        lattice(6, 800, (110, 0), (3, 23)),
        lattice(5, 700, (90, 4), (0, 27)),
    ];
    let (mut borders, mut slivers) = (0, 0);
    for lattice in arrays {
        for (reach, sliver) in [(0, 0), (0, 25), (20, 25), (400, 30)] {
            let scene = Scene {
                rects: vec![
                    (0, 0, 40, 35, 1.0),
                    (35, 20, 300, 90, 1.5),
                    (0, 900, 45, 1100, 0.75),
                ],
                lattice: lattice.clone(),
                orientation: 0,
                dose: 1.0,
                stripe: 9 * PM * PM,
                rows: 3,
                passes: 2,
                shift: 0.25,
                reach,
                sliver,
            };
            let copies: Vec<_> = scene.lattice.displacements().collect();
            let counted = scene.counted(&copies);
            let time = scene.time(&scene.profile(), &scene.lattice);
            let found = Counted {
                flashes: time.flashes,
                slivers: time.cuts.border_slivers,
                by_stripe: filled_stripes(&time),
                ..counted
            };
            assert_eq!(
                found, counted,
                "{lattice:?}, reach {reach}, sliver {sliver}"
            );
            borders += time.cuts.border;
            slivers += time.cuts.border_slivers;
        }
    }
    assert!(borders > 0 && slivers > 0);
}

fn near(a: f64, b: f64) -> bool {
    (a - b).abs() <= 1e-9 * a.abs().max(b.abs()).max(1e-12)
}

proptest! {
    #[test]
    fn a_lattice_is_spread_as_its_copies_would_be(scene in scene()) {
        let profile = scene.profile();
        let time = scene.time(&profile, &scene.lattice);

        let copies: Vec<_> = scene.lattice.displacements().collect();
        let shots = scene.shots();
        let stripes: usize = time.stripes.iter().map(|s| s.count * usize::try_from(s.passes).unwrap()).sum();
        let Counted { flashes, slivers, dose, by_stripe } = scene.counted(&copies);
        prop_assert_eq!(time.flashes, flashes);
        // 25 µC/cm² at 400 A/cm²: 62.5 ns (CHECKS 5), shared among the passes.
        prop_assert!(near(time.flash_h.0 * 3600.0, dose * 62.5e-9 / f64::from(scene.passes)));
        prop_assert_eq!(time.shots, copies.len() as u128 * shots.len() as u128);
        prop_assert_eq!(time.cuts.border, flashes - u128::from(scene.passes) * time.shots);
        prop_assert_eq!(time.cuts.border_slivers, slivers);
        if scene.reach >= scene.sliver {
            prop_assert_eq!(slivers, 0);
        }

        prop_assert_eq!(filled_stripes(&time), by_stripe);

        // And one by one through the crate: the same hours.
        let listed = scene.time(&profile, &Repetition::List(copies));
        prop_assert_eq!(stripes, listed.stripes.iter().map(|s| s.count * usize::try_from(s.passes).unwrap()).sum::<usize>());
        for (a, b) in [
            (time.total_h, listed.total_h),
            (time.flash_h, listed.flash_h),
            (time.settle_h, listed.settle_h),
            (time.overhead_h, listed.overhead_h),
        ] {
            prop_assert!(near(a.0, b.0), "{} {}", a, b);
        }
    }

    #[test]
    fn causes_add_up_exactly_and_each_stripe_takes_the_longer(scene in scene()) {
        let profile = scene.profile();
        let time = scene.time(&profile, &scene.lattice);
        let overhead = time.overhead;
        prop_assert_eq!(time.overhead_h, overhead.subfield_h + overhead.turns_h + overhead.calibration_h + overhead.handling_h);
        prop_assert_eq!(time.total_h, time.flash_h + time.settle_h + time.stage_h + time.overhead_h);
        // DESIGN 6: Σ (max(beam, stage) + turn). 40 µm at 500 mm/s: 80 µs.
        let mut seconds = 0.0;
        for s in &time.stripes {
            let beam = s.flash_s + s.settle_s + s.subfield_s;
            let stripe = beam.0.max(80e-6);
            prop_assert!(near(s.total().0, stripe));
            prop_assert_eq!(s.bound == Bound::Stage, beam.0 < 80e-6);
            seconds += f64::from(s.passes) * s.count as f64 * (stripe + 0.01);
        }
        prop_assert!(near(time.total_h.0 * 3600.0, seconds));
    }

    #[test]
    fn hours_move_the_right_way(
        number in 1u128..1_000_000_000_000,
        numbers in (10f64..100.0, 50f64..1500.0, 0f64..200.0, 1f64..100.0, 1.0f64..1.5),
    ) {
        let (base, density, settle, speed, factor) = numbers;
        let profile = shaped(&[
            ("base_dose_uc_cm2", base),
            ("current_a_cm2", density),
            ("settle_ns", settle),
            ("stage_mm_s", speed),
            ("stripe_um", 80.0),
            ("turn_s", 0.5),
            ("calibration_every_min", 30.0),
            ("calibration_s", 60.0),
            ("passes", 2.0),
        ]);
        let hours = |profile: &Profile, number| {
            let pattern = Pattern::Counts { counts: Counts::of(number), field: Some(FIELD) };
            WriteTime::new(profile, &pattern).unwrap().total_h
        };
        // Where the stage bounds, waiting makes up for flashing; their sum is as good as f64 adds.
        let rounding = Hours(1e-12 * hours(&profile, number).0);
        let now = hours(&profile, number);
        prop_assert!(hours(&profile, number + number / 7 + 1) >= now - rounding);
        for key in [Key::BaseDose, Key::Settle, Key::Turn, Key::Calibration] {
            let value = profile.value(key).unwrap();
            prop_assert!(hours(&profile.with(key, value * factor), number) >= now - rounding, "{}", key);
        }
        for key in [Key::Current, Key::Stage, Key::CalibrationEvery] {
            let value = profile.value(key).unwrap();
            prop_assert!(hours(&profile.with(key, value * factor), number) <= now + rounding, "{}", key);
        }
    }
}
