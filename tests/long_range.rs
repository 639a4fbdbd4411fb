//! Density, its spread and the dose correction, against copies counted one by one, closed forms and a linear solve by numpy.

use shotwright::expose::{Backscatter, Density, Folding, correct};
use shotwright::geom::{Point, Rect, Repetition};
use shotwright::units::{Dose, Nm};

fn rect(x0: i64, y0: i64, x1: i64, y1: i64) -> Rect {
    Rect::new(Point::from_nm(x0, y0), Point::from_nm(x1, y1))
}

fn lattice(columns: u64, rows: u64, a: (i64, i64), b: (i64, i64)) -> Repetition {
    Repetition::Lattice {
        columns,
        rows,
        a: Point::from_nm(a.0, a.1),
        b: Point::from_nm(b.0, b.1),
    }
}

fn term(ratio: f64, radius: f64) -> Backscatter {
    Backscatter {
        ratio,
        radius: Nm(radius),
    }
}

/// Every kind of repetition against all its copies added one by one as shots.
#[test]
fn arrays_cover_what_their_copies_cover() {
    let shots = [
        (rect(0, 0, 130, 70), Dose(1.0)),
        (rect(60, 40, 410, 95), Dose(1.3)),
        (rect(-1700, 500, 900, 520), Dose(0.7)),
    ];
    let list = Repetition::List(
        [(0, 0), (3100, 70), (-900, 8000), (20, 20)]
            .map(|(x, y)| Point::from_nm(x, y))
            .into(),
    );
    let repetitions = [
        Repetition::Once,
        lattice(17, 23, (433, 0), (0, 377)),
        lattice(9, 11, (0, -517), (-613, 0)),
        lattice(5, 1, (1000, 0), (0, 0)),
        lattice(6, 8, (433, 0), (111, 377)),
        lattice(6, 8, (100, 377), (433, 0)),
        lattice(6, 5, (400, 77), (-50, 390)),
        list.clone(),
        Repetition::nested(vec![
            lattice(3, 4, (211, 0), (0, 190)),
            lattice(5, 2, (1500, 0), (0, 4100)),
        ]),
        Repetition::nested(vec![lattice(3, 4, (211, 0), (0, 190)), list.clone()]),
        Repetition::nested(vec![list, lattice(2, 2, (900, 30), (-30, 1400))]),
    ];
    for repetition in &repetitions {
        let frame = rect(-4000, -3000, 9000, 10_000);
        let (mut counted, mut copied) = (
            Density::new(frame, Nm(700.0), 0.0).unwrap(),
            Density::new(frame, Nm(700.0), 0.0).unwrap(),
        );
        counted.add_repeated(&shots, repetition);
        for by in repetition.displacements() {
            for (shot, dose) in shots {
                copied.add(shot.translated(by), dose);
            }
        }
        let mut total = 0.0;
        for (k, (a, b)) in counted.cells().iter().zip(copied.cells()).enumerate() {
            assert!(
                (a - b).abs() < 1e-12,
                "{repetition:?}, cell {k}: {a} against {b}"
            );
            total += a;
        }
        assert!(total > 0.0);
    }
}

/// A million copies on a million: the mean is what their area makes it, and no cell differs from another by more than its borders.
#[test]
fn huge_arrays_are_counted() {
    let frame = rect(0, 0, 100_000_000, 100_000_000);
    let mut map = Density::new(frame, Nm(1e6), 0.0).unwrap();
    map.add_repeated(
        &[(rect(0, 0, 50, 60), Dose(1.0))],
        &lattice(1_000_000, 1_000_000, (100, 0), (0, 100)),
    );
    assert!((map.mean() - 0.3).abs() < 1e-12, "{}", map.mean());
    assert!(map.cells().iter().all(|c| (c - 0.3).abs() < 1e-9));
}

/// Moving mask and map together changes no bit.
#[test]
fn coverage_moves_with_the_mask() {
    let at = |by: Point| {
        let mut map = Density::new(rect(0, 0, 9000, 9000).translated(by), Nm(700.0), 0.2).unwrap();
        map.add_repeated(
            &[(rect(10, 10, 333, 77).translated(by), Dose(1.1))],
            &lattice(12, 30, (433, 0), (5, 277)),
        );
        map.cells().to_vec()
    };
    assert_eq!(
        at(Point::default()),
        at(Point::new(123_456_789_012_345, -98_765_432_109_877))
    );
}

/// A half plane spreads to the normal distribution: Φ(−x·√2/β) at x from its edge, for a radius of few cells and of many.
#[test]
fn an_edge_spreads_as_the_closed_form_says() {
    for (radius, mesh) in [
        (10_000.0, 2500.0),
        (400_000.0, 2500.0),
        (9_000_000.0, 2500.0),
    ] {
        let frame = rect(0, 0, 2_000_000, 40_000);
        // Covered left of the middle; above and below goes on what is around, so look at a map that does not depend on y.
        let mut map = Density::new(frame, Nm(mesh), 0.0).unwrap();
        map.add(rect(0, 0, 1_000_000, 40_000), Dose(1.0));
        let spread = map.spread(Nm(radius));
        let phi = |x: f64| shotwright::blur::cdf(x * std::f64::consts::SQRT_2 / radius);
        for column in [0, 150, 390, 399, 400, 401, 430, 700, 799] {
            let [x, y] = spread.middle(column, 8);
            let across = phi(1_000_000.0 - x) - phi(-x);
            let up = phi(40_000.0 - y) - phi(-y);
            let found = spread.at([x, y]);
            // The kernel ends at 6 σ.
            assert!(
                (found - across * up).abs() < 5e-9,
                "radius {radius}, x {x}: {found}"
            );
        }
    }
}

/// What is around goes on for ever: a map covered as its surroundings stays so.
#[test]
fn surroundings_are_part_of_the_spread() {
    // 41 µm is no multiple of the mesh: the cells that reach beyond the frame are covered there as all around.
    let frame = rect(0, 0, 41_000, 33_000);
    let mut map = Density::new(frame, Nm(2500.0), 0.4).unwrap();
    map.add(frame, Dose(0.4));
    for radius in [4000.0, 10_000.0, 8e6] {
        let spread = map.spread(Nm(radius));
        assert!(
            spread.cells().iter().all(|c| (c - 0.4).abs() < 1e-8),
            "{:?}",
            spread.range()
        );
    }
    let c = correct(&map, &[term(0.6, 10_000.0), term(0.02, 8e6)]).unwrap();
    let uniform = 1.62 / (1.0 + 2.0 * 0.62 * 0.4);
    assert!(c.dose.cells().iter().all(|d| (d - uniform).abs() < 1e-7));
}

/// Source: numpy.linalg.solve on the dense matrix (see `make_correction.py` beside the data): three terms, one of them wider than
/// the map, coverage over 1 where shots overlap, empty cells, a covered surrounding.
#[test]
fn correction_is_the_solution_of_the_linear_equations() {
    let (mut map, mut expected) = (
        Density::new(rect(0, 0, 60_000, 45_000), Nm(2500.0), 0.3).unwrap(),
        Vec::new(),
    );
    for line in include_str!("data/expose/correction.csv").lines().skip(2) {
        let v: Vec<f64> = line.split(',').map(|v| v.parse().unwrap()).collect();
        #[allow(clippy::cast_possible_truncation, reason = "small whole numbers")]
        let (i, j) = (v[0] as i64 * 2500, v[1] as i64 * 2500);
        map.add(rect(i, j, i + 2500, j + 2500), Dose(v[2]));
        expected.push(v[3]);
    }
    assert_eq!(expected.len(), 24 * 18);
    let c = correct(
        &map,
        &[
            term(0.6, 10_000.0),
            term(0.15, 3000.0),
            term(0.05, 60_000.0),
        ],
    )
    .unwrap();
    assert!(
        c.residual < 1e-9 && c.rounds < 40,
        "{} after {}",
        c.residual,
        c.rounds
    );
    for (k, (found, expected)) in c.dose.cells().iter().zip(&expected).enumerate() {
        assert!(
            (found - expected).abs() < 1e-8,
            "cell {k}: {found}, solved {expected}"
        );
    }
}

/// The classic curve: left of a boundary all is written, right of it next to nothing. Uncorrected edges see
/// `(1 + 2η·Φ(−x√2/β))/(1 + η)`; corrected ones see 1. Deep in either half the dose closes to Chang's form.
#[test]
fn a_dense_half_and_an_empty_half_come_out_level() {
    let (eta, beta, side) = (0.6, 10_000.0, 400_000);
    let mut map = Density::new(rect(0, 0, side, side), Nm(2500.0), 0.0).unwrap();
    map.add_repeated(
        &[(rect(0, 0, 625, side), Dose(1.0))],
        &lattice(160, 1, (1250, 0), (0, 0)),
    );
    let c = correct(&map, &[term(eta, beta)]).unwrap();
    let boundary = 200_000.0;
    for column in 10..150 {
        let [x, y] = map.middle(column, 80);
        let phi = |x: f64| shotwright::blur::cdf(x * std::f64::consts::SQRT_2 / beta);
        let density = 0.5 * (phi(boundary - x) - phi(-x));
        let level = c.uncorrected.at([x, y]);
        assert!(
            (level - (1.0 + 2.0 * eta * density) / (1.0 + eta)).abs() < 1e-6,
            "x {x}: {level}"
        );
        assert!((c.edge_level.at([x, y]) - 1.0).abs() < 1e-9);
    }
    let dose = |x: f64| c.dose.at([x, 200_000.0]);
    assert!((dose(100_000.0) - 1.0).abs() < 1e-6);
    assert!((dose(300_000.0) - 1.6).abs() < 1e-6);
}

#[test]
fn threads_change_no_bit() {
    let run = |threads: usize| {
        let pool = rayon::ThreadPoolBuilder::new()
            .num_threads(threads)
            .build()
            .unwrap();
        pool.install(|| {
            let mut map = Density::new(rect(0, 0, 300_000, 200_000), Nm(1500.0), 0.1).unwrap();
            for k in 0..40 {
                map.add(
                    rect(7000 * k, 3000 * k, 7000 * k + 5500, 3000 * k + 60_000),
                    Dose(1.0),
                );
            }
            let c = correct(&map, &[term(0.5, 9000.0), term(0.1, 300_000.0)]).unwrap();
            c.dose
                .cells()
                .iter()
                .map(|d| d.to_bits())
                .collect::<Vec<_>>()
        })
    };
    assert_eq!(run(1), run(3));
}

/// Long arrays beside short ones and single shots: where stretches are folded, coverage and dose are those of the map with all its cells. Steps that divide
/// the mesh, as others beat with it in the whole map; the worst ratio that is taken, with and without coverage around.
#[test]
fn folded_stretches_have_the_dose_of_the_whole_map() {
    let frame = rect(0, 0, 1_010_000, 853_000);
    let figures = [
        (
            rect(0, 0, 900, 800),
            lattice(400, 380, (1250, 0), (0, 1250)),
        ),
        (rect(0, 0, 40_000, 21_000), Repetition::Once),
        (
            rect(0, 0, 200, 300),
            Repetition::nested(vec![
                lattice(100, 7, (500, 0), (0, 500)),
                lattice(6, 1, (50_000, 0), (0, 0)),
            ]),
        ),
        (rect(0, 0, 300, 700), lattice(1, 600, (0, 0), (0, -1250))),
    ];
    let at = [
        (100_000, 110_000),
        (700_000, 640_000),
        (440_000, 700_000),
        (985_000, 800_000),
    ];
    let placed: Vec<_> = figures
        .iter()
        .zip(at)
        .map(|((shot, repetition), (x, y))| (shot.translated(Point::from_nm(x, y)), repetition))
        .collect();
    for (terms, around) in [
        (vec![term(0.6, 10_000.0)], 0.0),
        (vec![term(0.5, 10_000.0), term(0.3, 3000.0)], 0.3),
        (vec![term(3.0, 6000.0)], 0.0),
    ] {
        let greatest = terms.iter().map(|t| t.radius.0).fold(0.0, f64::max);
        let mesh = Nm(2500.0);
        let folding = Folding::new(frame, mesh, Nm(greatest), placed.iter().copied());
        let mut whole = Density::new(frame, mesh, around).unwrap();
        let mut folded = Density::folded(frame, mesh, around, folding).unwrap();
        let ([columns, rows], all) = (folded.size(), whole.size());
        assert!(
            columns < all[0] && rows < all[1],
            "{columns} × {rows} of {all:?}"
        );
        for (shot, repetition) in &placed {
            for map in [&mut whole, &mut folded] {
                map.add_repeated(&[(*shot, Dose(1.0))], repetition);
            }
        }
        assert!((folded.mean() - whole.mean()).abs() < 1e-12);
        let found = correct(&folded, &terms).unwrap();
        let expected = correct(&whole, &terms).unwrap();
        let mut worst = 0.0_f64;
        for x in (0..=1010).step_by(7) {
            for y in (0..=853).step_by(3) {
                let p = [f64::from(x) * 1000.0, f64::from(y) * 1000.0];
                worst = worst.max((found.dose.at(p) - expected.dose.at(p)).abs());
            }
        }
        assert!(worst < 1e-6, "{terms:?}: doses differ by {worst:.2e}");
        let window = rect(250_000, 250_000, 450_000, 400_000);
        let even = [&found, &expected].map(|c| c.dose.even_in(window, 1e-3).unwrap());
        assert!((even[0] - even[1]).abs() < 1e-6);
    }
}

/// A mask whose arrays leave no stretch of one kind keeps all its cells, and steps beyond the radius are no array.
#[test]
fn only_long_even_stretches_are_folded() {
    let frame = rect(0, 0, 2_000_000, 2_000_000);
    let folding = |repetition: &Repetition| {
        let shot = (rect(0, 0, 900, 900), repetition);
        Folding::new(frame, Nm(2500.0), Nm(10_000.0), [shot].into_iter()).size()
    };
    assert_eq!(
        folding(&lattice(150, 150, (13_000, 0), (0, 13_000))),
        [800, 800]
    );
    let scattered = (0..2000).map(|i| Point::from_nm(i * 1000, (i * 7919) % 2000 * 1000));
    assert_eq!(folding(&Repetition::List(scattered.collect())), [800, 800]);
    let [columns, rows] = folding(&lattice(1999, 1, (1000, 0), (0, 0)));
    assert!(columns < 200 && rows < 200);
}
