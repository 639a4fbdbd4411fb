//! Intervals, what moves the total, and where two writers tie.

use shotwright::profile::{Key, Profile};
use shotwright::write_time::{Counts, Pattern, WriteTime, interval, sensitivity, tie};

use crate::{CURRENT, DOSE, FIELD, raster, same_hours, shaped, shots};

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
