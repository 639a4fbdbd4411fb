//! What a dose costs, against a yardstick in the same run.

use std::hint::black_box;
use std::time::{Duration, Instant};

use shotwright::geom::Rect;
use shotwright::target::DoseField;

use super::{expose, rect};

const SHOTS: u32 = 100_000;
const SIDE: u32 = 316;
const ROUNDS: u32 = 10;
const PLACES: u32 = 100_000;

/// Abutting tiles of 30 nm × 70 nm, every third row apart.
fn tiles() -> Vec<(Rect, f64)> {
    (0..SHOTS)
        .map(|k| {
            let (x, row) = (f64::from(k % SIDE) * 30.0, k / SIDE);
            let y = f64::from(row) * 70.0 + f64::from(row / 3) * 120.0;
            (rect(x, y, x + 30.0, y + 70.0), 1.0)
        })
        .collect()
}

/// Shortest of several times, so that what else the machine does counts little.
fn least(best: &mut Duration, run: impl FnOnce() -> f64) {
    let start = Instant::now();
    black_box(run());
    *best = (*best).min(start.elapsed());
}

/// 10⁶ contour points of a mask with 10⁵ shots: each costs at most as much as 25 calls of `libm::erf` beside it.
#[test]
fn a_dose_among_many_shots_costs_at_most_25_erf() {
    let exposure = expose(10.0, &tiles());
    let width = f64::from(SIDE) * 30.0;
    let (mut dose, mut yardstick) = (Duration::MAX, Duration::MAX);
    for round in 0..ROUNDS {
        least(&mut dose, || {
            (0..PLACES)
                .map(|k| {
                    let along = f64::from(round * PLACES + k) * 1.3;
                    let row = (along / width).floor() % f64::from(SIDE);
                    let y = 70.0 * row + 120.0 * (row / 3.0).floor() + 68.0;
                    exposure.dose([along % width, y])
                })
                .sum()
        });
        least(&mut yardstick, || {
            (0..25 * PLACES)
                .map(|k| libm::erf(f64::from(k % 8191) * 1e-3 - 4.0))
                .sum()
        });
    }
    assert!(
        dose <= yardstick,
        "{PLACES} doses took {dose:?}, 25 erf for each {yardstick:?}"
    );
}
