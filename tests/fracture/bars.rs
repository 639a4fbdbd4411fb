//! The reference sets: every figure prints, in at most as many shots as the marks of `tests/data/sets/README.md`.

use shotwright::fracture::Fracturer;

use super::sets::{ASSIST, CURVY, figures, job};
use super::{Faults, OVERLAP, TILE};

pub(super) const PLANTED: &str = include_str!("../data/sets/planted.wkt");

/// Shots of each figure of a set at a blur, within 2 nm; all of them print.
fn counts(text: &str, sigma: f64, fracturer: &dyn Fracturer) -> Vec<usize> {
    let mut faults = Faults::default();
    let counts = figures(text)
        .iter()
        .enumerate()
        .map(|(i, figure)| {
            faults.count(&format!("figure {i}"), fracturer, &job(figure, sigma, 2.0))
        })
        .collect();
    faults.assert_none();
    counts
}

fn assert_at_most(counts: &[usize], mark: usize) {
    let total: usize = counts.iter().sum();
    assert!(total <= mark, "{total} shots, mark {mark}: {counts:?}");
}

// Marks: tests/data/sets/README.md, found by a prototype of this project.

#[test]
fn curvy_tiles() {
    let counts = counts(CURVY, 10.0, &TILE);
    assert_eq!(counts.len(), 18);
    assert_at_most(&counts[..17], 120);
}

#[test]
fn curvy_overlaps() {
    let counts = counts(CURVY, 10.0, &OVERLAP);
    assert_eq!(counts.len(), 18);
    assert_at_most(&counts, 100);
}

#[test]
fn assist_tiles() {
    let counts = counts(ASSIST, 12.0, &TILE);
    assert_eq!(counts.len(), 30);
    assert_at_most(&counts, 303);
}

#[test]
fn assist_overlaps() {
    let counts = counts(ASSIST, 12.0, &OVERLAP);
    assert_eq!(counts.len(), 30);
    assert_at_most(&counts, 244);
}

/// How many shots were planted in each figure: its rows in `planted.csv`.
fn planted_counts() -> Vec<usize> {
    let mut counts = vec![0; 27];
    for row in include_str!("../data/sets/planted.csv").lines().skip(1) {
        let figure: usize = row.split(',').next().unwrap().parse().unwrap();
        counts[figure] += 1;
    }
    counts
}

#[test]
fn planted_shots_are_found_again() {
    let planted = planted_counts();
    assert_eq!(planted.iter().sum::<usize>(), 162);
    let counts = counts(PLANTED, 10.0, &OVERLAP);
    assert_eq!(counts.len(), planted.len());
    assert_at_most(&counts, 162);
    for (i, (found, planted)) in counts.iter().zip(&planted).enumerate() {
        assert!(
            *found <= planted + 1,
            "figure {i}: {found} shots, {planted} planted"
        );
    }
}

#[test]
fn planted_tiles_print() {
    // No mark: tiles cannot follow planted overlaps, but they must print them.
    assert_eq!(counts(PLANTED, 10.0, &TILE).len(), 27);
}
