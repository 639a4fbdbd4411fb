//! Three hundred masks of real figures in ever other mixtures, whose exact totals are known.

#![allow(
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    reason = "numbers of test figures are small"
)]

use std::convert::Infallible;

use shotwright::quote::sample::{
    Drawn, Features, Scale, Stop, Stopped, Strata, Total, Weights, draw,
};

use crate::population::{KINDS, Member, population};
use crate::random::Random;

/// Tile shots, overlap shots, and flashing and settling of both at dose 1 flashed as long as it settles.
pub(crate) const COSTS: [&dyn Fn(&Member) -> f64; 4] = [
    &|m| m.features.places * m.shots[0],
    &|m| m.features.places * m.shots[1],
    &|m| m.features.places * (m.shots[0] + m.doses[0]),
    &|m| m.features.places * (m.shots[1] + m.doses[1]),
];

fn unit(random: &mut Random) -> f64 {
    (random.next() >> 11) as f64 / (1u64 << 53) as f64
}

/// How often figures stand.
#[derive(Clone, Copy, Debug)]
pub(crate) enum Places {
    Once,
    /// Pareto with this exponent, 10^5 at most: few figures stand most often.
    Pareto(f64),
}

/// A mask of `n` figures of the population: kinds in shares drawn from the seed.
pub(crate) fn mask(all: &[Member], seed: u64, n: usize, places: Places) -> Vec<(Member, u64)> {
    let mut random = Random(seed);
    let shares = KINDS.map(|_| unit(&mut random).powi(2));
    let whole: f64 = shares.iter().sum();
    let by_kind = KINDS.map(|kind| all.iter().filter(|m| m.kind == kind).collect::<Vec<_>>());
    (0..n)
        .map(|_| {
            let (mut at, mut kind) = (whole * unit(&mut random), 0);
            while at >= shares[kind] && kind + 1 < shares.len() {
                at -= shares[kind];
                kind += 1;
            }
            let of = &by_kind[kind];
            let mut member = *of[random.below(of.len() as u64) as usize];
            member.features.places = match places {
                Places::Once => 1.0,
                Places::Pareto(exponent) => (1.0 - unit(&mut random))
                    .powf(-1.0 / exponent)
                    .min(1e5)
                    .floor(),
            };
            (member, random.next())
        })
        .collect()
}

pub(crate) const SCALE: Scale = Scale {
    sigma_nm: 14.0,
    greatest_side_nm: 500.0,
};

pub(crate) fn strata(mask: &[(Member, u64)]) -> Strata {
    let figures: Vec<(Features, u64)> = mask.iter().map(|(m, key)| (m.features, *key)).collect();
    Strata::new(&figures, SCALE)
}

pub(crate) fn drawn(
    mask: &[(Member, u64)],
    strata: &Strata,
    stop: &Stop<'_>,
) -> (Drawn<Member>, Vec<Total>) {
    let mut measure =
        |figures: &[usize]| Ok::<_, Infallible>(figures.iter().map(|&i| mask[i].0).collect());
    let Ok(drawn) = draw(strata, stop, &mut measure, &COSTS, Drawn::none(strata));
    let weights = Weights::new(strata, &drawn.taken);
    let totals = COSTS
        .iter()
        .map(|cost| weights.total(&|i| cost(&mask[i].0)))
        .collect();
    (drawn, totals)
}

pub(crate) fn within(share: f64) -> Stop<'static> {
    Stop {
        within: Some(share),
        more_than: 0,
        most: None,
        out_of_time: &|| false,
        at_once: 1000,
    }
}

/// Share of masks whose interval covers, by cost; mean share of figures drawn.
fn coverage(seeds: std::ops::Range<u64>, n: usize, places: Places, share: f64) -> ([f64; 4], f64) {
    let all = population();
    let (mut covered, mut taken) = ([0.0; 4], 0.0);
    let masks = (seeds.end - seeds.start) as f64;
    for seed in seeds {
        let mask = mask(&all, seed, n, places);
        let (drawn, totals) = drawn(&mask, &strata(&mask), &within(share));
        assert_eq!(drawn.stopped, Stopped::Narrow, "seed {seed}");
        for ((covered, total), cost) in covered.iter_mut().zip(totals).zip(COSTS) {
            let exact: f64 = mask.iter().map(|(m, _)| cost(m)).sum();
            assert!(total.relative() <= share);
            *covered += f64::from(u8::from(total.covers(exact))) / masks;
        }
        taken += drawn.costs.len() as f64 / n as f64 / masks;
    }
    (covered, taken)
}

#[test]
fn the_interval_covers_the_exact_answer_as_often_as_it_says() {
    for (n, places, share) in [
        (3000, Places::Once, 0.02),
        (3000, Places::Pareto(1.2), 0.02),
        (1000, Places::Once, 0.05),
    ] {
        let (covered, taken) = coverage(0..300, n, places, share);
        eprintln!(
            "{n} figures, {places:?}, within {share}: covered {covered:.3?}, drawn {taken:.3}"
        );
        for covered in covered {
            assert!(
                (0.92..=0.98).contains(&covered),
                "{n} figures, {places:?}: {covered}"
            );
        }
    }
}

#[test]
fn a_hundred_thousand_figures_are_known_to_two_percent_from_a_twentieth() {
    let all = population();
    for (seed, places) in [
        (1, Places::Once),
        (2, Places::Once),
        (3, Places::Pareto(1.5)),
        (4, Places::Pareto(1.1)),
    ] {
        let mask = mask(&all, seed, 100_000, places);
        let (drawn, totals) = drawn(&mask, &strata(&mask), &within(0.02));
        assert_eq!(drawn.stopped, Stopped::Narrow);
        let most = totals.iter().map(Total::relative).fold(0.0, f64::max);
        eprintln!(
            "{places:?}: {} figures drawn, interval ±{:.2} %",
            drawn.costs.len(),
            100.0 * most
        );
        assert!(
            most <= 0.02 && drawn.costs.len() <= 5000,
            "{}",
            drawn.costs.len()
        );
    }
}

#[test]
fn a_sample_is_repeated_by_its_number_whatever_stopped_it() {
    let all = population();
    let mask = mask(&all, 11, 4000, Places::Pareto(1.5));
    let strata = strata(&mask);
    let (first, totals) = drawn(&mask, &strata, &within(0.03));
    let stop = |most, at_once| Stop {
        within: None,
        more_than: 0,
        most: Some(most),
        out_of_time: &|| false,
        at_once,
    };
    let numbers = |drawn: &Drawn<Member>| drawn.costs.iter().map(|(i, _)| *i).collect::<Vec<_>>();
    let (again, same) = drawn(&mask, &strata, &stop(first.costs.len(), 1));
    assert_eq!(numbers(&first), numbers(&again));
    assert_eq!((&first.taken, &totals), (&again.taken, &same));
    assert_eq!(again.stopped, Stopped::Most);
    // A clock that runs out in the middle of a batch.
    let asked = std::cell::Cell::new(0);
    let late = Stop {
        within: None,
        more_than: 0,
        most: None,
        out_of_time: &|| {
            asked.set(asked.get() + 1);
            asked.get() > 60
        },
        at_once: 4,
    };
    let (timed, known) = drawn(&mask, &strata, &late);
    assert_eq!(timed.stopped, Stopped::Time);
    let (again, same) = drawn(&mask, &strata, &stop(timed.costs.len(), 1000));
    assert_eq!(numbers(&timed), numbers(&again));
    assert_eq!(known, same);
}

/// Drawing on beyond a first end goes the way of a drawing that never stopped there.
#[test]
fn a_drawing_is_taken_up_where_it_ended() {
    let all = population();
    let mask = mask(&all, 12, 4000, Places::Once);
    let strata = strata(&mask);
    let (first, totals) = drawn(&mask, &strata, &within(0.04));
    let mut measure =
        |figures: &[usize]| Ok::<_, Infallible>(figures.iter().map(|&i| mask[i].0).collect());
    let stop = Stop {
        more_than: first.costs.len(),
        ..within(0.04)
    };
    let few = first.costs.len();
    let Ok(on) = draw(&strata, &stop, &mut measure, &COSTS, first);
    assert!(on.costs.len() > few && on.stopped == Stopped::Narrow);
    let (direct, same) = drawn(
        &mask,
        &strata,
        &Stop {
            within: None,
            most: Some(on.costs.len()),
            ..within(0.04)
        },
    );
    let numbers = |drawn: &Drawn<Member>| drawn.costs.iter().map(|(i, _)| *i).collect::<Vec<_>>();
    assert_eq!(numbers(&on), numbers(&direct));
    assert!(
        totals
            .iter()
            .zip(&same)
            .all(|(a, b)| b.half_width < a.half_width)
    );
}

#[test]
fn all_figures_give_the_exact_answer() {
    let all = population();
    let mask = mask(&all, 5, 500, Places::Pareto(1.0));
    let stop = Stop {
        within: Some(0.0),
        more_than: 0,
        most: None,
        out_of_time: &|| false,
        at_once: 7,
    };
    let (drawn, totals) = drawn(&mask, &strata(&mask), &stop);
    assert_eq!((drawn.stopped, drawn.costs.len()), (Stopped::All, 500));
    for (total, cost) in totals.iter().zip(COSTS) {
        let exact: f64 = mask.iter().map(|(m, _)| cost(m)).sum();
        assert!((total.value - exact).abs() < 1e-9 * exact && total.half_width == 0.0);
    }
}

#[test]
fn one_figure_that_is_nearly_the_whole_mask_is_drawn() {
    let all = population();
    let mut mask = mask(&all, 6, 2000, Places::Once);
    mask[77].0.features.places = 1e12;
    let (drawn, totals) = drawn(&mask, &strata(&mask), &within(0.02));
    assert!(drawn.costs.iter().any(|(i, _)| *i == 77));
    assert!(totals[0].relative() < 1e-6, "{:?}", totals[0]);
}

#[test]
#[ignore = "two thousand masks of each kind: the test above with a ruler seven times finer"]
fn the_interval_covers_over_many_more_masks() {
    for (n, places, share) in [
        (3000, Places::Once, 0.02),
        (3000, Places::Pareto(1.2), 0.02),
        (1000, Places::Once, 0.05),
        (10_000, Places::Once, 0.01),
        (10_000, Places::Pareto(1.5), 0.005),
    ] {
        let (covered, taken) = coverage(1000..3000, n, places, share);
        eprintln!(
            "{n} figures, {places:?}, within {share}: covered {covered:.3?}, drawn {taken:.3}"
        );
        for covered in covered {
            assert!(
                (0.935..=0.965).contains(&covered),
                "{n} figures, {places:?}: {covered}"
            );
        }
    }
}
