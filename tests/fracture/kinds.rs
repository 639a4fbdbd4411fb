//! Figures of the kinds that the reference sets hold, made from a seed.

#![allow(
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    clippy::cast_precision_loss,
    reason = "numbers of test figures are small"
)]

use std::collections::BTreeMap;
use std::f64::consts::{PI, TAU};

use shotwright::geom::{Figure, Point, Ring};
use shotwright::units::Nm;

use crate::random::Random;

/// A place in nm, to the nearest picometre.
fn point(x: f64, y: f64) -> Point {
    let pm = |v: f64| Nm(v).to_pm().expect("a place within 4 km");
    Point::new(pm(x), pm(y))
}

/// A uniform number from `low` to `high`.
pub(crate) fn between(random: &mut Random, low: f64, high: f64) -> f64 {
    low + (high - low) * (random.next() >> 11) as f64 / (1u64 << 53) as f64
}

/// Points about every 4 nm along a closed curve, on a 1 nm grid.
fn drawn(curve: impl Fn(f64) -> [f64; 2]) -> Ring {
    const FINE: u32 = 20_000;
    let mut points: Vec<Point> = Vec::new();
    let (mut length, mut last) = (0.0, curve(0.0));
    for i in 0..FINE {
        let p = curve(f64::from(i) / f64::from(FINE));
        length += (p[0] - last[0]).hypot(p[1] - last[1]);
        last = p;
        if i == 0 || length >= 4.0 {
            length = 0.0;
            points.push(Point::from_nm(p[0].round() as i64, p[1].round() as i64));
        }
    }
    points.dedup();
    Ring::new(points).expect("a curve of many points")
}

/// An ellipse; a disc where both radii are equal.
pub(crate) fn ellipse(rx: f64, ry: f64, turn: f64) -> Ring {
    drawn(|t| {
        let (x, y) = (rx * (TAU * t).cos(), ry * (TAU * t).sin());
        [
            x * turn.cos() - y * turn.sin(),
            x * turn.sin() + y * turn.cos(),
        ]
    })
}

/// A star-shaped blob, `r(φ) = mean·(1 + Σ a_k cos(kφ + p_k))`, that nowhere bends by less than the radius `bend`.
pub(crate) fn blob(random: &mut Random, mean: f64, wave: f64, bend: f64) -> Ring {
    loop {
        let terms: Vec<[f64; 3]> = (2..=5)
            .map(|k| {
                let k = f64::from(k);
                let amplitude = between(random, -wave, wave) / k;
                [k, amplitude, between(random, 0.0, TAU)]
            })
            .collect();
        let radius = |phi: f64| {
            let sum = |f: &dyn Fn(&[f64; 3]) -> f64| mean * terms.iter().map(f).sum::<f64>();
            let r = mean + sum(&|[k, a, p]| a * (k * phi + p).cos());
            let first = sum(&|[k, a, p]| -a * k * (k * phi + p).sin());
            let second = sum(&|[k, a, p]| -a * k * k * (k * phi + p).cos());
            (r, first, second)
        };
        let prints = (0..720).all(|i| {
            let (r, d, dd) = radius(TAU * f64::from(i) / 720.0);
            let speed = r * r + d * d;
            let curvature = (speed + d * d - r * dd) / speed.powf(1.5);
            r > bend && curvature.abs() < 1.0 / bend
        });
        if prints {
            return drawn(|t| {
                let r = radius(TAU * t).0;
                [r * (TAU * t).cos(), r * (TAU * t).sin()]
            });
        }
    }
}

/// A bar bent to an arc with round ends: half its width, the radius of its middle line, and its length.
pub(crate) fn arc(half: f64, radius: f64, length: f64, turn: f64) -> Ring {
    let sweep = length / radius;
    let cap = PI * half;
    let (outer, inner) = (sweep * (radius + half), sweep * (radius - half));
    let total = outer + inner + 2.0 * cap;
    drawn(|t| {
        let polar = |r: f64, phi: f64| [r * (turn + phi).cos(), r * (turn + phi).sin()];
        let end = |phi: f64, angle: f64| {
            let c = polar(radius, phi);
            [
                c[0] + half * (turn + angle).cos(),
                c[1] + half * (turn + angle).sin(),
            ]
        };
        let s = t * total;
        if s < outer {
            polar(radius + half, s / (radius + half))
        } else if s < outer + cap {
            end(sweep, sweep + (s - outer) / half)
        } else if s < outer + cap + inner {
            polar(radius - half, sweep - (s - outer - cap) / (radius - half))
        } else {
            end(0.0, PI + (s - outer - cap - inner) / half)
        }
    })
}

/// A figure of one of the curvy kinds, in multiples of `sigma`: disc, ellipse, blob, arc, ring.
pub(crate) fn curvy(random: &mut Random, sigma: f64) -> Figure {
    let turn = between(random, 0.0, TAU);
    let mut between = |low: f64, high: f64| sigma * between(random, low, high);
    let solid = |ring: Ring| Figure::new(ring, Vec::new());
    match between(0.0, 6.0) / sigma {
        k if k < 1.0 => {
            let r = between(2.5, 12.0);
            solid(ellipse(r, r, 0.0))
        }
        k if k < 2.0 => {
            // The sharper end of an ellipse bends by ry²/rx.
            let ry = between(4.0, 8.0);
            let rx = ry * (1.0 + between(0.0, 1.0) / sigma);
            solid(ellipse(rx, ry, turn))
        }
        k if k < 4.0 => {
            let mean = between(6.0, 13.0);
            solid(blob(random, mean, 0.35, 2.0 * sigma))
        }
        k if k < 5.0 => {
            let half = between(2.0, 4.0);
            let radius = half + between(4.0, 10.0);
            let length = radius * between(1.0, 4.0) / sigma;
            solid(arc(half, radius, length, turn))
        }
        _ => {
            let hole = between(3.0, 7.0);
            let r = hole + between(3.0, 6.0);
            Figure::new(ellipse(r, r, 0.0), vec![ellipse(hole, hole, 0.0)])
        }
    }
}

/// A figure that `k` shots print at `sigma`: their contour at ½. Sides and overlaps are those of the set `planted`: each shot shares
/// a fifth to three quarters of the lesser one with some shot before it (10th and 90th percentile there: 0.36 and 0.75).
pub(crate) fn planted(random: &mut Random, k: usize, sigma: f64) -> Figure {
    let shared = |a: &[f64; 4], b: &[f64; 4]| {
        let length = |axis: usize| (a[axis + 2].min(b[axis + 2]) - a[axis].max(b[axis])).max(0.0);
        let area = |r: &[f64; 4]| (r[2] - r[0]) * (r[3] - r[1]);
        length(0) * length(1) / area(a).min(area(b))
    };
    loop {
        let mut shots: Vec<[f64; 4]> = Vec::new();
        while shots.len() < k {
            let short = between(random, 40.0, 120.0).round();
            let long = between(random, 70.0, 250.0).round();
            let turned = random.below(2) == 0;
            let (w, h) = if turned { (short, long) } else { (long, short) };
            let spread = 70.0 * (k as f64).sqrt();
            let x = between(random, -spread, spread).round();
            let y = between(random, -spread, spread).round();
            let shot = [x, y, x + w, y + h];
            let most = shots.iter().map(|s| shared(s, &shot)).fold(0.0, f64::max);
            if shots.is_empty() || (0.2..0.75).contains(&most) {
                shots.push(shot);
            }
        }
        if let Some(figure) = printed(&shots, sigma) {
            return figure;
        }
    }
}

/// The contour at ½ of a dose as a figure, by marching squares of 4 nm, crossings to ¼ nm; `None` unless it is one piece.
fn printed(shots: &[[f64; 4]], sigma: f64) -> Option<Figure> {
    const STEP: f64 = 4.0;
    let root = sigma * std::f64::consts::SQRT_2;
    let share = |at: f64, from: f64, to: f64| {
        0.5 * (libm::erf((at - from) / root) - libm::erf((at - to) / root))
    };
    let dose = |x: f64, y: f64| -> f64 {
        let one = |s: &[f64; 4]| share(x, s[0], s[2]) * share(y, s[1], s[3]);
        shots.iter().map(one).sum()
    };
    let low = |axis: usize| shots.iter().map(|s| s[axis]).fold(f64::INFINITY, f64::min) - 30.0;
    let high = |axis: usize| shots.iter().map(|s| s[axis]).fold(-f64::INFINITY, f64::max) + 30.0;
    let (left, bottom) = (low(0), low(1));
    let (columns, rows) = (
        ((high(2) - left) / STEP).ceil() as usize,
        ((high(3) - bottom) / STEP).ceil() as usize,
    );
    let place = |i: usize, j: usize| [left + STEP * i as f64, bottom + STEP * j as f64];
    let at = |i: usize, j: usize| dose(place(i, j)[0], place(i, j)[1]);
    // Where the contour crosses the side from (i, j) to the right (axis 0) or up (axis 1), by bisection.
    let crossing = |(i, j, axis): (usize, usize, usize)| {
        let (mut p, mut q) = (place(i, j), place(i + 1 - axis, j + axis));
        if dose(p[0], p[1]) < 0.5 {
            std::mem::swap(&mut p, &mut q);
        }
        for _ in 0..20 {
            let m = [0.5 * (p[0] + q[0]), 0.5 * (p[1] + q[1])];
            *(if dose(m[0], m[1]) < 0.5 {
                &mut q
            } else {
                &mut p
            }) = m;
        }
        point((4.0 * p[0]).round() / 4.0, (4.0 * p[1]).round() / 4.0)
    };
    // From each crossed side to the next one, the print to the left.
    let mut next: BTreeMap<(usize, usize, usize), (usize, usize, usize)> = BTreeMap::new();
    for j in 0..rows {
        for i in 0..columns {
            let corner = [at(i, j), at(i + 1, j), at(i + 1, j + 1), at(i, j + 1)];
            let side = [(i, j, 0), (i + 1, j, 1), (i, j + 1, 0), (i, j, 1)];
            let prints = corner.map(|d| d >= 0.5);
            // Counter-clockwise round the cell: the contour enters where print gives way to clear, and leaves at the next change
            // back; in a saddle the print is connected if its middle prints.
            let enters: Vec<usize> = (0..4)
                .filter(|&s| prints[s] && !prints[(s + 1) % 4])
                .collect();
            let leaves: Vec<usize> = (0..4)
                .filter(|&s| !prints[s] && prints[(s + 1) % 4])
                .collect();
            let joined = leaves.len() == 2 && corner.iter().sum::<f64>() >= 2.0;
            for &from in &enters {
                let to = match leaves[..] {
                    [one] => one,
                    [a, b] => {
                        let first = (1..4).map(|k| (from + k) % 4).find(|s| [a, b].contains(s));
                        let second = if first == Some(a) { b } else { a };
                        if joined { first? } else { second }
                    }
                    _ => return None,
                };
                next.insert(side[from], side[to]);
            }
        }
    }
    let (mut outer, mut holes) = (None, Vec::new());
    while let Some((&start, _)) = next.first_key_value() {
        let (mut points, mut side) = (Vec::new(), start);
        while let Some(to) = next.remove(&side) {
            points.push(crossing(side));
            side = to;
        }
        points.dedup();
        let ring = Ring::new(points)?;
        match ring.area_two() > 0 {
            true if outer.is_some() => return None,
            true => outer = Some(ring),
            false => holes.push(ring),
        }
    }
    Some(Figure::new(outer?, holes))
}
