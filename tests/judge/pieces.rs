//! Pieces and holes that are lost, split, joined or added.

use shotwright::expose::Exposure;
use shotwright::geom::{Figure, Point, Rect, Ring};
use shotwright::judge::{Pieces, judge};

use super::{flash, rect, score, settings};

#[test]
fn nothing_flashed_is_lost_and_unmeasured_not_zero() {
    let f = score(
        &Figure::from_rect(rect(0, 0, 100, 100)),
        &Vec::new(),
        &settings(10.0, 2.0),
    );
    assert!(!f.prints_within_tolerance());
    assert_eq!(
        f.pieces,
        Pieces {
            lost: 1,
            ..Pieces::default()
        }
    );
    let json = serde_json::to_value(&f).unwrap();
    for path in [
        "/edge_error_nm/mean",
        "/edge_error_nm/p95",
        "/edge_error_nm/worst",
        "/margin_nm_per_pct/median",
        "/margin_nm_per_pct/worst",
    ] {
        assert!(json.pointer(path).unwrap().is_null(), "{path}");
    }
    assert_eq!(json["out_of_tolerance_share"], 1.0);
    assert_eq!(json["unmeasured_share"], 1.0);
    assert_eq!(json["prints_within_tolerance"], false);
}

/// A neighbour whose edge prints 1 nm too large, within the tolerance, at every distance: also where only that edge is in sight.
#[test]
fn the_edge_of_a_neighbour_is_no_piece_of_its_own() {
    let s = settings(8.0, 2.0);
    let figure = Figure::from_rect(rect(0, 0, 200, 200));
    for gap in 30..120 {
        let neighbour = Figure::from_rect(rect(200 + gap, -500, 900, 700));
        let shots = flash(&[rect(0, 0, 200, 200), rect(199 + gap, -500, 900, 700)]);
        let dose = Exposure::new(s.blur, shots);
        let found = judge(&figure, &[neighbour], &dose, &s);
        assert_eq!(found.pieces, Pieces::default(), "{gap} nm apart");
    }
}

/// Two bars joined by a 40 nm neck, and variations that lose, join or add a piece.
#[test]
fn pieces_and_holes_are_counted() {
    let points = [
        (0, 0),
        (150, 0),
        (150, 180),
        (190, 180),
        (190, 0),
        (340, 0),
        (340, 400),
        (190, 400),
        (190, 220),
        (150, 220),
        (150, 400),
        (0, 400),
    ];
    let ring = Ring::new(points.iter().map(|&(x, y)| Point::from_nm(x, y)).collect()).unwrap();
    let figure = Figure::new(ring, Vec::new());
    let (left, right, neck) = (
        rect(0, 0, 150, 400),
        rect(190, 0, 340, 400),
        rect(150, 180, 190, 220),
    );
    let s = settings(8.0, 2.0);
    let none = Pieces::default();
    assert_eq!(
        score(&figure, &flash(&[left, right, neck]), &s).pieces,
        none
    );
    assert_eq!(
        score(&figure, &flash(&[left, right]), &s).pieces,
        Pieces { split: 1, ..none }
    );
    let speck = rect(-100, 100, -60, 140);
    assert_eq!(
        score(&figure, &flash(&[left, right, neck, speck]), &s).pieces,
        Pieces { extra: 1, ..none }
    );
    let far = rect(-9000, 100, -8960, 140);
    assert_eq!(
        score(&figure, &flash(&[left, right, neck, far]), &s).pieces,
        Pieces { beyond: 1, ..none }
    );
    let lid = rect(150, 0, 190, 40);
    assert_eq!(
        score(&figure, &flash(&[left, right, neck, lid]), &s).pieces,
        Pieces { holes: 1, ..none }
    );

    // With a neighbour: what prints there is its own, until it joins.
    let neighbour = Figure::from_rect(rect(376, 0, 500, 400));
    let both = |shots: &[Rect]| {
        judge(
            &figure,
            std::slice::from_ref(&neighbour),
            &Exposure::new(s.blur, flash(shots)),
            &s,
        )
    };
    let right_bar = rect(376, 0, 500, 400);
    let good = both(&[left, right, neck, right_bar]);
    assert!(
        good.prints_within_tolerance(),
        "{:?} {:?}",
        good.pieces,
        good.worst_violations
    );
    let joined = both(&[left, right, neck, right_bar, rect(340, 180, 376, 220)]);
    assert_eq!(joined.pieces, Pieces { bridged: 1, ..none });
    assert!(joined.violations > 0);
}

#[test]
fn a_filled_hole_is_told() {
    let square = |a, b| Figure::from_rect(rect(a, a, b, b));
    let ring = Figure::new(
        square(0, 300).outer().clone(),
        vec![square(100, 200).outer().clone()],
    );
    let s = settings(10.0, 2.0);
    let frame = [
        rect(0, 0, 300, 100),
        rect(0, 200, 300, 300),
        rect(0, 100, 100, 200),
        rect(200, 100, 300, 200),
    ];
    assert!(score(&ring, &flash(&frame), &s).prints_within_tolerance());
    assert_eq!(
        score(&ring, &flash(&[rect(0, 0, 300, 300)]), &s).pieces,
        Pieces {
            holes: 1,
            ..Pieces::default()
        }
    );
}
