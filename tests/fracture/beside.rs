//! Figures beside what their neighbours really flash.

use shotwright::fracture::{Fracture, Fracturer, Job};
use shotwright::geom::{Figure, Rect};
use shotwright::units::Dose;

use super::kinds::arc;
use super::print::wrong_pixels;
use super::sets::job;
use super::{BOTH, OVERLAP};

const SIGMA: f64 = 12.0;

/// Two bent bars 60 nm wide across a gap.
fn bars(gap: f64) -> [Figure; 2] {
    [2000.0, 2060.0 + gap].map(|radius| Figure::new(arc(30.0, radius, 300.0, 0.0), Vec::new()))
}

fn flashed(fracture: &Fracture) -> Vec<(Rect, Dose)> {
    fracture.shots.rects().collect()
}

/// Shots of the second bar as it may well come out: `by` nm too wide on both sides, within 1 nm, so still within its tolerance of 2 nm.
fn shots_of_wider(gap: f64, by: f64) -> Vec<(Rect, Dose)> {
    let wider = Figure::new(arc(30.0 + by, 2060.0 + gap, 300.0, 0.0), Vec::new());
    flashed(&OVERLAP.fracture(&job(&wider, SIGMA, 1.0)).unwrap())
}

/// Of a bar beside another that was not printed ideally, but by these shots.
fn beside<'a>(own: &'a Figure, other: &'a [Figure], shots: &'a [Vec<(Rect, Dose)>]) -> Job<'a> {
    Job {
        context: other,
        flashed: shots,
        ..job(own, SIGMA, 2.0)
    }
}

#[test]
fn a_fit_undone_by_its_neighbours_shots_is_repaired() {
    let mut undone = 0;
    for gap in [14.0, 18.0, 24.0] {
        let [own, other] = bars(gap);
        let others = std::slice::from_ref(&other);
        let ideal = OVERLAP.fracture(&beside(&own, others, &[])).unwrap();
        let real = [shots_of_wider(gap, 0.9)];
        let job = beside(&own, others, &real);
        let missed = OVERLAP.misses(&job, &ideal.shots);
        if missed.is_empty() {
            continue;
        }
        undone += 1;
        let refit = OVERLAP.refit(&job, &ideal).unwrap();
        assert!(refit.misses.is_empty(), "gap {gap}: {:?}", refit.misses);
        assert!(OVERLAP.misses(&job, &refit.shots).is_empty());
    }
    assert!(undone > 0, "no ideal fit was undone");
}

#[test]
fn one_fit_holds_at_two_kinds_of_places() {
    const GAP: f64 = 18.0;
    let [own, other] = bars(GAP);
    let others = std::slice::from_ref(&other);
    let kinds = [-0.9, 0.9].map(|by| shots_of_wider(GAP, by));
    let found = OVERLAP.fracture(&beside(&own, others, &kinds)).unwrap();
    assert!(found.misses.is_empty(), "{:?}", found.misses);
    for kind in &kinds {
        let one = std::slice::from_ref(kind);
        assert!(
            OVERLAP
                .misses(&beside(&own, others, one), &found.shots)
                .is_empty()
        );
    }
}

#[test]
fn neighbours_fitted_in_turn_print_together_by_the_witness() {
    for gap in [16.0, 20.0] {
        let bars = bars(gap);
        for fracturer in BOTH {
            let mut made: Vec<Fracture> = (0..2)
                .map(|i| {
                    let others = std::slice::from_ref(&bars[1 - i]);
                    fracturer.fracture(&beside(&bars[i], others, &[])).unwrap()
                })
                .collect();
            for round in 0..6 {
                let i = round % 2;
                let real = [flashed(&made[1 - i])];
                let job = beside(&bars[i], std::slice::from_ref(&bars[1 - i]), &real);
                if !fracturer.misses(&job, &made[i].shots).is_empty()
                    && let Some(refit) = fracturer.refit(&job, &made[i])
                {
                    made[i] = refit;
                }
            }
            let wrong = wrong_pixels(
                &[&bars[0], &bars[1]],
                &[&made[0].shots, &made[1].shots],
                SIGMA,
                2.0,
            );
            assert!(
                wrong.is_empty(),
                "gap {gap}, {}: {wrong:?}",
                fracturer.name()
            );
        }
    }
}
