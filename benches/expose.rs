//! Does a dose cost what it should: one place among 10⁵ shots, against 25 `libm::erf` calls in the same run; the same whatever the number of
//! shots, and whatever the size of the mask that they stand on. Is building linear in the shots, and flat in the size?

use std::hint::black_box;

use criterion::{BenchmarkId, Criterion, Throughput, criterion_group, criterion_main};
use shotwright::blur::Blur;
use shotwright::expose::Exposure;
use shotwright::geom::{Point, Rect};
use shotwright::target::{DoseField, Printed};
use shotwright::units::{Dose, Nm};

const POINTS: u32 = 1_000_000;
/// 100 000 shots on a mask of 9 µm × 34 µm, and on one of 9 mm × 34 mm.
const WIDER: [i64; 3] = [1, 30, 1000];

/// Rows of abutting tiles of unequal size, about 30 × 70 nm, with gaps between every third row; all `wider` times as far apart.
fn mask(shots: i64, wider: i64) -> Vec<(Rect, Dose)> {
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_precision_loss,
        reason = "a square root of a small number"
    )]
    let columns = (shots as f64).sqrt() as i64;
    (0..shots)
        .map(|k| {
            let (i, j) = (k % columns, k / columns);
            let (x, y) = (30 * i + 7 * (j % 3), 70 * j + 120 * (j / 3));
            let (x, y) = (wider * x, wider * y);
            (
                Rect::new(Point::from_nm(x, y), Point::from_nm(x + 30, y + 70 - i % 5)),
                Dose(1.0),
            )
        })
        .collect()
}

/// Places every 1.3 nm along the upper sides of the rows, as contour points are: near one another, one after the other.
fn places(shots: i64, wider: i64) -> Vec<[f64; 2]> {
    #[allow(clippy::cast_precision_loss, reason = "small numbers")]
    let (width, rows, wider) = (
        (shots as f64).sqrt() * 30.0,
        (shots as f64).sqrt(),
        wider as f64,
    );
    (0..POINTS)
        .map(|k| {
            let along = f64::from(k) * 1.3;
            let row = (along / width).floor() % rows;
            // Over the tile that stands there, however far it is from the next.
            let tile = (along % width / 30.0).floor() * 30.0 + 7.0 * (row % 3.0);
            [
                wider * tile + along % 30.0,
                wider * (70.0 * row + 120.0 * (row / 3.0).floor()) + 68.0,
            ]
        })
        .collect()
}

fn dose(c: &mut Criterion) {
    let mut group = c.benchmark_group("expose");
    group
        .sample_size(10)
        .throughput(Throughput::Elements(u64::from(POINTS)));
    let blur = Blur::new(Nm(10.0)).unwrap_or_else(|e| panic!("{e}"));
    group.bench_function("yardstick/25 erf", |b| {
        b.iter(|| {
            let mut sum = 0.0;
            for k in 0..25 * POINTS {
                sum += libm::erf(f64::from(k % 8191) * 1e-3 - 4.0);
            }
            black_box(sum)
        });
    });
    for shots in [1_000, 100_000] {
        let exposure = Exposure::new(blur, mask(shots, 1));
        let places = places(shots, 1);
        group.bench_function(BenchmarkId::new("dose/shots", shots), |b| {
            b.iter(|| places.iter().map(|p| exposure.dose(*p)).sum::<f64>());
        });
        group.bench_function(BenchmarkId::new("crossing/shots", shots), |b| {
            b.iter(|| {
                places
                    .iter()
                    .step_by(10)
                    .filter_map(|p| exposure.crossing(*p, [0.0, 1.0], 40.0))
                    .sum::<f64>()
            });
        });
    }
    for wider in WIDER {
        let exposure = Exposure::new(blur, mask(100_000, wider));
        let places = places(100_000, wider);
        group.bench_function(BenchmarkId::new("dose/times_wider", wider), |b| {
            b.iter(|| places.iter().map(|p| exposure.dose(*p)).sum::<f64>());
        });
    }
    group.finish();
}

fn build(c: &mut Criterion) {
    let mut group = c.benchmark_group("index");
    group.sample_size(10);
    let blur = Blur::new(Nm(10.0)).unwrap_or_else(|e| panic!("{e}"));
    for shots in [10_000, 100_000, 1_000_000] {
        let mask = mask(shots, 1);
        group.bench_function(BenchmarkId::new("shots", shots), |b| {
            b.iter(|| Exposure::new(blur, mask.iter().copied()));
        });
    }
    for wider in WIDER {
        let mask = mask(100_000, wider);
        group.bench_function(BenchmarkId::new("times_wider", wider), |b| {
            b.iter(|| Exposure::new(blur, mask.iter().copied()));
        });
    }
    group.finish();
}

criterion_group!(benches, dose, build);
criterion_main!(benches);
