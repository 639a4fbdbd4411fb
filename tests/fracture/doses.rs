//! Limits and choices of dose: a peak that no place may pass, and levels that shots may take.

use shotwright::fracture::{DoseLevels, overlap::Overlap};
use shotwright::fracture::{Effort, Fracturer, Job, MissReason};
use shotwright::geom::{Figure, Point, Rect};
use shotwright::shot::ShotLimits;
use shotwright::units::{Dose, Nm};

use super::bars::PLANTED;
use super::print::peak;
use super::sets::{ASSIST, CURVY, figures, job, limits};
use super::{Faults, OVERLAP, examine};

/// What the fracturer may pass the peak by: it looks on a lattice.
const SPARE: f64 = 1e-3;

fn under(peak: f64) -> Overlap {
    Overlap {
        peak_dose: Some(Dose(peak)),
        ..OVERLAP
    }
}

fn levels(doses: &[f64]) -> Overlap {
    let doses: Vec<Dose> = doses.iter().map(|&d| Dose(d)).collect();
    Overlap {
        dose_levels: DoseLevels::new(&doses).unwrap(),
        ..OVERLAP
    }
}

/// Shots of a set under a peak: every figure prints, and no pixel gets more.
fn shots_under(limit: f64, text: &str, sigma: f64) -> usize {
    let mut faults = Faults::default();
    let mut total = 0;
    for (i, figure) in figures(text).iter().enumerate() {
        let (fracture, found) = examine(&under(limit), &job(figure, sigma, 2.0));
        faults
            .0
            .extend(found.into_iter().map(|f| format!("figure {i}: {f}")));
        let dose = peak(&fracture.shots, sigma);
        if dose > limit + SPARE {
            faults.0.push(format!("figure {i}: dose {dose}"));
        }
        total += fracture.shots.len();
    }
    faults.assert_none();
    total
}

// Tile references of the sets: 120 (of 17 figures) and 303; a peak of 2.5 must leave some gain over them.

#[test]
fn a_peak_holds_on_curvy_figures() {
    let total = shots_under(2.5, CURVY, 10.0);
    assert!(total <= 118, "{total}");
}

#[test]
fn a_peak_holds_on_assist_figures() {
    let total = shots_under(2.5, ASSIST, 12.0);
    assert!(total <= 290, "{total}");
}

#[test]
fn a_peak_holds_on_planted_figures() {
    shots_under(2.5, PLANTED, 10.0);
}

#[test]
fn a_peak_that_is_not_reached_changes_nothing() {
    let mut reached = 0;
    for figure in figures(CURVY).iter().take(6) {
        let job = job(figure, 10.0, 2.0);
        let free = OVERLAP.fracture(&job).unwrap();
        let high = under(100.0).fracture(&job).unwrap();
        assert!(high.shots.len() <= free.shots.len());
        reached += usize::from(peak(&free.shots, 10.0) > 2.5);
    }
    assert!(reached > 0, "a peak of 2.5 asks nothing of these figures");
}

#[test]
fn a_peak_that_nothing_keeps_is_said_with_its_places() {
    // The middle of a wide square gets dose 1 of whatever prints it: 0.9 cannot be kept.
    let square = Figure::from_rect(Rect::new(Point::default(), Point::from_nm(200, 200)));
    let fracture = under(0.9).fracture(&job(&square, 10.0, 2.0)).unwrap();
    let over: Vec<_> = fracture
        .misses
        .iter()
        .filter(|m| m.dose.0 > 0.9 && !m.must_print)
        .collect();
    assert!(!over.is_empty());
    assert!(over.iter().all(|m| m.reason == MissReason::Limits));
}

#[test]
fn sides_in_the_way_are_named_as_the_reason() {
    // A bar 30 nm wide prints at σ = 10 nm, but not with sides of 60 nm or more.
    let bar = Figure::from_rect(Rect::new(Point::default(), Point::from_nm(30, 200)));
    let job = Job {
        limits: ShotLimits {
            least_side: Nm(60.0),
            ..limits()
        },
        ..job(&bar, 10.0, 2.0)
    };
    let fracture = OVERLAP.fracture(&job).unwrap();
    assert!(!fracture.misses.is_empty());
    let limits = |m: &&_| {
        matches!(
            m,
            shotwright::fracture::Miss {
                reason: MissReason::Limits,
                ..
            }
        )
    };
    assert!(
        fracture.misses.iter().any(|m| limits(&m)),
        "{:?}",
        fracture.misses
    );
}

#[test]
fn dose_levels_save_shots() {
    // 0.92 of the references 100 and 244.
    for (text, sigma, mark) in [(CURVY, 10.0, 92), (ASSIST, 12.0, 224)] {
        let fracturer = levels(&[0.8, 1.0, 1.2]);
        let (mut faults, mut total, mut others) = (Faults::default(), 0, 0);
        for (i, figure) in figures(text).iter().enumerate() {
            let (fracture, found) = examine(&fracturer, &job(figure, sigma, 2.0));
            faults
                .0
                .extend(found.into_iter().map(|f| format!("figure {i}: {f}")));
            let shots = fracture.shots.shots();
            assert!(shots.iter().all(|s| [0.8, 1.0, 1.2].contains(&s.dose.0)));
            others += shots.iter().filter(|s| s.dose.0 != 1.0).count();
            total += shots.len();
        }
        faults.assert_none();
        assert!(total <= mark, "{total} shots, mark {mark}");
        assert!(others > 0, "every shot has dose 1");
    }
}

#[test]
fn one_level_that_is_not_one_prints_too() {
    let mut faults = Faults::default();
    for (i, figure) in figures(CURVY).iter().take(6).enumerate() {
        let fracturer = levels(&[1.1]);
        faults.count(&format!("figure {i}"), &fracturer, &job(figure, 10.0, 2.0));
        let fracture = fracturer.fracture(&job(figure, 10.0, 2.0)).unwrap();
        assert!(fracture.shots.shots().iter().all(|s| s.dose.0 == 1.1));
    }
    faults.assert_none();
}

#[test]
fn one_level_of_one_is_no_levels() {
    for figure in figures(CURVY).iter().take(6) {
        let job = job(figure, 10.0, 2.0);
        let plain = Overlap::with(Effort::Normal).fracture(&job).unwrap();
        assert_eq!(levels(&[1.0]).fracture(&job).unwrap(), plain);
    }
}
