//! Where the contour runs: edges, lines, corners and line ends as derived, level lines.

use shotwright::blur::{NARROWEST_LINE, NARROWEST_SQUARE};
use shotwright::expose::{level_at, level_lines, polish};
use shotwright::target::{DoseField, Printed};

use super::{FAR, corner, expose, line, near, published, rect, wide_edge};

const DIAGONAL: [f64; 2] = [std::f64::consts::FRAC_1_SQRT_2; 2];

/// Source: `scipy.optimize.brentq` on products of `scipy.special.ndtr`, scipy 1.17 (`make_contour.py` beside the data).
#[test]
fn contours_are_within_0_01_nm_of_scipy() {
    let e = expose(10.0, &published().0);
    let mut seen = 0;
    for line in include_str!("../data/expose/contour.csv").lines().skip(2) {
        let v: Vec<f64> = line.split(',').map(|v| v.parse().unwrap()).collect();
        let found = e.crossing([v[0], v[1]], [v[2].cos(), v[2].sin()], 60.0);
        near(found.unwrap(), v[3], 0.001);
        seen += 1;
    }
    assert_eq!(seen, 300);
}

#[test]
fn a_wide_isolated_edge_prints_where_it_was_drawn() {
    let e = wide_edge(13.0, 1.0);
    near(e.dose([0.0, 0.0]), 0.5, 1e-12);
    near(e.crossing([0.0, 0.0], [1.0, 0.0], 40.0).unwrap(), 0.0, 1e-9);
    // The same from a place that is not on the edge.
    near(
        e.crossing([-7.0, 3.0], [1.0, 0.0], 40.0).unwrap(),
        7.0,
        1e-6,
    );
    near(
        e.crossing([9.0, 3.0], [1.0, 0.0], 40.0).unwrap(),
        -9.0,
        1e-6,
    );
}

#[test]
fn no_contour_in_range_is_none() {
    let e = wide_edge(10.0, 1.0);
    assert_eq!(e.crossing([-100.0, 0.0], [1.0, 0.0], 40.0), None);
    assert_eq!(e.crossing([100.0, 0.0], [1.0, 0.0], 40.0), None);
    assert_eq!(
        expose(10.0, &[]).crossing([0.0, 0.0], [1.0, 0.0], 40.0),
        None
    );
    // Half the dose never reaches the threshold.
    assert_eq!(
        wide_edge(10.0, 0.4).crossing([0.0, 0.0], [1.0, 0.0], 40.0),
        None
    );
}

/// Derived: printed width and dose at the drawn edge of long lines, narrowest line and square that print.
#[test]
fn lines_print_as_derived() {
    for (width, printed, at_edge) in [
        (1.5, 0.929_947, 0.433_193),
        (2.0, 1.866_541, 0.477_250),
        (2.5, 2.467_406, 0.493_790),
        (3.0, 2.993_156, 0.498_650),
        (4.0, 3.999_841, 0.499_968),
    ] {
        let e = line(20.0, width);
        near(e.dose([0.0, 0.0]), at_edge, 5e-7);
        let error = e.crossing([0.0, 0.0], [1.0, 0.0], 80.0).unwrap();
        near(width + 2.0 * error / 20.0, printed, 1e-6);
    }
    for (share, prints) in [(0.999, false), (1.001, true)] {
        let w = 20.0 * NARROWEST_LINE * share;
        let l = expose(20.0, &[(rect(-w / 2.0, -FAR, w / 2.0, FAR), 1.0)]);
        assert_eq!(l.dose([0.0, 0.0]) >= 0.5, prints);
        let s = 10.0 * NARROWEST_SQUARE * share;
        assert_eq!(
            expose(20.0, &[(rect(-s, -s, s, s), 1.0)]).dose([0.0, 0.0]) >= 0.5,
            prints
        );
    }
    near(NARROWEST_LINE, 1.348_98, 1e-9);
    near(NARROWEST_SQUARE, 2.103_59, 1e-9);
}

/// Derived: a right angle's pull-back on the diagonal, tightest radius, and places on its contour.
#[test]
fn a_corner_is_pulled_back_as_derived() {
    let sigma = 1000.0;
    let e = corner(sigma);
    let back = |across: f64| {
        let p = [across * DIAGONAL[0], -across * DIAGONAL[1]];
        -e.crossing(p, DIAGONAL, 4.0 * sigma).unwrap() / sigma
    };
    near(back(0.0), 0.770_679, 1e-6);
    let across = 20.0;
    let sag = back(across) - back(0.0);
    near((across / sigma).powi(2) / (2.0 * sag), 1.371_305, 1e-3);
    for (x, y) in [
        (0.5, 0.592_091),
        (1.0, 0.238_586),
        (1.5, 0.089_845),
        (2.0, 0.029_181),
    ] {
        let found = e
            .crossing([-x * sigma, 0.0], [0.0, 1.0], 4.0 * sigma)
            .unwrap();
        near(-found / sigma, y, 1e-6);
    }
}

/// Derived.
#[test]
fn line_ends_are_pulled_back_as_derived() {
    for (width, back) in [
        (2.0, 0.620_080),
        (3.0, 0.194_506),
        (4.0, 0.059_780),
        (6.0, 0.003_393),
    ] {
        let half = width * 10.0;
        let e = expose(20.0, &[(rect(-FAR, -half, 0.0, half), 1.0)]);
        near(
            -e.crossing([0.0, 0.0], [1.0, 0.0], 80.0).unwrap() / 20.0,
            back,
            1e-6,
        );
    }
}

/// Derived.
#[test]
fn a_wide_edge_has_the_derived_slope_and_shifts() {
    for (sigma, percent_per_nm) in [(10.0, 7.979), (15.0, 5.319), (20.0, 3.989)] {
        let (_, [slope, _]) = wide_edge(sigma, 1.0).dose_and_gradient([0.0, 0.0]);
        near(-100.0 * slope / 0.5, percent_per_nm, 5e-4);
    }
    for (change, shift) in [
        (0.05, 0.059_72),
        (-0.05, -0.066_01),
        (0.10, 0.114_19),
        (-0.10, -0.139_71),
    ] {
        let found = wide_edge(10.0, 1.0 + change)
            .crossing([0.0, 0.0], [1.0, 0.0], 40.0)
            .unwrap();
        near(found / 10.0, shift, 5e-6);
        // A level line at the level that stands for the change runs at the same place.
        let e = wide_edge(10.0, 1.0);
        let mut lines = level_lines(&e, [-20.0, 0.0, 20.0, 20.0], 4.0, level_at(change));
        polish(&e, &mut lines, level_at(change), 4.0);
        assert_eq!(lines.len(), 1);
        assert!(!lines[0].closed && lines[0].points.len() >= 5);
        for p in &lines[0].points {
            near(p[0] / 10.0, shift, 5e-6);
        }
    }
}

/// Bound derived: at most 0.07 h²/σ, h = 1 to 16 nm.
#[test]
fn contour_error_falls_with_the_square_of_the_step() {
    let (sigma, level) = (20.0, 0.3);
    // Φ⁻¹(0.3) = −0.524401 (standard table of the normal distribution): where the level lies before the edge.
    let edge = 0.524_400_5 * sigma;
    let mut worst_of = Vec::new();
    for step in [16.0, 8.0, 4.0, 2.0, 1.0] {
        let mut worst = 0.0_f64;
        for shift in 0..32 {
            let start = -60.0 + step * f64::from(shift) / 32.0;
            let lines = level_lines(
                &wide_edge(sigma, 1.0),
                [start, 0.0, 60.0, 10.0],
                step,
                level,
            );
            assert_eq!(lines.len(), 1);
            for p in &lines[0].points {
                worst = worst.max((p[0] - edge).abs());
            }
        }
        assert!(
            worst <= 0.07 * step * step / sigma,
            "step {step}: off by {worst}"
        );
        worst_of.push(worst);
    }
    for pair in worst_of.windows(2) {
        let ratio = pair[0] / pair[1];
        assert!(
            (2.5..6.0).contains(&ratio),
            "half the step divides the error by {ratio}, expected about 4"
        );
    }
}

#[test]
fn level_lines_close_around_the_print_and_its_hole() {
    let frame = [
        (rect(0.0, 0.0, 300.0, 80.0), 1.0),
        (rect(0.0, 220.0, 300.0, 300.0), 1.0),
        (rect(0.0, 80.0, 80.0, 220.0), 1.0),
        (rect(220.0, 80.0, 300.0, 220.0), 1.0),
    ];
    let e = expose(10.0, &frame);
    let mut lines = level_lines(&e, [-40.0, -40.0, 340.0, 340.0], 3.0, 0.5);
    polish(&e, &mut lines, 0.5, 3.0);
    assert!(lines.len() == 2 && lines.iter().all(|l| l.closed));
    let areas: Vec<f64> = lines
        .iter()
        .map(|l| {
            let n = l.points.len();
            (0..n)
                .map(|i| (l.points[i], l.points[(i + 1) % n]))
                .map(|(a, b)| 0.5 * (a[0] * b[1] - a[1] * b[0]))
                .sum()
        })
        .collect();
    // The print lies to the left: the outer line turns counter-clockwise, the hole's clockwise. Each right angle
    // loses 0.864767 σ² (derived): the outer four of the print, the inner four of the hole.
    let lost = 4.0 * 0.864_767 * 100.0;
    near(areas[0], 90_000.0 - lost, 30.0);
    near(areas[1], -(19_600.0 - lost), 30.0);
}
