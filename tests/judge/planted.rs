//! Figures whose shots are known: they print, spoiled ones do not, turned ones score alike, and so does the raster.

use shotwright::expose::Raster;
use shotwright::geom::{Orientation, Point, Transform};
use shotwright::judge::judge;
use shotwright::units::{Dose, Nm};

use super::{planted, score, settings};

#[test]
fn planted_figures_print_with_their_planted_shots() {
    let s = settings(10.0, 2.0);
    for (n, (figure, shots)) in planted().iter().enumerate() {
        let f = score(figure, shots, &s);
        let sum = f.summary();
        assert!(
            f.prints_within_tolerance(),
            "figure {n}: {:?} {:?}",
            f.pieces,
            f.worst_violations
        );
        assert_eq!(sum.unmeasured_share, Some(0.0), "figure {n}");
        // The outline is the contour rounded to 0.25 nm every 5 nm.
        assert!(
            sum.edge_error_nm.p95.unwrap() < 0.5 && sum.edge_error_nm.mean.unwrap().abs() < 0.15,
            "figure {n}: {sum:?}"
        );
        let area = sum.printed_area_nm2 / sum.drawn_area_nm2;
        assert!((area - 1.0).abs() < 0.01, "figure {n}: area {area}");
    }
}

/// Dropping the shot that adds most area, or moving it by a quarter of its width, must not pass.
#[test]
fn spoiled_planted_shots_do_not_print() {
    let s = settings(10.0, 2.0);
    let mut failed = 0;
    for (figure, shots) in planted() {
        let big = (0..shots.len())
            .max_by_key(|&i| shots[i].0.width() * shots[i].0.height())
            .unwrap();
        let mut dropped = shots.clone();
        dropped.remove(big);
        let mut moved = shots.clone();
        moved[big].0 = moved[big]
            .0
            .translated(Point::new(moved[big].0.width() / 4, 0));
        for spoiled in [dropped, moved] {
            failed += usize::from(!score(&figure, &spoiled, &s).prints_within_tolerance());
        }
    }
    assert_eq!(failed, 54);
}

/// Mirroring and turning figure and shots alike changes no score.
#[test]
fn a_mirrored_figure_mirrors_the_score() {
    let s = settings(10.0, 2.0);
    for (figure, mut shots) in planted().into_iter().step_by(5) {
        shots[0].1 = Dose(1.07);
        let straight = score(&figure, &shots, &s).summary();
        for orientation in Orientation::all() {
            let t = Transform {
                orientation,
                shift: Point::new(123_000, -77_000),
            };
            let turned = shots.iter().map(|(r, d)| (t.apply_rect(*r), *d)).collect();
            let f = score(&figure.transformed(t), &turned, &s).summary();
            let close = |a: Option<f64>, b: Option<f64>, within: f64| {
                assert!(
                    (a.unwrap() - b.unwrap()).abs() <= within,
                    "{orientation:?}: {a:?} against {b:?}"
                );
            };
            close(f.edge_error_nm.mean, straight.edge_error_nm.mean, 1e-5);
            close(f.edge_error_nm.p95, straight.edge_error_nm.p95, 0.0101);
            close(f.edge_error_nm.worst, straight.edge_error_nm.worst, 1e-5);
            close(
                f.margin_nm_per_pct.worst,
                straight.margin_nm_per_pct.worst,
                1e-5,
            );
            close(
                f.out_of_tolerance_share,
                straight.out_of_tolerance_share,
                1e-3,
            );
            assert_eq!(f.prints_within_tolerance, straight.prints_within_tolerance);
        }
    }
}

/// The two witnesses of the dose give the same score.
#[test]
fn the_raster_gives_the_same_score() {
    let s = settings(10.0, 2.0);
    let (figure, shots) = planted().swap_remove(9);
    let closed = score(&figure, &shots, &s).summary();
    let raster = judge(
        &figure,
        &[],
        &Raster::new(s.blur, Nm(0.5), shots).unwrap(),
        &s,
    )
    .summary();
    assert!((closed.edge_error_nm.mean.unwrap() - raster.edge_error_nm.mean.unwrap()).abs() < 0.01);
    assert!(
        (closed.edge_error_nm.worst.unwrap() - raster.edge_error_nm.worst.unwrap()).abs() < 0.02
    );
    assert_eq!(
        closed.prints_within_tolerance,
        raster.prints_within_tolerance
    );
}
