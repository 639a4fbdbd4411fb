//! The dose at a place: against scipy, a plain sum and derived values.

use shotwright::target::{DoseField, Printed};

use super::{blur, corner, expose, near, published, rect};

/// Source: products of `scipy.special.ndtr`, scipy 1.17.
#[test]
fn dose_is_within_1e_7_of_scipy() {
    let (shots, places) = published();
    let e = expose(10.0, &shots);
    for (p, dose) in places {
        near(e.dose_exact(p), dose, 1e-7);
        near(e.dose_fast(p), dose, 1e-7);
        near(e.dose(p), dose, 1e-7);
    }
}

#[test]
fn a_row_is_the_dose_at_its_places() {
    let e = expose(10.0, &published().0);
    let mut out = [f64::NAN; 400];
    for y in [-80.0, -10.0, 3.3, 250.0, 555.5, 900.0] {
        e.row(y, -120.0, 2.5, &mut out);
        for (i, value) in (0_u32..).zip(out) {
            near(value, e.dose_exact([-120.0 + 2.5 * f64::from(i), y]), 1e-7);
        }
    }
}

#[test]
fn the_gradient_is_the_slope_of_the_dose() {
    let e = expose(10.0, &published().0);
    let h = 1e-3;
    for (p, _) in published().1.into_iter().take(100) {
        let d = |x: f64, y: f64| e.dose_exact([p[0] + x, p[1] + y]);
        let (_, g) = e.dose_and_gradient(p);
        near(g[0], (d(h, 0.0) - d(-h, 0.0)) / (2.0 * h), 1e-8);
        near(g[1], (d(0.0, h) - d(0.0, -h)) / (2.0 * h), 1e-8);
        let fast = e.gradient(p);
        near(fast[0], g[0], 1e-6);
        near(fast[1], g[1], 1e-6);
    }
}

/// Bins must not change a dose: a long shot among many small ones, far from the origin, against a plain sum.
#[test]
fn bins_lose_no_shot() {
    let mut shots = vec![(rect(1e6, 2e6, 1e6 + 30_000.0, 2e6 + 40.0), 0.7)];
    for k in 0..500 {
        let (x, y) = (
            1e6 + f64::from(k * 7919 % 30_000),
            2e6 + f64::from(k * 104_729 % 9_000),
        );
        shots.push((rect(x, y, x + 20.0 + f64::from(k % 90), y + 35.0), 1.0));
    }
    let (e, b) = (expose(15.0, &shots), blur(15.0));
    for k in 0..3000 {
        let p = [
            1e6 - 100.0 + f64::from(k) * 10.1,
            2e6 - 80.0 + f64::from(k * 37 % 9200),
        ];
        let sum: f64 = shots
            .iter()
            .map(|(r, d)| {
                let ([x0, y0], [x1, y1]) = (r.min.to_nm(), r.max.to_nm());
                d * b.share(p[0], x0, x1) * b.share(p[1], y0, y1)
            })
            .sum();
        near(e.dose_exact(p), sum, 5e-9);
    }
}

/// Derived.
#[test]
fn one_square_shot_gives_the_derived_doses() {
    let e = expose(20.0, &[(rect(-50.0, -50.0, 50.0, 50.0), 1.0)]);
    for (p, dose) in [
        ([0.0, 0.0], 0.975_316),
        ([50.0, 0.0], 0.493_790),
        ([50.0, 50.0], 0.250_000),
        ([60.0, 0.0], 0.304_706),
        ([0.0, 70.0], 0.156_685),
    ] {
        near(e.dose_exact(p), dose, 5e-7);
        near(e.dose(p), dose, 5e-7);
    }
}

#[test]
fn a_lone_corner_gets_a_quarter() {
    near(corner(17.0).dose([0.0, 0.0]), 0.25, 1e-12);
}
