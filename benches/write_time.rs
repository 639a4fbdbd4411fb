//! How long the writer model takes: does it stay flat in the number of copies, and grow as shots × rows?

use std::hint::black_box;

use criterion::{BenchmarkId, Criterion, criterion_group, criterion_main};
use shotwright::geom::{Point, Rect, Repetition, Transform};
use shotwright::profile::Profile;
use shotwright::shot::{AddressUnit, Shot, ShotList};
use shotwright::units::{Dose, Nm};
use shotwright::write_time::{Pattern, Placed, WriteTime, sensitivity};

fn staircase(shots: i64) -> ShotList {
    let shots = (0..shots).map(|i| Shot {
        x0: 10 * i,
        y0: 10 * i,
        x1: 10 * i + 60,
        y1: 10 * i + 20,
        dose: Dose(1.0),
    });
    let unit = AddressUnit::new(Nm(1.0)).expect("1 nm is an address unit");
    ShotList::new(unit, shots.collect())
}

fn frame(nm: i64) -> Rect {
    Rect {
        min: Point::new(0, 0),
        max: Point::from_nm(nm, nm),
    }
}

fn lattices(c: &mut Criterion) {
    let profile = Profile::builtin("shaped-400").expect("built in");
    let shots = staircase(50);
    let mut group = c.benchmark_group("write_time/upright_lattice/side");
    for side in [100_u64, 1_000, 10_000] {
        let repetition = Repetition::Lattice {
            columns: side,
            rows: side,
            a: Point::from_nm(2_000, 0),
            b: Point::from_nm(0, 2_000),
        };
        let placed = [Placed {
            shots: &shots,
            transform: Transform::IDENTITY,
            repetition: &repetition,
            dose: Dose(1.0),
        }];
        let pattern = Pattern::Placed {
            placed: &placed,
            frame: frame(20_000_000),
        };
        group.bench_function(BenchmarkId::from_parameter(side), |b| {
            b.iter(|| WriteTime::new(&profile, black_box(&pattern)));
        });
    }
    group.finish();
}

fn distinct(c: &mut Criterion) {
    let profile = Profile::builtin("shaped-400").expect("built in");
    let shots = staircase(30);
    let mut group = c.benchmark_group("write_time/distinct_figures");
    group.sample_size(10);
    for figures in [1_000_i64, 10_000, 100_000] {
        let placed: Vec<_> = (0..figures)
            .map(|i| Placed {
                shots: &shots,
                transform: Transform {
                    shift: Point::from_nm(2_000 * (i % 300), 2_000 * (i / 300)),
                    ..Transform::IDENTITY
                },
                repetition: &Repetition::Once,
                dose: Dose(1.0),
            })
            .collect();
        let pattern = Pattern::Placed {
            placed: &placed,
            frame: frame(700_000),
        };
        group.bench_function(BenchmarkId::new("hours", figures), |b| {
            b.iter(|| WriteTime::new(&profile, black_box(&pattern)));
        });
        if figures == 10_000 {
            group.bench_function(BenchmarkId::new("sensitivity", figures), |b| {
                b.iter(|| sensitivity(&profile, black_box(&pattern)));
            });
        }
    }
    group.finish();
}

criterion_group!(benches, lattices, distinct);
criterion_main!(benches);
