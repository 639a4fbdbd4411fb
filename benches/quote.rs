//! How the stages of an exact quote grow with the number of distinct figures: each should stay in proportion to it.
//!
//! Rectangles of two to four shots, each of its own size, 300 nm from one another: fracturing them is quick, so that what a quote does between
//! figures shows.

use criterion::{BenchmarkId, Criterion, Throughput, criterion_group, criterion_main};

use shotwright::geom::{Point, Repetition};
use shotwright::judge::Settings;
use shotwright::layout::{Layout, Shape};
use shotwright::mask::{Mask, MaskOptions, Standings};
use shotwright::profile::Profile;
use shotwright::quote::result::Method;
use shotwright::quote::{self, Chosen, Clip, exposure, fracturer, made};
use shotwright::shot::AddressUnit;
use shotwright::units::Nm;

#[path = "../tests/common/flat.rs"]
mod flat;
#[path = "../tests/common/terms.rs"]
mod terms;

use flat::{LAYER, flat};
use terms::terms;

const SIZES: [i64; 3] = [256, 1024, 4096];

/// A square array of rectangles, no two alike.
fn rectangles(count: i64) -> Layout {
    let columns = count.isqrt();
    let shape = |i: i64| {
        let (w, h) = (60 + i % columns, 300 + i / columns);
        let (x, y) = (i % columns * 500, i / columns * 900);
        let corners = [(0, 0), (w, 0), (w, h), (0, h)];
        Shape {
            layer: LAYER,
            points: corners.map(|(dx, dy)| Point::new(x + dx, y + dy)).to_vec(),
            repetition: Repetition::Once,
        }
    };
    flat((0..count).map(shape).collect())
}

fn stages(c: &mut Criterion) {
    let profile = Profile::builtin("shaped-400").expect("built in");
    let terms = terms(&profile);
    let setup = terms.setup().expect("a shaped beam and a blur");
    let options = MaskOptions::new(Nm(0.0), AddressUnit::FINEST);
    let settings = Settings::new(setup.blur, setup.tolerance);
    let mut group = c.benchmark_group("quote");
    group.sample_size(10);
    for count in SIZES {
        let layout = rectangles(count);
        let chosen = Chosen {
            name: "rectangles",
            layout: &layout,
            options: &options,
        };
        let mask: Mask = chosen.mask(&setup).expect("rectangles make a mask");
        let figures = mask.figures.len();
        group.throughput(Throughput::Elements(figures as u64));
        let tile = fracturer(Method::Tile, &terms);
        let made_of = || made::fracture(&mask, tile.as_ref(), &setup, &|| ());
        let id = |stage: &str| BenchmarkId::new(stage, figures);
        group.bench_function(id("near"), |b| {
            b.iter(|| {
                let standings = Standings::new(&mask);
                let windows = mask.figures.iter().map(|f| f.figure.bounds());
                windows.map(|w| standings.touching(w).len()).sum::<usize>()
            });
        });
        group.bench_function(id("tile"), |b| b.iter(made_of));
        let fractures = made_of();
        group.bench_function(id("judge"), |b| {
            b.iter(|| made::judge(&mask, fractures.clone(), &settings, &|| ()));
        });
        let made = made::judge(&mask, fractures, &settings, &|| ());
        let long_range = exposure::LongRange::new(&profile);
        group.bench_function(id("doses"), |b| {
            b.iter(|| long_range.expose(&mask, &made, 0.0).expect("a map"));
        });
        let clip = Clip {
            chosen,
            mask: &mask,
            coverage: None,
        };
        group.bench_function(id("whole"), |b| {
            b.iter(|| quote::quote(&[clip], &terms, &|| ()).expect("a quote"));
        });
    }
    group.finish();
}

criterion_group!(benches, stages);
criterion_main!(benches);
