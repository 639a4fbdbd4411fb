//! Time to judge figures whose shots are given.

use criterion::{Criterion, criterion_group, criterion_main};
use shotwright::blur::{Blur, REACH};
use shotwright::expose::Exposure;
use shotwright::fracture::tile::fracture_staircase;
use shotwright::judge::{Settings, judge};
use shotwright::layout;
use shotwright::mask::{self, MaskOptions};
use shotwright::shot::{AddressUnit, ShotLimits};
use shotwright::units::Nm;

/// The plain staircases of each clip, judged figure by figure without their neighbours.
fn clips(c: &mut Criterion) {
    let blur = Blur::new(Nm(12.0)).unwrap();
    let address = AddressUnit::new(Nm(1.0)).unwrap();
    let limits = ShotLimits {
        address,
        least_side: Nm(8.0),
        greatest_side: Nm(1000.0),
        sliver: Nm(0.0),
    };
    let settings = Settings::new(blur, Nm(2.0));
    let mut group = c.benchmark_group("judge");
    group.sample_size(10);
    for clip in ["iso", "mixed"] {
        let layout = layout::open(format!("sample-masks/{clip}.oas")).unwrap();
        let mask = mask::build(&layout, &MaskOptions::new(blur.sigma() * REACH, address)).unwrap();
        let jobs: Vec<_> = mask
            .figures
            .iter()
            .map(|f| {
                (
                    &f.figure,
                    fracture_staircase(&f.figure, Nm(2.0), &limits)
                        .unwrap()
                        .shots,
                )
            })
            .collect();
        group.bench_function(clip, |b| {
            b.iter(|| {
                let judged = jobs.iter().map(|(figure, shots)| {
                    judge(figure, &[], &Exposure::new(blur, shots.rects()), &settings)
                });
                judged
                    .filter(|fidelity| fidelity.prints_within_tolerance())
                    .count()
            });
        });
    }
    group.finish();
}

criterion_group!(benches, clips);
criterion_main!(benches);
