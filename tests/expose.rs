//! Exposure against values from outside: scipy 1.17, tables, closed forms and hand-worked cases.
//!
//! Values said to be "derived" were worked out from the definition with scipy 1.17, apart from this code.

use shotwright::blur::{Blur, NARROWEST_LINE, NARROWEST_SQUARE};
use shotwright::expose::{
    Backscatter, Density, Exposure, Raster, correct, level_at, level_lines, polish, shot_noise,
    uniform_correction,
};
use shotwright::geom::{Point, Rect};
use shotwright::target::{DoseField, Printed, ShotErrors};
use shotwright::units::{BaseDose, Dose, ELECTRONS_PER_NM2_PER_UC_CM2, Nm};

/// A shot and its dose.
type Flash = (Rect, f64);
/// A place and the dose there.
type Known = ([f64; 2], f64);

const DIAGONAL: [f64; 2] = [std::f64::consts::FRAC_1_SQRT_2; 2];
const FAR: f64 = 50_000.0;

fn blur(sigma: f64) -> Blur {
    Blur::new(Nm(sigma)).unwrap()
}

fn rect(x0: f64, y0: f64, x1: f64, y1: f64) -> Rect {
    let p = |x: f64, y: f64| Point::new(Nm(x).to_pm().unwrap(), Nm(y).to_pm().unwrap());
    Rect::new(p(x0, y0), p(x1, y1))
}

fn expose(sigma: f64, shots: &[(Rect, f64)]) -> Exposure {
    Exposure::new(blur(sigma), shots.iter().map(|(r, d)| (*r, Dose(*d))))
}

fn wide_edge(sigma: f64, dose: f64) -> Exposure {
    expose(sigma, &[(rect(-FAR, -FAR, 0.0, FAR), dose)])
}

fn corner(sigma: f64) -> Exposure {
    expose(sigma, &[(rect(-FAR, -FAR, 0.0, 0.0), 1.0)])
}

/// A vertical line of `width` σ from x = 0 leftwards.
fn line(sigma: f64, width: f64) -> Exposure {
    expose(sigma, &[(rect(-width * sigma, -FAR, 0.0, FAR), 1.0)])
}

fn near(found: f64, expected: f64, within: f64) {
    assert!(
        (found - expected).abs() <= within,
        "found {found}, expected {expected} ± {within}"
    );
}

/// Sixty overlapping shots and 400 places; see `make_dose.py` beside the data.
fn published() -> (Vec<Flash>, Vec<Known>) {
    let (mut shots, mut places) = (Vec::new(), Vec::new());
    let text = include_str!("data/expose/dose.csv");
    for row in text
        .lines()
        .skip(2)
        .map(|l| l.split(',').collect::<Vec<_>>())
    {
        let v = |i: usize| row[i].parse::<f64>().unwrap();
        if row[0] == "shot" {
            shots.push((rect(v(1), v(2), v(1) + v(3), v(2) + v(4)), v(5)));
        } else {
            places.push(([v(1), v(2)], v(5)));
        }
    }
    assert_eq!((shots.len(), places.len()), (60, 400));
    (shots, places)
}

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

/// Source: `scipy.optimize.brentq` on products of `scipy.special.ndtr`, scipy 1.17 (`make_contour.py` beside the data).
#[test]
fn contours_are_within_0_01_nm_of_scipy() {
    let e = expose(10.0, &published().0);
    let mut seen = 0;
    for line in include_str!("data/expose/contour.csv").lines().skip(2) {
        let v: Vec<f64> = line.split(',').map(|v| v.parse().unwrap()).collect();
        let found = e.crossing([v[0], v[1]], [v[2].cos(), v[2].sin()], 60.0);
        near(found.unwrap(), v[3], 0.001);
        seen += 1;
    }
    assert_eq!(seen, 300);
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
fn a_lone_corner_gets_a_quarter() {
    near(corner(17.0).dose([0.0, 0.0]), 0.25, 1e-12);
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

/// Independent raster, bound 6e-5 at σ 20 nm and 1 nm pixels (scipy.ndimage.gaussian_filter against the closed form, derived).
#[test]
fn the_raster_witness_agrees_with_the_closed_form() {
    let shots = [
        (rect(-50.0, -50.0, 50.0, 50.0), 1.0),
        (rect(30.0, -20.0, 170.5, 10.3), 0.8),
        (rect(-90.0, 60.0, -20.0, 160.0), 1.2),
    ];
    let e = expose(20.0, &shots);
    let raster = Raster::new(
        blur(20.0),
        Nm(1.0),
        shots.iter().map(|(r, d)| (*r, Dose(*d))),
    )
    .unwrap();
    let mut worst = 0.0_f64;
    for i in -30..60 {
        for j in -30..60 {
            let p = [f64::from(i) * 3.7, f64::from(j) * 3.3];
            worst = worst.max((raster.dose(p) - e.dose_exact(p)).abs());
        }
    }
    // The bound is for one shot of dose 1; up to two of these reach a place with dose 2 in all.
    assert!(worst > 1e-9 && worst < 1.2e-4, "off by {worst:e}");
    let one = |d: &dyn Fn([f64; 2]) -> f64| {
        (-120..=120)
            .map(|k| d([f64::from(k) + 0.5, f64::from(k / 2) + 0.5]))
            .collect::<Vec<f64>>()
    };
    let single = Raster::new(blur(20.0), Nm(1.0), [(shots[0].0, Dose(1.0))]).unwrap();
    let exact = expose(20.0, &shots[..1]);
    for (a, b) in one(&|p| single.dose(p))
        .into_iter()
        .zip(one(&|p| exact.dose_exact(p)))
    {
        near(a, b, 6e-5);
    }
    let (a, b) = (
        raster.crossing([50.0, -30.0], [1.0, 0.0], 80.0),
        e.crossing([50.0, -30.0], [1.0, 0.0], 80.0),
    );
    near(a.unwrap(), b.unwrap(), 0.01);
    assert!(Raster::new(blur(20.0), Nm(11.0), []).is_err());
    assert!(Raster::new(blur(20.0), Nm(f64::NAN), []).is_err());
}

/// The bound of the raster (scipy.ndimage.gaussian_filter against the closed form, derived) for sides anywhere between pixels of any size.
#[test]
fn the_raster_keeps_sides_that_lie_between_pixels() {
    // Pixels begin at the lower-left shot, so that the other one can lie anywhere on them.
    let anchor = (rect(-300.0, -300.0, -290.0, -290.0), 1.0);
    for pixel in [0.5, 1.0, 2.0, 5.0, 10.0] {
        let bound = Raster::bound_for_each_dose(blur(20.0), Nm(pixel));
        for part in 0..8 {
            let off = pixel * f64::from(part) / 8.0;
            let shots = [
                anchor,
                (rect(off - 50.0, -40.0 - off, 50.0, 40.0 + 0.5 * off), 1.0),
            ];
            let doses = shots.map(|(r, d)| (r, Dose(d)));
            let raster = Raster::new(blur(20.0), Nm(pixel), doses).unwrap();
            let exact = expose(20.0, &shots);
            for k in 0..60 * 60 {
                let p = [
                    f64::from(k % 60) * 3.7 - 110.0,
                    f64::from(k / 60) * 3.3 - 100.0,
                ];
                let (found, expected) = (raster.dose(p), exact.dose_exact(p));
                assert!(
                    (found - expected).abs() <= bound,
                    "pixel {pixel}, side off by {off}, {p:?}: {found}, expected {expected} ± {bound:e}"
                );
            }
        }
    }
}

/// Source: Chang, J. Vac. Sci. Technol. 12 (1975) 1271; algebra derived.
#[test]
fn uniform_correction_follows_chang() {
    for (eta, doses) in [
        (0.5, [1.5, 1.2, 1.0, 0.857_143, 0.75]),
        (0.6, [1.6, 1.230_769, 1.0, 0.842_105, 0.727_273]),
        (0.75, [1.75, 1.272_727, 1.0, 0.823_529, 0.7]),
    ] {
        for (density, dose) in [0.0, 0.25, 0.5, 0.75, 1.0].into_iter().zip(doses) {
            near(uniform_correction(eta, density).unwrap().0, dose, 5e-7);
            let mut map =
                Density::new(rect(0.0, 0.0, 50_000.0, 50_000.0), Nm(2500.0), density).unwrap();
            map.add(rect(0.0, 0.0, 50_000.0, 50_000.0), Dose(density));
            let c = correct(
                &map,
                &[Backscatter {
                    ratio: eta,
                    radius: Nm(10_000.0),
                }],
            )
            .unwrap();
            assert!(c.dose.cells().iter().all(|d| (d - dose).abs() < 1e-6));
        }
    }
    assert!(uniform_correction(f64::NAN, 0.5).is_err() && uniform_correction(0.5, 1.1).is_err());
}

/// Source: erf(L/2β)², β = 10 µm (1/e), derived.
#[test]
fn density_at_the_centre_of_a_pad_is_as_derived() {
    for (side, density) in [
        (5e3, 0.076_356),
        (10e3, 0.270_920),
        (20e3, 0.710_145),
        (40e3, 0.990_666),
    ] {
        let pad = rect(0.0, 0.0, side, side);
        let mut map = Density::new(pad, Nm(side / 17.0), 0.0).unwrap();
        map.add(pad, Dose(1.0));
        near(
            map.spread(Nm(10_000.0)).at([side / 2.0, side / 2.0]),
            density,
            1e-6,
        );
    }
}

#[test]
fn coverage_is_area_exact() {
    let mut map = Density::new(rect(-1000.0, -1000.0, 9000.0, 4000.0), Nm(700.0), 0.0).unwrap();
    let (mut area, mut shots) = (0.0, 0);
    for k in 0..200 {
        let (x, y) = (
            f64::from(k * 397 % 8000) - 900.0,
            f64::from(k * 211 % 4000) - 950.0,
        );
        let (w, h) = (10.0 + f64::from(k % 7) * 300.0, 15.5);
        let dose = 0.5 + f64::from(k % 3);
        map.add(rect(x, y, (x + w).min(9000.0), y + h), Dose(dose));
        area += dose * ((x + w).min(9000.0) - x) * h;
        shots += 1;
    }
    assert_eq!(shots, 200);
    near(map.cells().iter().sum::<f64>() * 700.0 * 700.0, area, 1e-3);
}

/// Half dense, half empty, two terms: the fixed point is checked by a direct sum over all cells, not by the code's own convolution.
#[test]
fn correction_reaches_its_fixed_point() {
    let (mesh, side) = (2000.0, 60_000.0);
    let mut map = Density::new(rect(0.0, 0.0, side, side), Nm(mesh), 0.0).unwrap();
    map.add(rect(0.0, 0.0, side / 2.0, side), Dose(1.0));
    let terms = [
        Backscatter {
            ratio: 0.75,
            radius: Nm(10_000.0),
        },
        Backscatter {
            ratio: 0.1,
            radius: Nm(4_000.0),
        },
    ];
    let c = correct(&map, &terms).unwrap();
    assert!(
        c.residual <= 1e-9 && c.rounds > 1,
        "{} after {}",
        c.residual,
        c.rounds
    );
    let [columns, rows] = map.size();
    for (i, j) in [(0, 0), (7, 15), (14, 15), (15, 15), (29, 3)] {
        let p = map.middle(i, j);
        let mut level = 0.5 * c.dose.at(p);
        for t in &terms {
            let b = blur_unbounded(t.radius.0 / 2.0_f64.sqrt());
            for (k, (cover, dose)) in map.cells().iter().zip(c.dose.cells()).enumerate() {
                let q = map.middle(k % columns, k / columns);
                let share = |axis: usize| {
                    b(p[axis] - q[axis] + mesh / 2.0) - b(p[axis] - q[axis] - mesh / 2.0)
                };
                level += t.ratio * cover * dose * share(0) * share(1);
            }
        }
        near(level / (0.5 * 1.85), 1.0, 2e-8);
    }
    assert_eq!(rows, 30);
    // Before: the middle of the dense half sees 1 + η, its far corner a quarter of the backscatter.
    near(
        c.uncorrected.at([side / 4.0, side / 2.0]),
        (1.0 + 2.0 * 0.85) / 1.85,
        0.05,
    );
    assert!(c.uncorrected.at([side - 1000.0, side / 2.0]) < 0.56);
    assert!(
        correct(
            &map,
            &[Backscatter {
                ratio: -0.1,
                radius: Nm(1.0)
            }]
        )
        .is_err()
    );
}

/// Φ(x/σ) for a σ beyond what a blur may have.
fn blur_unbounded(sigma: f64) -> impl Fn(f64) -> f64 {
    move |x| shotwright::blur::cdf(x / sigma)
}

/// Sources: e = 1.602176634e-19 C (exact SI); worked textbook problem: 1 µC/cm² on 50 × 50 nm is 156 electrons, 3σ = 24 %;
/// edge sd derived (Monte Carlo within 3 %).
#[test]
fn shot_noise_is_as_derived() {
    near(ELECTRONS_PER_NM2_PER_UC_CM2, 0.062_415_1, 5e-8);
    let electrons = BaseDose(1.0).electrons_per_nm2() * 2500.0;
    near(electrons, 156.0, 0.5);
    near(3.0 / electrons.sqrt(), 0.24, 0.005);
    for (dose, sd) in [(10.0, 0.633), (30.0, 0.365), (75.0, 0.231)] {
        near(shot_noise(BaseDose(dose)).0, sd, 5e-4);
        let errors = ShotErrors {
            base_dose: Some(BaseDose(dose)),
            ..ShotErrors::default()
        };
        let e = wide_edge(12.0, 1.0).edge_sd([0.0, 0.0], &errors).unwrap();
        near(e.noise.0, sd, 5e-4);
        near(e.total().0, e.noise.0, 1e-12);
    }
}

/// A seeded generator (splitmix64) with normal deviates (Box and Muller).
struct Random(u64);

impl Random {
    fn uniform(&mut self) -> f64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        #[allow(clippy::cast_precision_loss, reason = "53 bits")]
        let x = ((z ^ (z >> 31)) >> 11) as f64 / (1_u64 << 53) as f64;
        x
    }

    fn normal(&mut self) -> f64 {
        let radius = (-2.0 * (1.0 - self.uniform()).ln()).sqrt();
        radius * (2.0 * std::f64::consts::PI * self.uniform()).cos()
    }
}

fn deviation(samples: &[f64]) -> f64 {
    #[allow(clippy::cast_precision_loss, reason = "few")]
    let n = samples.len() as f64;
    let mean = samples.iter().sum::<f64>() / n;
    (samples.iter().map(|s| (s - mean).powi(2)).sum::<f64>() / (n - 1.0)).sqrt()
}

#[test]
fn the_error_budget_agrees_with_a_random_trial() {
    const TRIALS: usize = 4000;
    let shots = [
        (rect(-40.0, -25.0, 0.0, 8.0), 1.0),
        (rect(-40.0, 8.0, 3.0, 40.0), 1.0),
        (rect(-90.0, -30.0, -40.0, 40.0), 1.0),
        (rect(-30.0, -60.0, 1.0, -22.0), 0.9),
    ];
    let e = expose(10.0, &shots);
    let p = [e.crossing([0.0, 5.0], [1.0, 0.0], 40.0).unwrap(), 5.0];
    let (_, g) = e.dose_and_gradient(p);
    let slope = g[0].hypot(g[1]);
    let outward = [-g[0] / slope, -g[1] / slope];
    let mut random = Random(7);
    for (edge, dose) in [(0.4, 0.0), (0.0, 0.02), (0.3, 0.015)] {
        let moved: Vec<f64> = (0..TRIALS)
            .map(|_| {
                let erring = shots.map(|(r, d)| {
                    let ([x0, y0], [x1, y1]) = (r.min.to_nm(), r.max.to_nm());
                    let mut side = |x: f64| x + edge * random.normal();
                    let r = rect(side(x0), side(y0), side(x1), side(y1));
                    (r, d * (1.0 + dose * random.normal()))
                });
                expose(10.0, &erring).crossing(p, outward, 40.0).unwrap()
            })
            .collect();
        let errors = ShotErrors {
            edge: Nm(edge),
            dose,
            base_dose: None,
        };
        let sd = e.edge_sd(p, &errors).unwrap().total().0;
        // Four sampling errors of a standard deviation: 1/√(2·trials) each, here 1.1 %.
        #[allow(clippy::cast_precision_loss, reason = "few")]
        let within = 4.0 / (2.0 * TRIALS as f64).sqrt();
        near(deviation(&moved) / sd, 1.0, within);
    }
}

#[test]
fn shot_noise_agrees_with_a_random_trial() {
    const TRIALS: usize = 1500;
    let (sigma, q) = (10.0, BaseDose(10.0));
    // A line 30 nm wide; electrons land anywhere within 6 σ of the place looked at.
    let (width, reach) = (30.0, 60.0);
    let e = expose(sigma, &[(rect(-width, -FAR, 0.0, FAR), 1.0)]);
    let p = [e.crossing([0.0, 0.0], [1.0, 0.0], 40.0).unwrap(), 0.0];
    let slope = e.dose_and_gradient(p).1[0].abs();
    let n = q.electrons_per_nm2();
    let mean = n * width * 2.0 * reach;
    let mut random = Random(11);
    let shift: Vec<f64> = (0..TRIALS)
        .map(|_| {
            #[allow(
                clippy::cast_possible_truncation,
                clippy::cast_sign_loss,
                reason = "thousands"
            )]
            let electrons = (mean + mean.sqrt() * random.normal()).round() as usize;
            let dose: f64 = (0..electrons)
                .map(|_| {
                    let (x, y) = (
                        -width * random.uniform() - p[0],
                        reach * (2.0 * random.uniform() - 1.0),
                    );
                    (-0.5 * (x * x + y * y) / (sigma * sigma)).exp()
                })
                .sum();
            dose / (2.0 * std::f64::consts::PI * sigma * sigma * n) / slope
        })
        .collect();
    let errors = ShotErrors {
        base_dose: Some(q),
        ..ShotErrors::default()
    };
    let sd = e.edge_sd(p, &errors).unwrap().noise.0;
    #[allow(clippy::cast_precision_loss, reason = "few")]
    let within = 4.0 / (2.0 * TRIALS as f64).sqrt();
    near(deviation(&shift) / sd, 1.0, within);
}
