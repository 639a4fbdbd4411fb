//! Rows of the table, one by one.

use shotwright::units::{Amperes, Area, BaseDose, CurrentDensity, Dose, Hours, Nm};
use shotwright::write_time::{Bound, Counts, Pattern, WriteTime, WriteTimeError, flash_time};

use crate::{CURRENT, DOSE, FIELD, raster, same, same_hours, shaped, shots};

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
