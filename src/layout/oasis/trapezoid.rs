//! Trapezoids and the 26 compact ones (SEMI P39-0304E2, sections 28 and 29), relative to the lower-left corner of their box.

use crate::geom::Point;

/// A trapezoid in a box of `w` × `h`; `None` if the slants do not fit the box.
///
/// With horizontal parallel sides, `a` is how far the top end of the left side lies right of its bottom end, `b` the same for the
/// right side; with vertical ones, `a` is how far the right end of the bottom side lies above its left end, `b` the same for the top side.
pub(super) fn trapezoid(vertical: bool, w: i64, h: i64, a: i64, b: i64) -> Option<Vec<Point>> {
    let (length, breadth) = if vertical { (h, w) } else { (w, h) };
    // Along the parallel sides: near side from `n0` to `n1`, far side from `f0` to `f1`.
    let (n0, f0) = ((-a).max(0), a.max(0));
    let (n1, f1) = (length - b.max(0), length - (-b).max(0));
    if n0 > n1 || f0 > f1 {
        return None;
    }
    let corners = [(n0, 0), (n1, 0), (f1, breadth), (f0, breadth)];
    Some(
        corners
            .into_iter()
            .map(|(along, across)| {
                if vertical {
                    Point::new(across, along)
                } else {
                    Point::new(along, across)
                }
            })
            .collect(),
    )
}

/// Which dimensions a compact trapezoid is given by.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Given {
    /// Width and height.
    Both,
    /// The width; the height is this multiple of it.
    Width(i64),
    /// The height; the width is this multiple of it.
    Height(i64),
}

/// What is given for a compact trapezoid of a kind; `None` for a kind that does not exist.
pub(super) fn given(kind: u64) -> Option<Given> {
    Some(match kind {
        0..=15 | 24 => Given::Both,
        16..=19 | 25 => Given::Width(1),
        20 | 21 => Given::Height(2),
        22 | 23 => Given::Width(2),
        _ => return None,
    })
}

/// A compact trapezoid: all slants at 45°. `None` if the box cannot hold them.
pub(super) fn compact(kind: u64, w: i64, h: i64) -> Option<Vec<Point>> {
    let least = match kind {
        0..=3 | 6 | 7 => w - h,
        4 | 5 => w - 2 * h,
        8..=11 | 14 | 15 => h - w,
        12 | 13 => h - 2 * w,
        _ => 0,
    };
    if least < 0 {
        return None;
    }
    let corners: &[(i64, i64)] = match kind {
        0 => &[(0, 0), (w, 0), (w - h, h), (0, h)],
        1 => &[(0, 0), (w - h, 0), (w, h), (0, h)],
        2 => &[(0, 0), (w, 0), (w, h), (h, h)],
        3 => &[(h, 0), (w, 0), (w, h), (0, h)],
        4 => &[(0, 0), (w, 0), (w - h, h), (h, h)],
        5 => &[(h, 0), (w - h, 0), (w, h), (0, h)],
        6 => &[(0, 0), (w - h, 0), (w, h), (h, h)],
        7 => &[(h, 0), (w, 0), (w - h, h), (0, h)],
        8 => &[(0, 0), (w, 0), (w, h - w), (0, h)],
        9 => &[(0, 0), (w, 0), (w, h), (0, h - w)],
        10 => &[(0, 0), (w, w), (w, h), (0, h)],
        11 => &[(0, w), (w, 0), (w, h), (0, h)],
        12 => &[(0, 0), (w, w), (w, h - w), (0, h)],
        13 => &[(0, w), (w, 0), (w, h), (0, h - w)],
        14 => &[(0, 0), (w, w), (w, h), (0, h - w)],
        15 => &[(0, w), (w, 0), (w, h - w), (0, h)],
        16 => &[(0, 0), (w, 0), (0, w)],
        17 => &[(0, 0), (w, w), (0, w)],
        18 => &[(0, 0), (w, 0), (w, w)],
        19 => &[(w, 0), (w, w), (0, w)],
        20 => &[(0, 0), (w, 0), (h, h)],
        21 => &[(h, 0), (w, h), (0, h)],
        22 => &[(0, 0), (w, w), (0, h)],
        23 => &[(w, 0), (w, h), (0, w)],
        24 | 25 => &[(0, 0), (w, 0), (w, h), (0, h)],
        _ => return None,
    };
    Some(corners.iter().map(|&(x, y)| Point::new(x, y)).collect())
}

#[cfg(test)]
mod tests {
    use super::*;

    fn area_two(ring: &[Point]) -> i64 {
        let next = ring.iter().cycle().skip(1);
        ring.iter()
            .zip(next)
            .map(|(a, b)| a.x * b.y - b.x * a.y)
            .sum()
    }

    #[test]
    fn every_compact_kind_fills_its_box_counter_clockwise_at_45_degrees() {
        for kind in 0..26 {
            let (w, h) = match given(kind) {
                Some(Given::Both) if (8..=15).contains(&kind) => (10, 30),
                Some(Given::Both) => (30, 10),
                Some(Given::Width(n)) => (10, 10 * n),
                Some(Given::Height(n)) => (10 * n, 10),
                None => panic!("kind {kind} is missing"),
            };
            let ring = compact(kind, w, h).unwrap_or_default();
            let reach = |f: fn(&Point) -> i64| (ring.iter().map(f).min(), ring.iter().map(f).max());
            assert_eq!(reach(|p| p.x), (Some(0), Some(w)), "kind {kind}");
            assert_eq!(reach(|p| p.y), (Some(0), Some(h)), "kind {kind}");
            assert!(area_two(&ring) > 0, "kind {kind}");
            for (a, b) in ring.iter().zip(ring.iter().cycle().skip(1)) {
                let (dx, dy) = ((b.x - a.x).abs(), (b.y - a.y).abs());
                assert!(dx == 0 || dy == 0 || dx == dy, "kind {kind}");
            }
        }
        assert_eq!(given(26), None);
    }

    #[test]
    fn slants_that_cross_are_refused() {
        assert_eq!(compact(4, 19, 10), None);
        assert_eq!(compact(12, 10, 19), None);
        assert_eq!(trapezoid(false, 10, 10, 6, -5), None);
        assert!(trapezoid(false, 10, 10, 5, -5).is_some());
    }
}
