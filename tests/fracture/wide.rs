//! Curved figures wider than the greatest shot: great shots inside, curves only at the rim.

use shotwright::fracture::Fracturer;
use shotwright::geom::{Figure, Point};
use shotwright::units::Nm;

use super::annulus::annulus;
use super::sets::job;
use super::{BOTH, Faults, OVERLAP, TILE, examine};

const SIGMA: f64 = 14.0;

/// A step of the outline costs one shot: at the least step that a 45° edge can have at σ 10 and a tolerance of 2 nm, 27 nm (by the
/// closed-form dose of an endless staircase), and as often as the outline advances along the axis that it runs along. A cut from rim to
/// rim would cost `chord/greatest side`, some four shots a step here.
#[test]
fn a_step_of_a_wide_disc_costs_one_shot() {
    let radius = 1900.0;
    let figure = annulus(radius, 0.0);
    let mut faults = Faults::default();
    let advance = 8.0 * radius * std::f64::consts::FRAC_1_SQRT_2;
    // The inside takes at least its area over that of the greatest shot; four times as many for what does not fit in.
    let inside = std::f64::consts::PI * (radius / 1000.0).powi(2);
    let most = advance / 27.0 + 4.0 * inside;
    for fracturer in BOTH {
        let count = faults.count("disc", fracturer, &job(&figure, SIGMA, 2.0));
        assert!(
            (count as f64) < most,
            "{}: {count} shots, expected under {most}",
            fracturer.name()
        );
    }
    faults.assert_none();
}

#[test]
fn a_wide_ring_prints_from_shots_that_keep_the_limits() {
    let mut faults = Faults::default();
    let figure = annulus(2200.0, 800.0);
    for greatest in [400.0, 1000.0] {
        for fracturer in BOTH {
            let mut job = job(&figure, SIGMA, 2.0);
            job.limits.greatest_side = Nm(greatest);
            job.limits.sliver = Nm(20.0);
            let (fracture, found) = examine(fracturer, &job);
            let title = |f| format!("{greatest} nm, {}: {f}", fracturer.name());
            faults.0.extend(found.into_iter().map(title));
            // The area inside must come from great shots: half the greatest side on average over it.
            let great = fracture.shots.rects().filter(|(r, _)| {
                let ([x0, y0], [x1, y1]) = (r.min.to_nm(), r.max.to_nm());
                (x1 - x0).min(y1 - y0) > 0.4 * greatest
            });
            assert!(great.count() > 6, "no great shots at {greatest} nm");
        }
    }
    faults.assert_none();
}

/// The deep inside is only passed over in a check when the shots that fill it are all there.
#[test]
fn shots_of_a_wide_disc_are_judged_like_those_of_any_figure() {
    let figure = annulus(1500.0, 0.0);
    let job = job(&figure, SIGMA, 2.0);
    for fracturer in BOTH {
        let fracture = fracturer.fracture(&job).unwrap();
        assert_eq!(fracturer.misses(&job, &fracture.shots), []);
        // One shot fewer is seen, whichever it is: a great one inside, and a narrow one at the rim.
        let all = fracture.shots.shots();
        let great = (0..all.len()).max_by_key(|&i| all[i].short_side()).unwrap();
        let narrow = (0..all.len()).min_by_key(|&i| all[i].short_side()).unwrap();
        for gone in [great, narrow] {
            let mut shots = all.to_vec();
            shots.remove(gone);
            let shots = shotwright::shot::ShotList::new(job.limits.address, shots);
            assert_ne!(fracturer.misses(&job, &shots), []);
        }
        let refit = fracturer.refit(&job, &fracture).unwrap();
        assert_eq!(refit.misses, []);
        assert!(refit.shots.len() <= fracture.shots.len());
    }
}

#[test]
fn a_wide_figure_is_the_same_wherever_it_stands() {
    let figure = annulus(1300.0, 0.0);
    let moved: Figure = figure.translated(Point::from_nm(123_456, -98_765));
    for fracturer in [&TILE as &dyn Fracturer, &OVERLAP] {
        let (here, there) = (
            fracturer.fracture(&job(&figure, SIGMA, 2.0)).unwrap(),
            fracturer.fracture(&job(&moved, SIGMA, 2.0)).unwrap(),
        );
        let by = |shots: &shotwright::shot::ShotList, dx: i64, dy: i64| {
            let corner = |r: &shotwright::geom::Rect| {
                [r.min.x - dx, r.min.y - dy, r.max.x - dx, r.max.y - dy]
            };
            shots.rects().map(|(r, _)| corner(&r)).collect::<Vec<_>>()
        };
        assert_eq!(
            by(&here.shots, 0, 0),
            by(&there.shots, 123_456_000, -98_765_000)
        );
    }
}
