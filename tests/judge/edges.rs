//! Edge error, margin and error budget along the outline.

use shotwright::expose::Exposure;
use shotwright::geom::{Figure, Point, Rect, Ring};
use shotwright::judge::{Background, Fidelity, edge_samples};
use shotwright::target::{ShotErrors, Target};
use shotwright::units::Nm;

use super::{flash, rect, score, settings};

#[test]
fn a_large_square_is_exact_along_its_edges_and_loses_its_corners() {
    let r = rect(0, 0, 400, 400);
    let f = score(&Figure::from_rect(r), &flash(&[r]), &settings(10.0, 2.0));
    let s = f.summary();
    assert!(f.prints_within_tolerance());
    // 2 σ from a corner the contour is 0.029181 σ back (derived), and nearer from there on.
    assert!(
        (0.2..0.2918).contains(&s.edge_error_nm.worst.unwrap()),
        "{s:?}"
    );
    assert!(s.edge_error_nm.mean.unwrap() <= 0.0 && s.edge_error_nm.mean.unwrap() > -0.01);
    // A corner is 0.770679 σ from the contour (derived); the nearest sample is 1.25 nm from the corner, so at most that nearer.
    assert!(
        (7.707 - 1.25..7.707).contains(&s.corner_error_nm.worst.unwrap()),
        "{s:?}"
    );
    assert_eq!(s.out_of_tolerance_share, Some(0.0));
    assert_eq!(s.unmeasured_share, Some(0.0));
    // Each right angle loses 0.864767 σ² (derived).
    assert!(
        (s.printed_area_nm2 - (160_000.0 - 4.0 * 86.4767)).abs() < 20.0,
        "{s:?}"
    );
    // 1 % of dose moves a wide edge of σ 10 by 1/7.979 nm (derived).
    assert!((s.margin_nm_per_pct.median.unwrap() - 0.1253).abs() < 1e-3);
    assert_eq!(f.corners.length + f.edges.length, 1_600_000);
}

#[test]
fn backscatter_widens_the_margin() {
    let r = rect(0, 0, 400, 400);
    let mut s = settings(10.0, 2.0);
    s.background = Background {
        ratio: 0.5,
        density: 0.5,
    };
    let m = score(&Figure::from_rect(r), &flash(&[r]), &s)
        .summary()
        .margin_nm_per_pct
        .median
        .unwrap();
    assert!((m - 0.1253 * 1.5).abs() < 2e-3, "{m}");
}

#[test]
fn edge_errors_have_the_sign_of_the_size() {
    let figure = Figure::from_rect(rect(0, 0, 400, 400));
    for (by, prints) in [(1, true), (-1, true), (3, false), (-3, false)] {
        let f = score(
            &figure,
            &flash(&[rect(-by, -by, 400 + by, 400 + by)]),
            &settings(10.0, 2.0),
        );
        #[allow(clippy::cast_precision_loss, reason = "small")]
        let by = by as f64;
        assert!((f.summary().edge_error_nm.mean.unwrap() - by).abs() < 0.05);
        assert_eq!(f.prints_within_tolerance(), prints, "{by}");
        assert_eq!(f.summary().out_of_tolerance_share.unwrap() > 0.5, !prints);
    }
}

/// Two hundred vertices more on the same outline change nothing.
#[test]
fn statistics_go_by_length_not_by_vertex() {
    let fine = (100..=300).map(|x| Point::from_nm(x, 0));
    let rest = [(400, 0), (400, 400), (0, 400), (0, 0)].map(|(x, y)| Point::from_nm(x, y));
    let crowded = Figure::new(Ring::new(fine.chain(rest).collect()).unwrap(), Vec::new());
    let plain = Figure::from_rect(rect(0, 0, 400, 400));
    // Too low by 1.5 nm on the crowded side only.
    let shots = flash(&[Rect::new(Point::new(0, -1500), Point::from_nm(400, 400))]);
    let s = settings(10.0, 2.0);
    let (a, b) = (score(&crowded, &shots, &s), score(&plain, &shots, &s));
    assert_eq!(
        a.edges.length + a.corners.length,
        b.edges.length + b.corners.length
    );
    let mean = |f: &Fidelity| f.edges.error.mean().unwrap();
    assert!((mean(&b) - 0.375).abs() < 0.01, "{}", mean(&b));
    assert!(
        (mean(&a) - mean(&b)).abs() < 1e-4,
        "{} {}",
        mean(&a),
        mean(&b)
    );
}

#[test]
fn many_figures_are_weighted_by_outline_and_places() {
    let s = settings(10.0, 2.0);
    let good = score(
        &Figure::from_rect(rect(0, 0, 400, 400)),
        &flash(&[rect(0, 0, 400, 400)]),
        &s,
    );
    let bad = score(
        &Figure::from_rect(rect(0, 0, 200, 200)),
        &flash(&[rect(-4, -4, 204, 204)]),
        &s,
    );
    let mut mask = Fidelity::default();
    assert_eq!(mask.summary().out_of_tolerance_share, None);
    mask.merge(&good, 3);
    mask.merge(&bad, 2);
    let mut other = Fidelity::default();
    other.merge(&bad, 2);
    other.merge(&good, 3);
    assert_eq!(mask, other);
    assert_eq!(mask.figures, 5);
    assert_eq!(
        mask.edges.length,
        3 * good.edges.length + 2 * bad.edges.length
    );
    let (all, length) = (mask.summary(), 3 * 1_600_000 + 2 * 800_000);
    assert_eq!(
        good.edges.out_of_tolerance + good.corners.out_of_tolerance,
        0
    );
    let out = 2 * (bad.edges.out_of_tolerance + bad.corners.out_of_tolerance);
    #[allow(clippy::cast_precision_loss, reason = "small")]
    let share = out as f64 / f64::from(length);
    assert!(out > 0 && (all.out_of_tolerance_share.unwrap() - share).abs() < 1e-12);
    assert!(!all.prints_within_tolerance);
    assert_eq!(all.edge_error_nm.worst, bad.summary().edge_error_nm.worst);
}

/// Few large shots hold an edge better than many small ones.
#[test]
fn the_error_budget_says_what_larger_shots_buy() {
    let mut s = settings(10.0, 2.0);
    s.errors = Some(ShotErrors {
        edge: Nm(0.5),
        dose: 0.01,
        base_dose: None,
    });
    let figure = Figure::from_rect(rect(0, 0, 400, 400));
    let whole = score(&figure, &flash(&[rect(0, 0, 400, 400)]), &s).summary();
    let strips: Vec<Rect> = (0..40).map(|k| rect(0, 10 * k, 400, 10 * k + 10)).collect();
    let many = score(&figure, &flash(&strips), &s).summary();
    // By hand: one edge moves with its shot's edge, and 1 % of dose moves it by 0.1253 nm.
    assert!((whole.edge_sd_nm.median.unwrap() - 0.5_f64.hypot(0.1253)).abs() < 2e-3);
    assert!(many.edge_sd_nm.worst > whole.edge_sd_nm.worst);
}

#[test]
fn samples_tell_where_they_are() {
    let s = settings(10.0, 2.0);
    let figure = Figure::from_rect(rect(0, 0, 400, 400));
    let target = Target::new(&figure, s.blur, s.tolerance);
    let e = Exposure::new(s.blur, flash(&[rect(0, 0, 400, 400)]));
    let samples: Vec<_> = edge_samples(&target, &e, &s).collect();
    assert_eq!(samples.len(), 4 * 160);
    assert_eq!(samples.iter().filter(|x| x.corner).count(), 4 * 16);
    assert!(
        samples
            .iter()
            .all(|x| x.error.is_some() && x.length_pm == 2500)
    );
}

/// Derived: a wide edge moves by −0.13971, −0.06601, +0.05972, +0.11419 σ at −10, −5, +5, +10 % of dose.
#[test]
fn contours_through_dose_move_as_derived() {
    let r = rect(0, 0, 400, 400);
    let s = settings(10.0, 2.0);
    let scores = score(&Figure::from_rect(r), &flash(&[r]), &s).summary();
    for (through, (change, shift)) in scores.through_dose.iter().zip([
        (-10.0, -1.3971),
        (-5.0, -0.6601),
        (5.0, 0.5972),
        (10.0, 1.1419),
    ]) {
        assert!((through.change_pct - change).abs() < 1e-9);
        // Two σ from a corner the contour is up to 0.03 σ back.
        let mean = through.edge_error_nm.mean.unwrap();
        assert!((mean - shift).abs() < 0.03, "{change} %: {mean}");
        assert_eq!(through.unmeasured_share, Some(0.0));
    }
    // Over backscatter all dose changes, so the contour moves further: to first order by (1 + 2ηU).
    let mut over = s;
    over.background = Background {
        ratio: 0.6,
        density: 0.5,
    };
    let flat = score(&Figure::from_rect(r), &flash(&[r]), &over).summary();
    let of = |s: &shotwright::judge::Summary| s.through_dose[2].edge_error_nm.mean.unwrap();
    assert!(
        (of(&flat) / of(&scores) - 1.6).abs() < 0.05,
        "{} {}",
        of(&flat),
        of(&scores)
    );
}

#[test]
fn margins_grow_where_the_background_is_flatter() {
    let s = settings(10.0, 2.0);
    let one = score(
        &Figure::from_rect(rect(0, 0, 400, 400)),
        &flash(&[rect(0, 0, 400, 400)]),
        &s,
    );
    let (mut plain, mut flat) = (Fidelity::default(), Fidelity::default());
    plain.merge(&one, 3);
    flat.merge_flattened(&one, 3, 1.5);
    let (plain, flat) = (
        plain.summary().margin_nm_per_pct,
        flat.summary().margin_nm_per_pct,
    );
    for (a, b) in [
        (plain.median, flat.median),
        (plain.p95, flat.p95),
        (plain.worst, flat.worst),
    ] {
        assert!((b.unwrap() / a.unwrap() - 1.5).abs() < 2e-3, "{a:?} {b:?}");
    }
}
