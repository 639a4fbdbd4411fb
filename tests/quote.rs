//! The join of all stages on small masks whose answers can be worked by hand.

use shotwright::geom::{Point, Repetition};
use shotwright::layout::{self, Layout};
use shotwright::mask::{Mask, MaskOptions, Standings};
use shotwright::profile::{Kind, Profile};
use shotwright::quote::result::{Fits, FlagKind, Method};
use shotwright::quote::{self, Answer, Chosen, Clip, Terms};
use shotwright::shot::AddressUnit;
use shotwright::units::{Dose, Hours, Nm};
use shotwright::write_time::Field;

#[path = "common/terms.rs"]
mod terms;

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
        slot: Some(Hours(24.0)),
        ..terms::terms(profile)
    }
}

fn quoted(layout: &Layout, terms: &Terms<'_>) -> (Mask, Answer) {
    let (mut masks, answer) = quoted_clips(&[(layout, None)], terms);
    (masks.remove(0), answer)
}

/// Layouts with their shares of the field.
fn quoted_clips(layouts: &[(&Layout, Option<f64>)], terms: &Terms<'_>) -> (Vec<Mask>, Answer) {
    let options = MaskOptions::new(Nm(0.0), AddressUnit::FINEST);
    let chosen = |layout| Chosen {
        name: "test",
        layout,
        options: &options,
    };
    let setup = terms.setup().unwrap();
    let masks: Vec<Mask> = layouts
        .iter()
        .map(|(layout, _)| chosen(layout).mask(&setup).unwrap())
        .collect();
    let clips: Vec<Clip<'_>> = layouts
        .iter()
        .zip(&masks)
        .map(|(&(layout, coverage), mask)| Clip {
            chosen: chosen(layout),
            mask,
            coverage,
        })
        .collect();
    let answer = quote::quote(&clips, terms, &|| ()).unwrap();
    (masks, answer)
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
    let mut shapes = layout.cells[0].shapes.to_vec();
    shapes[0].repetition = Repetition::Lattice {
        columns,
        rows,
        a,
        b,
    };
    layout.cells[0].shapes = shapes.into();
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

/// A writer of 62.5 ns a flash at dose 1 and 60 ns of settling, two passes, with this η at β = 10 µm.
fn scatter(eta: &str) -> Profile {
    let text = format!(
        "name = \"scatter\"
[writer]
kind = \"shaped\"
current_a_cm2 = 400
settle_ns = 60
passes = 2
[process]
sigma_nm = 12
base_dose_uc_cm2 = 25
backscatter = [{{ eta = {eta}, beta_nm = 10000 }}]
"
    );
    Profile::parse(&text, "scatter").unwrap()
}

/// Mean density that ten by ten 200 nm squares at a pitch of 400 nm see of themselves at β = 10 µm with bare mask around: along each axis
/// the mean over 3.8 µm of ½(erf(x/β) + erf((L − x)/β)) is erf(t) − (1 − e^(−t²))/(t·√π), t = L/β = 0.38.
fn density_alone() -> f64 {
    let t: f64 = 0.38;
    let erf = 0.409_009; // erf(0.38), scipy.special.erf
    let axis = erf - (1.0 - (-t * t).exp()) / (t * std::f64::consts::PI.sqrt());
    100.0 * 200.0 * 200.0 / (3800.0 * 3800.0) * axis * axis
}

#[test]
fn backscatter_is_met_by_a_dose_that_shows_in_hours_and_margin() {
    let profile = scatter("0.6");
    // 200 nm squares at a pitch of 400 nm: the extent is 3800 nm wide and 100 squares fill 0.27701 of it.
    let layout = squares(10, 10, [400.0, 0.0], [0.0, 400.0]);
    let (_, answer) = quoted(&layout, &terms(&profile));
    let correction = answer.quote.dose_correction;
    let density = 100.0 * 200.0 * 200.0 / (3800.0 * 3800.0);
    let dose = 1.6 / (1.0 + 1.2 * density); // (1 + η)/(1 + 2ηU), DESIGN 4.3
    assert!((correction.density - density).abs() < 1e-12);
    assert!((correction.dose - dose).abs() < 1e-12);
    let tile = answer.quote.fractures.tile.as_ref().unwrap();
    // Around the squares is bare mask: what they see is far less than the mean of their extent.
    let density = density_alone();
    let flash = 100.0 * 1.6 / (1.0 + 1.2 * density) * 62.5e-9 / 3600.0;
    let found = tile.hours.unwrap().flash_h;
    assert!(
        (found / flash - 1.0).abs() < 1e-3,
        "{found}, expected {flash}"
    );
    // A wide edge: 0.01·½·(1 + 2ηU)·σ/0.398942.
    let margin = 0.005 * (1.0 + 1.2 * density) * 12.0 / 0.398_942;
    let found = tile.margin_nm_per_pct.median.unwrap();
    assert!((found - margin).abs() < 0.005, "{found}, expected {margin}");
}

#[test]
fn a_field_is_filled_with_copies_of_the_clip() {
    let profile = plain();
    let terms = Terms {
        field: Some(Field {
            width: Nm::from_mm(1.0),
            height: Nm::from_mm(2.0),
        }),
        ..terms(&profile)
    };
    let (_, answer) = quoted_clips(&[(&wkt(SQUARE), Some(0.25))], &terms);
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
    let made = answer.made[0].tile.as_ref().unwrap()[0].as_ref().unwrap();
    let mean = |made: &quote::Made| made.fidelity.edges.error.mean().unwrap();
    let (_, alone) = quoted(&wkt(SQUARE), &terms(&profile));
    let alone = alone.made[0].tile.as_ref().unwrap()[0].as_ref().unwrap();
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

#[test]
fn a_raster_writer_stands_beside_at_the_same_dose_and_ties_where_hours_meet() {
    let profile = plain();
    let numbers = [("beam_na", 1000.0), ("base_dose_uc_cm2", 100.0)];
    let raster = Profile::from_numbers("beams", Kind::Raster, numbers).unwrap();
    let terms = Terms {
        raster: Some(&raster),
        field: Some(Field {
            width: Nm::from_mm(10.0),
            height: Nm::from_mm(10.0),
        }),
        ..terms(&profile)
    };
    let (_, answer) = quoted_clips(&[(&wkt(SQUARE), Some(0.5))], &terms);
    let line = answer.quote.raster.unwrap();
    // 1 cm² at the shaped writer's 25 µC/cm² and 1 µA: 25 s (t = D·A/I), whatever the pattern.
    let hours = line.hours.total_h;
    assert!((hours - 25.0 / 3600.0).abs() < 1e-12, "{hours}");
    // At 182.5 ns a shot: 25 s are 136 986 301.4 shots.
    assert_eq!(line.tie_flashes.unwrap().0, 136_986_302);
    // Half of 1 cm² in boxes of 200 nm.
    assert_eq!(line.flashes.unwrap().0, 1_250_000_000);
    let error = quote::quote(&[], &terms, &|| ()).unwrap_err();
    assert!(
        error.to_string().contains("a share of it for each"),
        "{error}"
    );
}

#[test]
fn what_moves_the_total_is_in_the_quote_by_its_size() {
    let profile = plain();
    let (_, answer) = quoted(&wkt(SQUARE), &terms(&profile));
    let found: Vec<(&str, f64, f64)> = answer
        .quote
        .sensitivity
        .iter()
        .map(|s| (s.key.as_str(), 3.6e12 * s.at_lower_h, 3.6e12 * s.at_upper_h))
        .collect();
    // By hand, ns: 62.5 of flashing and 60 a pass of settling; ±10 % of each, one pass less or more.
    let expected = [
        ("passes", 122.5, 242.5),
        ("settle_ns", 170.5, 194.5),
        ("current_a_cm2", 120.0 + 62.5 / 0.9, 120.0 + 62.5 / 1.1),
        ("base_dose_uc_cm2", 176.25, 188.75),
    ];
    assert_eq!(found.len(), expected.len(), "{found:?}");
    for (found, expected) in found.iter().zip(expected) {
        assert_eq!(found.0, expected.0);
        assert!(
            (found.1 - expected.1).abs() < 1e-6 && (found.2 - expected.2).abs() < 1e-6,
            "{found:?}"
        );
    }
}

/// A dense stripe waits for the beam, the one above it for the stage: the quote counts both and the rows add up to its hours.
#[test]
fn stripes_are_beam_bound_or_stage_bound_by_what_lies_in_them() {
    let mut profile = plain();
    profile
        .set_all([("stripe_um", 10.0), ("stage_mm_s", 100.0), ("turn_s", 0.0)])
        .unwrap();
    // 20 µm of travel at 100 mm/s: 200 µs. Below 50 × 24 squares, 91.25 ns a pass each; above a single one.
    let mut text = String::new();
    for (column, row) in (0..50).flat_map(|column| (0..48).map(move |row| (column, row))) {
        let (x, y) = (400 * column, 200 * row);
        text += &format!(
            "POLYGON (({x} {y}, {} {y}, {} {}, {x} {}, {x} {y}))\n",
            x + 200,
            x + 200,
            y + 200,
            y + 200
        );
    }
    text += "POLYGON ((0 19000, 200 19000, 200 19200, 0 19200, 0 19000))\n";
    profile.set("greatest_side_nm", 200.0).unwrap();
    let (_, answer) = quoted(&wkt(&text), &terms(&profile));
    let rows = answer.stripes.tile.as_ref().unwrap();
    let hours = answer.quote.fractures.tile.as_ref().unwrap().hours.unwrap();
    assert_eq!(
        (hours.stripes, hours.stage_bound_stripes),
        (4, 2),
        "{rows:?}"
    );
    assert!(rows[0].stage_s == 0.0 && rows[1].stage_s > 0.0, "{rows:?}");
    assert_eq!(rows[0].flashes.0, 2400);
    let sum: f64 = rows
        .iter()
        .map(|r| {
            f64::from(r.passes)
                * r.count as f64
                * (r.flash_s + r.settle_s + r.subfield_s + r.stage_s)
        })
        .sum();
    assert!((sum - 3600.0 * hours.total_h).abs() < 1e-12, "{sum}");
    // The lower: 2400 flashes at 31.25 + 60 ns; the upper: the travel of 19.8 µm.
    let expected = 2.0 * (2400.0 * 91.25e-9 + 19.8e-6 / 0.1);
    assert!((sum - expected).abs() < 1e-12, "{sum}, expected {expected}");
}

/// D = (1 + η)/(1 + 2ηU) multiplies every flash (DESIGN 4.3): a ± on η is in the interval, and η is among what moves the total.
#[test]
fn a_backscatter_that_is_not_sure_makes_the_hours_unsure() {
    let profile = scatter("{ value = 0.6, plus_minus = 0.1 }");
    let layout = squares(10, 10, [400.0, 0.0], [0.0, 400.0]);
    let (_, answer) = quoted(&layout, &terms(&profile));
    let hours = answer.quote.fractures.tile.as_ref().unwrap().hours.unwrap();
    // Doses within a thousandth of each other are one; the ± moves the total by over 1 %.
    let density = density_alone();
    let total = |eta: f64| {
        let dose = (1.0 + eta) / (1.0 + 2.0 * eta * density);
        100.0 * (dose * 62.5e-9 + 120e-9) / 3600.0
    };
    for (found, eta) in [
        (hours.low_h, 0.5),
        (hours.total_h, 0.6),
        (hours.high_h, 0.7),
    ] {
        let expected = total(eta);
        assert!(
            (found - expected).abs() < 1e-3 * expected,
            "{found}, expected {expected}"
        );
    }
    let mut moved = answer.quote.sensitivity.iter();
    let moved = moved.find(|s| s.key == "backscatter[0].eta").unwrap();
    for (found, eta) in [(moved.at_lower_h, 0.54), (moved.at_upper_h, 0.66)] {
        let expected = total(eta);
        assert!(
            (found - expected).abs() < 1e-3 * expected,
            "{found}, expected {expected}"
        );
    }
}

/// By hand, of 100 squares of 200 nm at 25 µC/cm² in two passes: 12.5 µC/cm² a pass is two flashes of 10 at most, each of 3.125 to
/// 31.25 ns; 100 nA at 400 A/cm² are 25 000 nm², so a square is two parts.
#[test]
fn flashes_beyond_one_a_shot_are_counted_by_cause() {
    let layout = squares(10, 10, [400.0, 0.0], [0.0, 400.0]);
    let flashes = |numbers: &[(&str, f64)]| {
        let mut profile = plain();
        profile.set_all(numbers.iter().copied()).unwrap();
        let (_, answer) = quoted(&layout, &terms(&profile));
        let hours = answer.quote.fractures.tile.unwrap().hours.unwrap();
        let more = hours.more_flashes;
        [
            hours.flashes,
            more.border,
            more.beam_current,
            more.dose,
            hours.too_short,
        ]
        .map(|n| n.0)
    };
    assert_eq!(flashes(&[]), [200, 0, 0, 0, 0]);
    assert_eq!(
        flashes(&[("greatest_flash_uc_cm2", 10.0)]),
        [400, 0, 0, 200, 0]
    );
    assert_eq!(flashes(&[("greatest_beam_na", 100.0)]), [400, 0, 200, 0, 0]);
    assert_eq!(flashes(&[("shortest_flash_ns", 31.0)]), [200, 0, 0, 0, 0]);
    assert_eq!(flashes(&[("shortest_flash_ns", 32.0)]), [200, 0, 0, 0, 200]);
    // Borders every 3 µm: the one at 3000 nm runs between squares that end at 3000 and begin at 3200; at 2.9 µm it cuts the row, and
    // the column, from 2800 to 3000: 9 + 9 squares in two, one in four, in each pass.
    assert_eq!(flashes(&[("stripe_um", 3.0), ("subfield_um", 3.0)])[1], 0);
    assert_eq!(
        flashes(&[("stripe_um", 2.9), ("subfield_um", 2.9)])[1],
        2 * (9 + 9 + 3)
    );
}
