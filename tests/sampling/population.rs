//! Real figures with what they really cost: measured once and kept in `tests/data/sampling/population.csv`.

#![allow(
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    reason = "numbers of test figures are small"
)]

use std::fmt::Write as _;

use rayon::prelude::*;

use shotwright::blur::{Blur, REACH};
use shotwright::fracture::overlap::Overlap;
use shotwright::fracture::tile::Tile;
use shotwright::fracture::{Fracturer, Job};
use shotwright::geom::{Figure, Point, Rect};
use shotwright::layout;
use shotwright::mask::{self, MaskOptions};
use shotwright::quote::sample::Features;
use shotwright::shot::{AddressUnit, ShotLimits};
use shotwright::units::Nm;

use crate::kinds::{between, curvy, planted};
use crate::meander::meander;
use crate::random::Random;
use crate::regions::{self, Cells};

/// One figure: what is known before, shots and summed doses after.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Member {
    pub(crate) kind: &'static str,
    pub(crate) features: Features,
    /// Tile shots, overlap shots.
    pub(crate) shots: [f64; 2],
    /// Σ dose of the same.
    pub(crate) doses: [f64; 2],
}

pub(crate) const KINDS: [&str; 6] = ["curvy", "planted", "band", "bar", "region", "clip"];

pub(crate) fn population() -> Vec<Member> {
    let text = include_str!("../data/sampling/population.csv");
    let mut rows = csv::Reader::from_reader(text.as_bytes());
    let member = |row: csv::StringRecord| {
        let number = |i: usize| row[i].parse::<f64>().unwrap();
        Member {
            kind: KINDS.into_iter().find(|kind| *kind == &row[0]).unwrap(),
            features: Features {
                places: 1.0,
                outline_nm: number(1),
                rise_nm: number(2),
                turning: number(3),
                area_nm2: number(4),
                rectilinear: &row[5] == "true",
            },
            shots: [number(6), number(7)],
            doses: [number(8), number(9)],
        }
    };
    rows.records().map(|row| member(row.unwrap())).collect()
}

/// Figures of every kind from one seed, and all of the sample clips, each with its context.
fn drawn(sigma: f64) -> Vec<(&'static str, Figure, Vec<Figure>)> {
    let mut random = Random(2026);
    let mut all = Vec::new();
    let mut add = |kind, figure| all.push((kind, figure, Vec::new()));
    for _ in 0..900 {
        add("curvy", curvy(&mut random, sigma));
    }
    for i in 0..150 {
        add("planted", planted(&mut random, 2 + i % 7, sigma));
    }
    for _ in 0..80 {
        let outline = 800.0 * between(&mut random, 0.0, 2.3).exp();
        add("band", meander(outline));
    }
    for _ in 0..150 {
        let mut side = |low: f64, high: f64| {
            let nm = between(&mut random, low.ln(), high.ln()).exp();
            Nm(nm).to_pm().unwrap() / 1000 * 1000
        };
        let corner = Point::new(side(40.0, 400.0), side(40.0, 4000.0));
        add(
            "bar",
            Figure::from_rect(Rect::new(Point::default(), corner)),
        );
    }
    let mut random = regions::Random(7);
    for _ in 0..150 {
        let (columns, rows) = (2 + random.below(5) as usize, 2 + random.below(5) as usize);
        let cells = loop {
            if let Some(cells) = Cells::random(&mut random, columns, rows, 70, 120) {
                break cells;
            }
        };
        // Grown from 1 to 120 nm to 40 to 160 nm a cell, so that each prints.
        let apart = |lines: &[i64]| -> Vec<i64> {
            let wider = |(i, at): (usize, &i64)| at + 40_000 * i64::try_from(i).unwrap();
            lines.iter().enumerate().map(wider).collect()
        };
        let cells = Cells {
            xs: apart(&cells.xs),
            ys: apart(&cells.ys),
            ..cells
        };
        add("region", cells.figure(true));
    }
    for clip in ["iso", "dense", "lineends", "mixed"] {
        let path = format!("{}/sample-masks/{clip}.oas", env!("CARGO_MANIFEST_DIR"));
        let options = MaskOptions::new(Nm(sigma) * REACH, AddressUnit::new(Nm(0.25)).unwrap());
        let mask = mask::build(&layout::open(path).unwrap(), &options).unwrap();
        for distinct in mask.figures {
            all.push(("clip", distinct.figure, distinct.context));
        }
    }
    all
}

/// The blur of the clips' profile, and its limits.
const SIGMA: f64 = 14.0;

#[test]
#[ignore = "measures the population anew: about a quarter of an hour on two cores; prints the file"]
fn measure_the_population() {
    let blur = Blur::new(Nm(SIGMA)).unwrap();
    let limits = ShotLimits {
        address: AddressUnit::new(Nm(0.25)).unwrap(),
        least_side: Nm(8.0),
        greatest_side: Nm(500.0),
        sliver: Nm(25.0),
    };
    let rows: Vec<String> = drawn(SIGMA)
        .into_par_iter()
        .map(|(kind, figure, context)| {
            let job = Job {
                flashed: &[],
                figure: &figure,
                context: &context,
                blur,
                tolerance: Nm(2.0),
                limits,
            };
            let cost = |fracturer: &dyn Fracturer| {
                let shots = fracturer.fracture(&job).unwrap().shots;
                let dose: f64 = shots.shots().iter().map(|shot| shot.dose.0).sum();
                (shots.len(), dose)
            };
            let (tile, overlap) = (cost(&Tile::default()), cost(&Overlap::default()));
            let f = Features::of(&figure, 1, blur);
            format!(
                "{kind},{},{},{},{},{},{},{},{},{}",
                f.outline_nm,
                f.rise_nm,
                f.turning,
                f.area_nm2,
                f.rectilinear,
                tile.0,
                overlap.0,
                tile.1,
                overlap.1
            )
        })
        .collect();
    let mut text = "kind,outline_nm,rise_nm,turning,area_nm2,rectilinear,tile,overlap,tile_dose,overlap_dose\n".to_owned();
    for row in rows {
        writeln!(text, "{row}").unwrap();
    }
    std::fs::write(std::env::temp_dir().join("population.csv"), text).unwrap();
}
