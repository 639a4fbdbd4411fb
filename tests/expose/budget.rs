//! Shot noise and the error budget against derived values and seeded random trials.

use shotwright::expose::shot_noise;
use shotwright::target::{Printed, ShotErrors};
use shotwright::units::{BaseDose, ELECTRONS_PER_NM2_PER_UC_CM2, Nm};

use super::{FAR, expose, near, rect, wide_edge};

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
