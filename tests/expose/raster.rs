//! The second witness of the dose against the closed form.

use shotwright::expose::Raster;
use shotwright::target::{DoseField, Printed};
use shotwright::units::{Dose, Nm};

use super::{blur, expose, near, rect};

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
