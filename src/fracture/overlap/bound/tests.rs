use super::*;
use crate::blur::cdf;
use crate::geom::{Figure, Point, Ring};
use crate::shot::AddressUnit;
use crate::units::Nm;

const PLANTED: &str = include_str!("../../../../tests/data/judge/planted.wkt");
const PLANTED_SHOTS: &str = include_str!("../../../../tests/data/judge/planted.csv");

fn limits() -> ShotLimits {
    ShotLimits {
        address: AddressUnit::FINEST,
        least_side: Nm(8.0),
        greatest_side: Nm(1000.0),
        sliver: Nm(8.0),
    }
}

fn sigma_10() -> Blur {
    Blur::new(Nm(10.0)).unwrap()
}

fn target(figure: &Figure) -> Target {
    Target::new(figure, sigma_10(), Nm(2.0))
}

fn figure(points: &[(i64, i64)]) -> Figure {
    let points = points.iter().map(|&(x, y)| Point::from_nm(x, y)).collect();
    Figure::new(Ring::new(points).unwrap(), Vec::new())
}

fn bound(points: &[(i64, i64)]) -> usize {
    lower_bound(&target(&figure(points)), sigma_10(), &limits(), |_| 0.0)
}

/// A bar of the length and 60 nm high, with bumps 60 nm wide and 100 nm high every 250 nm from 100 nm on.
fn bumps(count: i64) -> Vec<(i64, i64)> {
    let bump = |i: i64| {
        let x = 100 + 250 * i;
        [(x + 60, 60), (x + 60, 160), (x, 160), (x, 60)]
    };
    let end = 250 * count;
    let mut points = vec![(0, 0), (end, 0), (end, 60)];
    points.extend((0..count).rev().flat_map(bump));
    points.push((0, 60));
    points
}

/// Figures that 2 to 10 known shots print, with the number of these.
fn planted() -> Vec<(Figure, usize)> {
    let pm = |s: &str| Nm(s.parse().unwrap()).to_pm().unwrap();
    PLANTED
        .lines()
        .enumerate()
        .map(|(i, line)| {
            let ring = line.trim_start_matches("POLYGON((").trim_end_matches("))");
            let points = ring.split(',').map(|xy| {
                let (x, y) = xy.trim().split_once(' ').unwrap();
                Point::new(pm(x), pm(y))
            });
            let row = format!("{i},");
            let shots = PLANTED_SHOTS.lines().filter(|l| l.starts_with(&row));
            let ring = Ring::new(points.collect()).unwrap();
            (Figure::new(ring, Vec::new()), shots.count())
        })
        .collect()
}

#[test]
fn a_rectangle_needs_one_shot() {
    assert_eq!(bound(&[(0, 0), (200, 0), (200, 90), (0, 90)]), 1);
}

/// At a tolerance of 2 nm no place of a line 3 nm wide is further in than that: nothing must print.
#[test]
fn nothing_to_print_needs_no_shot() {
    assert_eq!(bound(&[(0, 0), (200, 0), (200, 3), (0, 3)]), 0);
}

#[test]
fn elbows_and_crosses_need_two_shots() {
    let elbow = [(0, 0), (300, 0), (300, 60), (60, 60), (60, 300), (0, 300)];
    assert_eq!(bound(&elbow), 2);
    let cross = [
        (0, 120),
        (120, 120),
        (120, 0),
        (180, 0),
        (180, 120),
        (300, 120),
        (300, 180),
        (180, 180),
        (180, 300),
        (120, 300),
        (120, 180),
        (0, 180),
    ];
    assert_eq!(bound(&cross), 2);
}

/// 500 nm are more than a shot of 300 nm prints, though less than two of them.
#[test]
fn the_greatest_side_counts() {
    let bar = target(&figure(&[(0, 0), (500, 0), (500, 90), (0, 90)]));
    let short = ShotLimits {
        greatest_side: Nm(300.0),
        ..limits()
    };
    assert_eq!(lower_bound(&bar, sigma_10(), &short, |_| 0.0), 2);
}

/// A shot for each bump and one for the bar print it, and no fewer: no shot serves two bumps, or a bump and the bar beside it.
#[test]
fn every_bump_needs_its_shot() {
    for count in 1..=3 {
        assert_eq!(bound(&bumps(count)), usize::try_from(count).unwrap() + 1);
    }
}

/// 24 bumps on a bar of 6 µm: windows of 640 nm stand 1160 nm apart, so four of them count.
#[test]
fn windows_of_a_long_figure_add_up() {
    let found = bound(&bumps(24));
    assert!((8..=24 + 7).contains(&found), "{found}");
}

/// Where the context gives part of the dose, no more shots are needed than without.
#[test]
fn context_never_raises_the_bound() {
    for (figure, _) in planted().iter().step_by(5) {
        let bound = |context| lower_bound(&target(figure), sigma_10(), &limits(), |_| context);
        assert!(bound(0.2) <= bound(0.0));
        assert_eq!(bound(0.5), 0, "the context prints all");
    }
}

#[test]
fn no_planted_figure_is_bounded_above_its_shots() {
    let mut total = 0;
    for (i, (figure, shots)) in planted().iter().enumerate() {
        let bound = lower_bound(&target(figure), sigma_10(), &limits(), |_| 0.0);
        assert!(bound <= *shots, "figure {i}: {bound} of {shots}");
        total += bound;
    }
    // Three quarters of the 162 planted; measured.
    assert!(total >= 120, "{total}");
}

/// What the proof asks of the weights, tried with shots on no lines: each is grown until a place that must not print stops it.
#[test]
fn no_admissible_shot_holds_more_than_one() {
    let mut seed = 7_u64;
    let mut random = |from: f64, to: f64| {
        // Knuth's MMIX generator; the upper bits are good.
        seed = seed
            .wrapping_mul(6_364_136_223_846_793_005)
            .wrapping_add(1_442_695_040_888_963_407);
        #[allow(clippy::cast_precision_loss, reason = "31 bits")]
        let share = (seed >> 33) as f64 / f64::from(1_u32 << 31);
        from + share * (to - from)
    };
    let dose = |[x0, y0, x1, y1]: [f64; 4], p: [f64; 2]| {
        let share = |at: f64, from: f64, to: f64| cdf((at - from) / 10.0) - cdf((at - to) / 10.0);
        share(p[0], x0, x1) * share(p[1], y0, y1)
    };
    let mut heaviest = 0.0_f64;
    for (figure, _) in planted().iter().step_by(4) {
        let places = &windows(&target(figure), sigma_10(), &limits(), |_| 0.0)[0];
        let weights = weights(&hulls(places, &limits()));
        let admissible = |s: [f64; 4]| places.clear.iter().all(|&q| dose(s, q) < THRESHOLD);
        let [x0, y0, x1, y1] = places.bounds;
        for _ in 0..300 {
            let (x, y) = (random(x0, x1 - 8.0), random(y0, y1 - 8.0));
            let mut shot = [x, y, x + 8.0, y + 8.0];
            let mut step = 64.0;
            while step > 0.1 {
                let mut order = [0, 1, 2, 3].map(|side| (random(0.0, 1.0), side));
                order.sort_by(|a, b| a.0.total_cmp(&b.0));
                let mut grown = false;
                for (_, k) in order {
                    let mut next = shot;
                    next[k] += if k < 2 { -step } else { step };
                    let long = (next[2] - next[0]).max(next[3] - next[1]) > 1000.0;
                    if !long && admissible(next) {
                        (shot, grown) = (next, true);
                    }
                }
                if !grown {
                    step /= 2.0;
                }
            }
            if !admissible(shot) {
                continue;
            }
            let held: f64 = places
                .print
                .iter()
                .zip(&weights)
                .map(|((p, needed), u)| u * (dose(shot, *p) / needed).min(1.0))
                .sum();
            assert!(held <= 1.0 + 1e-9, "{shot:?} holds {held}");
            heaviest = heaviest.max(held);
        }
    }
    assert!(heaviest > 0.85, "no trial came near: {heaviest}");
}
