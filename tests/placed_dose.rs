//! The dose of every place in a quote, on masks whose densities can be worked by hand.

use shotwright::geom::{Point, Repetition};
use shotwright::layout::{self, Layout};
use shotwright::mask::MaskOptions;
use shotwright::profile::Profile;
use shotwright::quote::result::FractureSummary;
use shotwright::quote::{self, Chosen, Clip, Terms};
use shotwright::shot::AddressUnit;
use shotwright::units::Nm;
use shotwright::write_time::Field;

#[path = "common/terms.rs"]
mod terms;

const ETA: f64 = 0.6;

fn profile(backscatter: &str) -> Profile {
    let text = format!(
        "name = \"test\"\n[writer]\nkind = \"shaped\"\ncurrent_a_cm2 = 400\nshot_edge_sd_nm = 0.5\n\
         [process]\nsigma_nm = 12\nbase_dose_uc_cm2 = 25\n{backscatter}\n"
    );
    Profile::parse(&text, "test").unwrap()
}

fn chang() -> Profile {
    profile("backscatter = [{ eta = 0.6, beta_nm = 10000 }]")
}

/// The plain staircase of a layout, alone or as a share of a field of 10 mm × 10 mm.
fn staircase(layout: &Layout, profile: &Profile, coverage: Option<f64>) -> FractureSummary {
    let options = MaskOptions::new(Nm(0.0), AddressUnit::FINEST);
    let chosen = Chosen {
        name: "test",
        layout,
        options: &options,
    };
    let terms = Terms {
        field: coverage.map(|_| Field {
            width: Nm::from_mm(10.0),
            height: Nm::from_mm(10.0),
        }),
        ..terms::terms(profile)
    };
    let mask = chosen.mask(&terms.setup().unwrap()).unwrap();
    let clip = Clip {
        chosen,
        mask: &mask,
        coverage,
    };
    let answer = quote::quote(&[clip], &terms, &|| ()).unwrap();
    answer.quote.fractures.staircase.unwrap()
}

/// Squares of 200 nm every 400 nm over 80 µm × 80 µm, as an array or as a list of all its places.
fn dense(listed: bool, more: &str) -> Layout {
    let text = format!("POLYGON ((0 0, 200 0, 200 200, 0 200, 0 0))\n{more}");
    let mut layout = layout::read(text.as_bytes(), "test.wkt").unwrap();
    let units = |nm: i64| Nm::from_pm(1000 * nm).to_pm().unwrap() / layout.unit.to_pm().unwrap();
    let array = Repetition::Lattice {
        columns: 200,
        rows: 200,
        a: Point::new(units(400), 0),
        b: Point::new(0, units(400)),
    };
    let repetition = if listed {
        Repetition::List(array.displacements().collect())
    } else {
        array
    };
    let mut shapes = layout.cells[0].shapes.to_vec();
    shapes[0].repetition = repetition;
    layout.cells[0].shapes = shapes.into_iter().collect();
    layout
}

/// 60 µm from the array: the long range of 10 µm ends before.
const ALONE: &str =
    "POLYGON ((140000 40000, 140200 40000, 140200 40200, 140000 40200, 140000 40000))";

/// From the middle of the array's right side 40 µm into the empty mask.
const BAR: &str = "POLYGON ((80000 40000, 120000 40000, 120000 40200, 80000 40200, 80000 40000))";

#[test]
fn a_dense_array_and_a_lone_square_get_the_doses_of_chang() {
    let found = staircase(&dense(false, ALONE), &chang(), None);
    let map = found.dose_map.unwrap();
    // Density ¼ within the array, its own tiny share for the lone square: (1 + η)/(1 + 2ηU).
    assert!((map.least_dose - 1.6 / 1.3).abs() < 3e-3, "{map:?}");
    assert!((map.greatest_dose - 1.6).abs() < 2e-2, "{map:?}");
    // Without correction wide edges in the array would see (1 + 2ηU)/(1 + η).
    assert!(
        (map.uncorrected_level[1] - 1.3 / 1.6).abs() < 2e-3,
        "{map:?}"
    );
    assert!(map.level_error < 2e-3, "{map:?}");
    assert_eq!((map.surroundings, map.mesh_nm), (0.0, 2500.0));
    // The margin of each place is that of its dose: a wide edge without backscatter, times (1 + η)/D.
    let plain = staircase(&dense(false, ALONE), &profile(""), None);
    let (with, without) = (found.margin_nm_per_pct, plain.margin_nm_per_pct);
    let ratio = with.worst.unwrap() / without.worst.unwrap();
    assert!((ratio - 1.3).abs() < 5e-3, "{ratio}");
    assert!(plain.dose_map.is_none());
}

/// Flash times follow the doses, however the places are written down.
#[test]
fn arrays_and_lists_flash_for_as_long() {
    let flash = |listed, profile: &Profile| {
        let found = staircase(&dense(listed, ALONE), profile, None);
        (
            found.hours.unwrap().flash_h,
            found.dose_map.map(|m| m.mean_dose),
        )
    };
    let (array, mean) = flash(false, &chang());
    let (list, _) = flash(true, &chang());
    assert!((array / list - 1.0).abs() < 5e-4, "{array} against {list}");
    let (plain, _) = flash(false, &profile(""));
    assert!((array / plain / mean.unwrap() - 1.0).abs() < 1e-9);
    // Most of the array is deep inside: 1.23; its rim of about 7 µm gets up to 1.42.
    assert!((1.24..1.31).contains(&mean.unwrap()), "{mean:?}");
}

/// A bar longer than the long range gets a dose for each of its shots; one for the whole would miss the level by a tenth.
#[test]
fn a_bar_out_of_an_array_follows_the_dose_along_it() {
    let found = staircase(&dense(false, BAR), &chang(), None);
    let map = found.dose_map.unwrap();
    assert!(map.level_error < 4e-3, "{map:?}");
    assert!(map.greatest_dose > 1.55, "{map:?}");
}

/// A clip that stands for part of a field has the field's mean around it, at the dose that suits it.
#[test]
fn a_clip_of_a_field_is_not_alone() {
    let clip = staircase(&dense(false, ""), &chang(), Some(0.8))
        .dose_map
        .unwrap();
    let alone = staircase(&dense(false, ""), &chang(), None)
        .dose_map
        .unwrap();
    // 200 squares and 199 gaps: 79.8 µm.
    let density = 40_000.0 * 0.04 / (79.8 * 79.8);
    assert!((clip.surroundings - 0.8 * density).abs() < 1e-9, "{clip:?}");
    // At a straight border to bare mask the array alone sees half of its density, at a corner a quarter.
    assert!(
        alone.greatest_dose > 1.4 && clip.greatest_dose < 1.31,
        "{alone:?} {clip:?}"
    );
    assert!(clip.level_error < 2e-3, "{clip:?}");
}

/// Fogging over millimetres is one more term: over a clip of a field it sees the field.
#[test]
fn fogging_sees_the_field_around_a_clip() {
    let foggy = profile(
        "fogging_eta = 0.05\nfogging_radius_mm = 8\nbackscatter = [{ eta = 0.6, beta_nm = 10000 }]",
    );
    let map = staircase(&dense(false, ""), &foggy, Some(1.0))
        .dose_map
        .unwrap();
    let density = 40_000.0 * 0.04 / (79.8 * 79.8);
    let uniform = (1.0 + ETA + 0.05) / (1.0 + 2.0 * (ETA + 0.05) * density);
    assert!((map.mean_dose - uniform).abs() < 2e-3, "{map:?}, {uniform}");
    assert!((map.least_dose - uniform).abs() < 5e-3 && (map.greatest_dose - uniform).abs() < 5e-3);
}

/// The error budget is in every summary: a lone edge moves with its shot's edge (0.5 nm), and with the noise of its electrons.
#[test]
fn the_error_budget_is_quoted() {
    let found = staircase(&dense(false, ""), &profile(""), None);
    // 1/(2·√n) with n = 25·0.0624151 electrons/nm² (exact SI).
    let noise = 0.5 / (25.0 * 0.062_415_1_f64).sqrt();
    let sd = found.scores.unwrap().edge_sd_nm.median.unwrap();
    assert!((sd - 0.5_f64.hypot(noise)).abs() < 0.02, "{sd}");
}
