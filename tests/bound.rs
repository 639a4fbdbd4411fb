//! The lower bound against what the overlap fracturer finds.

use shotwright::blur::Blur;
use shotwright::fracture::overlap::Overlap;
use shotwright::fracture::{Effort, Fracturer, Job};
use shotwright::geom::{Figure, Point, Rect, Ring};
use shotwright::shot::{AddressUnit, ShotLimits};
use shotwright::units::Nm;

/// Shots found and shots proved necessary; nothing if the figure did not print.
fn found_and_bound(figure: &Figure) -> Option<(usize, usize)> {
    let job = Job {
        figure,
        context: &[],
        flashed: &[],
        blur: Blur::new(Nm(10.0)).unwrap(),
        tolerance: Nm(2.0),
        limits: ShotLimits {
            address: AddressUnit::new(Nm(0.1)).unwrap(),
            least_side: Nm(8.0),
            greatest_side: Nm(1000.0),
            sliver: Nm(8.0),
        },
    };
    let fracture = Overlap {
        bound: true,
        ..Overlap::with(Effort::Quick)
    }
    .fracture(&job)
    .unwrap();
    let bound = fracture.lower_bound.unwrap();
    fracture
        .misses
        .is_empty()
        .then_some((fracture.shots.len(), bound))
}

#[test]
fn the_one_shot_of_a_rectangle_is_proved_necessary() {
    let figure = Figure::from_rect(Rect::new(Point::from_nm(0, 0), Point::from_nm(200, 90)));
    assert_eq!(found_and_bound(&figure), Some((1, 1)));
}

/// Blobs: no shot list found is below the bound, and over all of them the bound says more than the trivial 1 each.
#[test]
fn nothing_is_found_below_the_bound() {
    let (mut checked, mut proved) = (0, 0);
    for (mean, lobes, wave) in [
        (45.0, 2, 0.2),
        (60.0, 3, 0.25),
        (70.0, 4, 0.2),
        (90.0, 2, 0.3),
    ] {
        let points = (0..120).map(|i| {
            let phi = std::f64::consts::TAU * f64::from(i) / 120.0;
            let r = mean * (1.0 + wave * (f64::from(lobes) * phi).cos());
            let pm = |v: f64| Nm(v).to_pm().unwrap();
            Point::new(pm(r * phi.cos()), pm(r * phi.sin()))
        });
        let figure = Figure::new(Ring::new(points.collect()).unwrap(), Vec::new());
        if let Some((found, bound)) = found_and_bound(&figure) {
            assert!(bound <= found, "{found} found, bound {bound}");
            checked += 1;
            proved += bound;
        }
    }
    assert!(checked >= 3, "only {checked} figures printed");
    assert!(proved > checked, "{proved} shots for {checked} figures");
}
