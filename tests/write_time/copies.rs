//! Arrays against their copies counted one by one.

use proptest::prelude::*;
use shotwright::geom::{Orientation, Point, Rect, Repetition, Transform};
use shotwright::profile::{Key, Profile};
use shotwright::shot::{Shot, ShotList};
use shotwright::units::{Dose, Hours, Nm};
use shotwright::write_time::{Bound, Counts, Pattern, Placed, WriteTime};

use crate::{CURRENT, DOSE, FIELD, PM, address, placed, shaped};

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
