//! Shots where they stand: stripes, borders, limits of a flash, copies, clips, what is refused.

use shotwright::geom::{Point, Repetition};
use shotwright::shot::{Shot, ShotList};
use shotwright::units::{Dose, Nm};
use shotwright::write_time::{Bound, Clip, Counts, Field, Pattern, WriteTime, WriteTimeError};

use crate::{CURRENT, DOSE, FIELD, address, frame_nm, list, placed, shaped, shots, time_of};

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
        let time = time_of(&profile, &[rect]);
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
        let time = time_of(&profile, &[rect]);
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
    let time = time_of(&profile, &[(100, 9_950, 200, 10_050)]);
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
