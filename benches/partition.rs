//! How does the exact partition's cost grow with the figure, against the union of its tiles by a general boolean?
//!
//! `one_random_region/N` partitions one connected random region of about N vertices, full of holes and chords;
//! `slivers/N` also seeks few slivers; `unite_tiles/N` merges the tiles again: the yardstick on the same machine. Before
//! timing, the peak memory of building and partitioning the largest region is printed (Linux only).

use std::hint::black_box;

use criterion::{BenchmarkId, Criterion, Throughput, criterion_group, criterion_main};
use shotwright::fracture::tile::{Prefer, partition};
use shotwright::geom::{Figure, merge};
use shotwright::units::Nm;

#[path = "../tests/common/regions.rs"]
mod regions;
use regions::{Cells, Random};

/// Rows and columns of cells, seven in ten filled, that give about 10³ to 10⁶ vertices.
const SIDES: [usize; 4] = [41, 126, 390, 1232];

fn region(side: usize) -> Figure {
    let cells = Cells::random(&mut Random(side as u64), side, side, 70, 50);
    cells.expect("seven in ten cells are filled").figure(true)
}

fn peak_memory() -> Option<String> {
    let status = std::fs::read_to_string("/proc/self/status").ok()?;
    Some(status.lines().find(|l| l.starts_with("VmHWM"))?.to_owned())
}

fn cost_against_size(c: &mut Criterion) {
    let largest = region(SIDES[3]);
    let built = peak_memory();
    let tiles = partition(&largest, Nm(0.0), Prefer::FewTiles)
        .expect("a valid region")
        .tiles
        .len();
    eprintln!(
        "{} vertices, {tiles} tiles; peak memory {built:?} built, {:?} partitioned",
        largest.vertices(),
        peak_memory()
    );

    let mut group = c.benchmark_group("partition");
    group.sample_size(10);
    for side in SIDES {
        let figure = region(side);
        let vertices = figure.vertices();
        group.throughput(Throughput::Elements(vertices as u64));
        let run = |sliver: Nm| {
            partition(black_box(&figure), sliver, Prefer::FewTiles)
                .expect("a valid region")
                .tiles
        };
        group.bench_function(BenchmarkId::new("one_random_region", vertices), |b| {
            b.iter(|| run(Nm(0.0)))
        });
        if side < 200 {
            group.bench_function(BenchmarkId::new("slivers", vertices), |b| {
                b.iter(|| run(Nm(20.0)))
            });
        }
        let tiles: Vec<Figure> = run(Nm(0.0)).into_iter().map(Figure::from_rect).collect();
        group.bench_function(BenchmarkId::new("unite_tiles", vertices), |b| {
            b.iter(|| merge(black_box(&tiles).iter().map(Figure::outer)));
        });
    }
    group.finish();
}

criterion_group!(benches, cost_against_size);
criterion_main!(benches);
