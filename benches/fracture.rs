//! What does a fracture cost, how does that grow with the figure, and how do counts fall with tolerance and blur?
//!
//! `assist/*` and `curvy/*` fracture a whole reference set (30 and 18 figures) on one core with each fracturer and effort, and print its shots;
//! `serpentine/*/N` a curved band of N µm outline, as throughput per µm; `disc/*/N` a disc of N µm radius, likewise. Before timing, two tables are printed: shots of the
//! set `curvy` against tolerance and against σ, with the number of figures that do not print.

use std::hint::black_box;
use std::time::Duration;

use criterion::{BenchmarkId, Criterion, Throughput, criterion_group, criterion_main};
use rayon::prelude::*;
use shotwright::fracture::overlap::Overlap;
use shotwright::fracture::tile::Tile;
use shotwright::fracture::{Effort, Fracturer};
use shotwright::geom::Figure;

#[path = "../tests/common/annulus.rs"]
mod annulus;
#[path = "../tests/common/meander.rs"]
mod meander;
#[path = "../tests/common/sets.rs"]
mod sets;
use annulus::annulus;
use meander::meander;
use sets::{ASSIST, CURVY, figures, job};

const EFFORTS: [Effort; 3] = [Effort::Quick, Effort::Normal, Effort::Thorough];

fn fracturers(effort: Effort) -> [Box<dyn Fracturer>; 2] {
    let tile = Tile {
        effort,
        ..Tile::default()
    };
    let overlap = Overlap::with(effort);
    [Box::new(tile), Box::new(overlap)]
}

/// Shots of a figure and whether it prints.
fn count(fracturer: &dyn Fracturer, figure: &Figure, sigma: f64, tolerance: f64) -> (usize, bool) {
    let fracture = fracturer
        .fracture(&job(figure, sigma, tolerance))
        .expect("a figure with sound rings");
    (fracture.shots.len(), fracture.misses.is_empty())
}

/// Shots of a set, and how many of its figures do not print.
fn total(fracturer: &dyn Fracturer, figures: &[Figure], sigma: f64, tolerance: f64) -> String {
    let counts: Vec<_> = figures
        .par_iter()
        .map(|f| count(fracturer, f, sigma, tolerance))
        .collect();
    let shots: usize = counts.iter().map(|c| c.0).sum();
    let missed = counts.iter().filter(|c| !c.1).count();
    format!("{shots} ({missed} miss)")
}

fn print_tables(_: &mut Criterion) {
    let curvy = figures(CURVY);
    let row = |sigma: f64, tolerance: f64| {
        let [tile, overlap] =
            fracturers(Effort::Normal).map(|f| total(f.as_ref(), &curvy, sigma, tolerance));
        eprintln!("{sigma:>8} {tolerance:>13} {tile:>16} {overlap:>16}");
    };
    eprintln!("curvy, normal effort\n σ (nm) tolerance (nm)   tile             overlap");
    for tolerance in [1.0, 1.5, 2.0, 3.0] {
        row(10.0, tolerance);
    }
    for sigma in [8.0, 12.0, 16.0, 20.0] {
        row(sigma, 2.0);
    }
}

fn one_set(c: &mut Criterion, name: &str, text: &str, sigma: f64) {
    let figures = figures(text);
    let mut group = c.benchmark_group(name);
    group
        .sample_size(10)
        .throughput(Throughput::Elements(figures.len() as u64));
    for effort in EFFORTS {
        for fracturer in fracturers(effort) {
            let effort = format!("{effort:?}").to_lowercase();
            let shots = total(fracturer.as_ref(), &figures, sigma, 2.0);
            eprintln!("{name}/{}/{effort}: {shots}", fracturer.name());
            group.bench_function(BenchmarkId::new(fracturer.name(), effort), |b| {
                b.iter(|| {
                    for figure in &figures {
                        black_box(count(fracturer.as_ref(), black_box(figure), sigma, 2.0));
                    }
                });
            });
        }
    }
    group.finish();
}

fn effort_on_sets(c: &mut Criterion) {
    one_set(c, "assist", ASSIST, 12.0);
    one_set(c, "curvy", CURVY, 10.0);
}

fn cost_against_length(c: &mut Criterion) {
    let mut group = c.benchmark_group("serpentine");
    group
        .sample_size(10)
        .warm_up_time(Duration::from_millis(100));
    for micrometres in [10_u32, 100, 1000] {
        let figure = meander(1e3 * f64::from(micrometres));
        group.throughput(Throughput::Elements(u64::from(micrometres)));
        for fracturer in fracturers(Effort::Normal) {
            group.bench_function(BenchmarkId::new(fracturer.name(), micrometres), |b| {
                b.iter(|| count(fracturer.as_ref(), black_box(&figure), 10.0, 2.0));
            });
        }
    }
    group.finish();
}

/// Discs wider than the greatest shot: the cost goes with the outline, not with the area.
fn cost_against_width(c: &mut Criterion) {
    let mut group = c.benchmark_group("disc");
    group
        .sample_size(10)
        .warm_up_time(Duration::from_millis(100));
    for radius in [1_u32, 2, 4, 8] {
        let figure = annulus(1e3 * f64::from(radius), 0.0);
        group.throughput(Throughput::Elements(u64::from(radius)));
        for fracturer in fracturers(Effort::Normal) {
            let (shots, _) = count(fracturer.as_ref(), &figure, 14.0, 2.0);
            eprintln!("disc/{}/{radius}: {shots}", fracturer.name());
            group.bench_function(BenchmarkId::new(fracturer.name(), radius), |b| {
                b.iter(|| count(fracturer.as_ref(), black_box(&figure), 14.0, 2.0));
            });
        }
    }
    group.finish();
}

criterion_group!(
    benches,
    print_tables,
    effort_on_sets,
    cost_against_length,
    cost_against_width
);
criterion_main!(benches);
