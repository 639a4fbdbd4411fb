//! Figures of the same kinds as the reference sets, made with other seeds.

use super::kinds::{curvy, planted};
use super::meander::meander;
use super::random::Random;
use super::sets::job;
use super::{BOTH, Faults, OVERLAP, TILE};

/// `n` curvy figures at a blur: all print, and overlap needs fewer shots in all than tile.
fn curvy_figures_print(seeds: std::ops::Range<u64>, sigma: f64) {
    let mut faults = Faults::default();
    let mut totals = [0, 0];
    for seed in seeds {
        let figure = curvy(&mut Random(seed), sigma);
        let job = job(&figure, sigma, 2.0);
        for (total, fracturer) in totals.iter_mut().zip(BOTH) {
            *total += faults.count(&format!("seed {seed}"), fracturer, &job);
        }
    }
    faults.assert_none();
    assert!(totals[1] < totals[0], "tile and overlap: {totals:?}");
}

#[test]
fn curvy_figures_print_at_10_nm() {
    curvy_figures_print(100..130, 10.0);
}

#[test]
fn curvy_figures_print_at_16_nm() {
    curvy_figures_print(200..230, 16.0);
}

#[test]
fn planted_figures_take_no_more_shots_than_were_planted() {
    let mut faults = Faults::default();
    let (mut found, mut most) = (Vec::new(), 0);
    for seed in 0..27 {
        let k = 2 + usize::try_from(seed % 9).unwrap();
        let figure = planted(&mut Random(300 + seed), k, 10.0);
        let job = job(&figure, 10.0, 2.0);
        faults.count(&format!("seed {}", 300 + seed), &TILE, &job);
        let count = faults.count(&format!("seed {}", 300 + seed), &OVERLAP, &job);
        found.push((k, count));
        most += k;
    }
    faults.assert_none();
    let total: usize = found.iter().map(|f| f.1).sum();
    assert!(
        total <= most,
        "{total} shots, {most} planted; (planted, found): {found:?}"
    );
}

#[test]
fn a_long_serpentine_prints() {
    let mut faults = Faults::default();
    for outline in [1e4, 3e4] {
        let figure = meander(outline);
        assert!((figure.outline_nm() / outline - 1.0).abs() < 0.05);
        let counts =
            BOTH.map(|f| faults.count(&format!("{outline} nm"), f, &job(&figure, 10.0, 2.0)));
        // A band one shot wide: overlapping gains next to nothing there, but never costs.
        assert!(counts[1] <= counts[0], "tile and overlap: {counts:?}");
    }
    faults.assert_none();
}
