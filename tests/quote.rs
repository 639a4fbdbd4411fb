//! The join of all stages on small masks whose answers can be worked by hand.

use shotwright::fracture::Effort;
use shotwright::fracture::overlap::DoseLevels;
use shotwright::geom::{Point, Repetition};
use shotwright::layout::{self, Layout};
use shotwright::mask::{Mask, MaskOptions, Standings};
use shotwright::profile::{Kind, Profile};
use shotwright::quote::result::{Fits, FlagKind, Method};
use shotwright::quote::{self, Answer, Chosen, Share, Terms};
use shotwright::shot::AddressUnit;
use shotwright::units::{Dose, Hours, Nm};
use shotwright::write_time::Field;

/// No backscatter, no stage, no fixed parts: hours are flashes and settling alone.
fn plain() -> Profile {
    let numbers = [
        ("current_a_cm2", 400.0),
        ("base_dose_uc_cm2", 25.0),
        ("settle_ns", 60.0),
        ("passes", 2.0),
        ("sigma_nm", 12.0),
    ];
    Profile::from_numbers("plain", Kind::Shaped, numbers).unwrap()
}

fn terms(profile: &Profile) -> Terms<'_> {
    Terms {
        profile,
        tolerance: Nm(2.0),
        within: Nm(2.0),
        effort: Effort::Quick,
        share: None,
        slot: Some(Hours(24.0)),
        peak_dose: None,
        dose_levels: DoseLevels::ONE,
    }
}

fn quoted(layout: &Layout, terms: &Terms<'_>) -> (Mask, Answer) {
    let chosen = Chosen {
        name: "test",
        layout,
        options: &MaskOptions::new(Nm(0.0), AddressUnit::FINEST),
    };
    let mask = chosen.mask(&terms.setup().unwrap()).unwrap();
    let answer = quote::quote(&chosen, &mask, terms, &|| ()).unwrap();
    (mask, answer)
}

fn wkt(text: &str) -> Layout {
    layout::read(text.as_bytes(), "test.wkt").unwrap()
}

/// A square of 200 nm.
const SQUARE: &str = "POLYGON ((0 0, 200 0, 200 200, 0 200, 0 0))";

/// The square in an array of steps in nm.
fn squares(columns: u64, rows: u64, a: [f64; 2], b: [f64; 2]) -> Layout {
    let mut layout = wkt(SQUARE);
    let units = |nm: f64| Nm(nm).to_pm().unwrap() / layout.unit.to_pm().unwrap();
    let step = |[x, y]: [f64; 2]| Point::new(units(x), units(y));
    let (a, b) = (step(a), step(b));
    layout.cells[0].shapes[0].repetition = Repetition::Lattice {
        columns,
        rows,
        a,
        b,
    };
    layout
}

#[test]
fn a_square_is_one_shot_and_its_time_is_that_of_one_flash() {
    let profile = plain();
    let (_, answer) = quoted(&wkt(SQUARE), &terms(&profile));
    // By hand: 25 µC/cm² ÷ 400 A/cm² = 62.5 ns over both passes; 2 × 60 ns.
    let second = 1.0 / 3600.0;
    for (method, fracture) in answer.quote.fractures.iter() {
        let fracture = fracture.unwrap();
        if method == Method::Staircase || method == Method::Tile {
            assert_eq!(fracture.shots.0, 1, "{method:?}");
            let hours = fracture.hours.unwrap();
            assert!((hours.flash_h - 62.5e-9 * second).abs() < 1e-15);
            assert!((hours.settle_h - 120e-9 * second).abs() < 1e-15);
            assert_eq!(hours.low_h, hours.high_h);
        }
        assert_eq!(fracture.prints_within_tolerance, Some(true), "{method:?}");
    }
    assert_eq!(answer.quote.verdict.fits, Fits::Yes);
    assert!(answer.quote.flags.is_empty(), "{:?}", answer.quote.flags);
}

#[test]
fn an_array_costs_each_copy_and_is_fractured_once() {
    let profile = plain();
    let layout = squares(1000, 500, [1000.0, 0.0], [0.0, 1000.0]);
    let (mask, answer) = quoted(&layout, &terms(&profile));
    assert_eq!(mask.figures.len(), 1);
    let tile = answer.quote.fractures.tile.as_ref().unwrap();
    assert_eq!((tile.shots.0, tile.shots_distinct), (500_000, 1));
    let hours = tile.hours.unwrap();
    let expected = 500_000.0 * (62.5e-9 + 120e-9) / 3600.0;
    assert!(
        (hours.total_h - expected).abs() < 1e-9 * expected,
        "{hours:?}"
    );
    // The seconds of the figures are the flashing and settling of the mask.
    let seconds = answer.figures[0].fractures.tile.unwrap().seconds.unwrap();
    assert!((seconds - 3600.0 * expected).abs() < 1e-9 * seconds);
}

#[test]
fn backscatter_is_met_by_one_dose_that_shows_in_hours_and_margin() {
    let text = "
kind = \"shaped\"
current_a_cm2 = 400
settle_ns = 60
passes = 2
[process]
sigma_nm = 12
base_dose_uc_cm2 = 25
backscatter = [{ eta = 0.6, beta_nm = 10000 }]
";
    let text = format!("name = \"scatter\"\nabout = \"test\"\n[writer]{text}");
    let profile = Profile::parse(&text, "scatter").unwrap();
    // 200 nm squares at a pitch of 400 nm: the extent is 3800 nm wide and 100 squares fill 0.27701 of it.
    let layout = squares(10, 10, [400.0, 0.0], [0.0, 400.0]);
    let (_, answer) = quoted(&layout, &terms(&profile));
    let correction = answer.quote.dose_correction;
    let density = 100.0 * 200.0 * 200.0 / (3800.0 * 3800.0);
    let dose = 1.6 / (1.0 + 1.2 * density); // (1 + η)/(1 + 2ηU), DESIGN 4.3
    assert!((correction.density - density).abs() < 1e-12);
    assert!((correction.dose - dose).abs() < 1e-12);
    let tile = answer.quote.fractures.tile.as_ref().unwrap();
    let flash = 100.0 * dose * 62.5e-9 / 3600.0;
    assert!((tile.hours.unwrap().flash_h - flash).abs() < 1e-9 * flash);
    // A wide edge: 0.01·½·(1 + 2ηU)·σ/0.398942.
    let margin = 0.005 * (1.0 + 1.2 * density) * 12.0 / 0.398_942;
    let found = tile.margin_nm_per_pct.median.unwrap();
    assert!((found - margin).abs() < 0.005, "{found}, expected {margin}");
}

#[test]
fn a_field_is_filled_with_copies_of_the_clip() {
    let profile = plain();
    let share = Share {
        field: Field {
            width: Nm::from_mm(1.0),
            height: Nm::from_mm(2.0),
        },
        coverage: 0.25,
    };
    let terms = Terms {
        share: Some(share),
        ..terms(&profile)
    };
    let (_, answer) = quoted(&wkt(SQUARE), &terms);
    // 0.25 · 2 mm² of clips of 200 × 200 nm, one shot each.
    let shots = 0.25 * 2e12 / 4e4;
    let hours = answer.quote.fractures.tile.unwrap().hours.unwrap();
    let expected = shots * 182.5e-9 / 3600.0;
    assert!(
        (hours.total_h - expected).abs() < 1e-6 * expected,
        "{hours:?}"
    );
}

#[test]
fn a_bar_that_costs_far_more_than_the_others_is_flagged() {
    // Ten squares of one shot each, and a comb of 40 teeth: 81 rectangles on an outline that is not long enough to excuse them.
    let mut text = String::new();
    for i in 0..10 {
        let x = 1000 * i;
        text += &format!(
            "POLYGON (({x} 0, {x2} 0, {x2} 900, {x} 900, {x} 0))\n",
            x2 = x + 900
        );
    }
    let mut comb = vec![(0, 2000), (3240, 2000)];
    for tooth in (0..40).rev() {
        let x = 80 * tooth;
        comb.extend([(x + 80, 2130), (x + 40, 2130), (x + 40, 2100), (x, 2100)]);
    }
    comb.retain(|&(x, _)| x <= 3240);
    let comb: Vec<String> = comb.iter().map(|(x, y)| format!("{x} {y}")).collect();
    text += &format!("POLYGON (({}, 0 2000))\n", comb.join(", "));
    let profile = plain();
    let (_, answer) = quoted(&wkt(&text), &terms(&profile));
    let costly: Vec<_> = answer
        .quote
        .flags
        .iter()
        .filter(|flag| flag.kind == FlagKind::CostsMoreThanItsShare)
        .collect();
    assert_eq!(costly.len(), 1, "{:?}", answer.quote.flags);
    let share = costly[0].number.unwrap();
    assert!(share > 50.0 && share < 100.0, "{share}");
    assert!(answer.figures[usize::try_from(costly[0].figure).unwrap()].vertices > 100);
}

#[test]
fn a_dose_over_the_peak_is_flagged_only_if_it_is_over() {
    let profile = plain();
    for (limit, flagged) in [(0.5, true), (3.0, false)] {
        let terms = Terms {
            peak_dose: Some(Dose(limit)),
            ..terms(&profile)
        };
        let (_, answer) = quoted(&wkt(SQUARE), &terms);
        let peaks = answer.quote.flags.iter();
        let found = peaks
            .filter(|f| f.kind == FlagKind::PeakDoseOverLimit)
            .count();
        assert_eq!(found > 0, flagged, "limit {limit}");
    }
}

/// Two squares 30 nm apart: each is judged with the shots of the other, so the dose between them is that of both.
#[test]
fn a_figure_is_judged_with_its_neighbours_shots() {
    let profile = plain();
    let near = format!("{SQUARE}\nPOLYGON ((230 0, 430 0, 430 200, 230 200, 230 0))");
    let (mask, answer) = quoted(&wkt(&near), &terms(&profile));
    assert_eq!(mask.figures.len(), 1, "the two are mirror images");
    let made = answer.made.tile.as_ref().unwrap()[0].as_ref().unwrap();
    let mean = |made: &quote::Made| made.fidelity.edges.error.mean().unwrap();
    let (_, alone) = quoted(&wkt(SQUARE), &terms(&profile));
    let alone = alone.made.tile.as_ref().unwrap()[0].as_ref().unwrap();
    // In one dimension the facing edge gets Φ(−30/12) more, so its contour moves by that over the slope; it is a quarter of
    // all outline judged, and the neighbour is as wide as it is.
    let (tail, slope) = (0.006_209_665, 0.398_942 / 12.0);
    let (moved, expected) = (mean(made) - mean(alone), 0.25 * tail / slope);
    assert!(
        (moved - expected).abs() < 0.003,
        "{moved}, expected {expected}"
    );
}

#[test]
fn standings_find_every_copy_in_a_window() {
    let profile = plain();
    let layout = squares(7, 5, [1000.0, 100.0], [-300.0, 900.0]);
    let (mask, _) = quoted(&layout, &terms(&profile));
    let all = Standings::new(&mask).touching(mask.extent.unwrap());
    assert_eq!(all.len() as u128, mask.place_count());
    let window = mask.extent.unwrap();
    let left = shotwright::geom::Rect {
        max: Point::new(window.min.x, window.max.y),
        ..window
    };
    let found = Standings::new(&mask).touching(left);
    let expected = all
        .iter()
        .filter(|(figure, t)| {
            t.apply_rect(mask.figures[*figure].figure.bounds())
                .touches(left)
        })
        .count();
    assert_eq!(found.len(), expected);
    assert!(expected > 0);
}

/// Discs in a row, 14 nm apart, as WKT.
fn discs(count: u32) -> Layout {
    let disc = |i: u32| {
        let at = |k: u32| {
            let angle = std::f64::consts::TAU * f64::from(k % 72) / 72.0;
            let centre = f64::from(i) * 134.0;
            format!(
                "{:.0} {:.0}",
                centre + 60.0 * angle.cos(),
                60.0 * angle.sin()
            )
        };
        let points: Vec<String> = (0..=72).map(at).collect();
        format!("POLYGON (({}))", points.join(", "))
    };
    wkt(&(0..count).map(disc).collect::<Vec<_>>().join("\n"))
}

#[test]
fn figures_close_to_each_other_print_beside_the_real_shots_for_any_number_of_threads() {
    let profile = plain();
    let layout = discs(5);
    let [one, two] = [1, 2].map(|threads| {
        let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build();
        pool.unwrap()
            .install(|| quoted(&layout, &terms(&profile)).1)
    });
    for method in [Method::Tile, Method::Overlap] {
        let (one, two) = (one.made.get(method).unwrap(), two.made.get(method).unwrap());
        for (a, b) in one.iter().zip(two) {
            let (a, b) = (a.as_ref().unwrap(), b.as_ref().unwrap());
            assert_eq!(a.fracture, b.fracture);
            assert!(a.fracture.misses.is_empty(), "{:?}", a.fracture.misses);
            assert!(a.fidelity.prints_within_tolerance());
        }
    }
}
