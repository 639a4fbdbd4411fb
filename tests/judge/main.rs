//! The judge on planted figures, spoiled shots and hand-worked cases.

mod edges;
mod narrowest;
mod pieces;
mod planted;

use shotwright::blur::Blur;
use shotwright::expose::Exposure;
use shotwright::geom::{Figure, Point, Rect, Ring};
use shotwright::judge::{Fidelity, Settings, judge};
use shotwright::units::{Dose, Nm};

type Shots = Vec<(Rect, Dose)>;

fn rect(x0: i64, y0: i64, x1: i64, y1: i64) -> Rect {
    Rect::new(Point::from_nm(x0, y0), Point::from_nm(x1, y1))
}

fn settings(sigma: f64, tolerance: f64) -> Settings {
    Settings::new(Blur::new(Nm(sigma)).unwrap(), Nm(tolerance))
}

fn score(figure: &Figure, shots: &Shots, s: &Settings) -> Fidelity {
    judge(
        figure,
        &[],
        &Exposure::new(s.blur, shots.iter().copied()),
        s,
    )
}

fn flash(rects: &[Rect]) -> Shots {
    rects.iter().map(|r| (*r, Dose(1.0))).collect()
}

/// 27 figures made by blurring 2 to 10 overlapping shots with σ 10 nm and cutting at ½, with those shots.
fn planted() -> Vec<(Figure, Shots)> {
    let pm = |s: &str| Nm(s.parse().unwrap()).to_pm().unwrap();
    let mut all: Vec<(Figure, Shots)> = include_str!("../data/judge/planted.wkt")
        .lines()
        .map(|line| {
            let ring = line.trim_start_matches("POLYGON((").trim_end_matches("))");
            let points = ring.split(',').map(|xy| {
                let (x, y) = xy.trim().split_once(' ').unwrap();
                Point::new(pm(x), pm(y))
            });
            (
                Figure::new(Ring::new(points.collect()).unwrap(), Vec::new()),
                Vec::new(),
            )
        })
        .collect();
    for row in include_str!("../data/judge/planted.csv").lines().skip(1) {
        let v: Vec<&str> = row.split(',').collect();
        let min = Point::new(pm(v[1]), pm(v[2]));
        let r = Rect::new(min, min + Point::new(pm(v[3]), pm(v[4])));
        all[v[0].parse::<usize>().unwrap()].1.push((r, Dose(1.0)));
    }
    assert_eq!(
        (all.len(), all.iter().map(|f| f.1.len()).sum::<usize>()),
        (27, 162)
    );
    all
}
