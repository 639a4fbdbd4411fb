//! Coverage, its spread and the dose correction against published and derived values.

use shotwright::expose::{Backscatter, Density, correct, uniform_correction};
use shotwright::units::{Dose, Nm};

use super::{near, rect};

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
