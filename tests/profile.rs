//! Profiles: what is accepted, what is refused and how it is said.

use shotwright::profile::{Key, Kind, Profile, ProfileError};
use shotwright::shot::AddressUnit;
use shotwright::units::{BaseDose, CurrentDensity, Nm};

const GOOD: &str = r#"
name = "bench"
about = "for tests"

[writer]
kind = "shaped"
passes = 2
current_a_cm2 = 400
settle_ns = { value = 60, plus_minus = 5 }
stripe_um = 80
subfield_um = 20
least_side_nm = 10
greatest_side_nm = 500
address_nm = 0.25

[process]
base_dose_uc_cm2 = 25.0
alpha_nm = 20
backscatter = [{ eta = 0.6, beta_nm = { value = 10000, plus_minus = 500 } }, { eta = 0.1, beta_nm = 900 }]
"#;

/// `GOOD` with one line (found by its key) replaced; an empty line takes it out.
fn with_line(key: &str, line: &str) -> String {
    let mut hits = 0;
    let text: Vec<_> = GOOD
        .lines()
        .map(|l| {
            let hit = l.split(['=', ' ']).next() == Some(key);
            hits += usize::from(hit);
            if hit { line } else { l }
        })
        .collect();
    assert_eq!(hits, 1, "{key} is on one line of the good profile");
    text.join("\n")
}

fn refusal(text: &str) -> String {
    Profile::parse(text, "my.toml").unwrap_err().to_string()
}

#[test]
fn a_profile_is_read_as_written() {
    let p = Profile::parse(GOOD, "my.toml").unwrap();
    assert_eq!((p.name(), p.kind(), p.passes()), ("bench", Kind::Shaped, 2));
    assert_eq!(p.current_density(), Some(CurrentDensity(400.0)));
    assert_eq!(p.base_dose(), BaseDose(25.0));
    assert_eq!(p.number(Key::Settle).unwrap().plus_minus, 5.0);
    // σ = α/√2 = 20/1.414214 (DESIGN: the literature's 1/e radius).
    assert!((p.sigma().unwrap() - Nm(14.142_135_623_730_95)).0.abs() < 1e-12);
    assert_eq!(p.backscatter().len(), 2);
    assert_eq!(p.backscatter()[1].beta(), Nm(900.0));
    assert_eq!(p.backscatter()[0].beta_nm.plus_minus, 500.0);
    let limits = p.shot_limits().unwrap();
    assert_eq!(limits.address, AddressUnit::new(Nm(0.25)).unwrap());
    assert_eq!(limits.sliver, Nm(20.0), "default");
    assert_eq!(p.fogging(), None);
    assert_eq!(p.beam_current(), None);
}

#[test]
fn a_profile_written_out_reads_back_equal() {
    for name in Profile::builtins() {
        let profile = Profile::builtin(name).unwrap();
        let text = toml::to_string(&profile).unwrap();
        assert_eq!(Profile::parse(&text, "again").unwrap(), profile, "{text}");
    }
    let profile = Profile::parse(GOOD, "my.toml").unwrap();
    let text = toml::to_string(&profile).unwrap();
    assert_eq!(Profile::parse(&text, "again").unwrap(), profile, "{text}");
}

/// Ranges: CHECKS "illustrative writer generations" (memory): 70 to 1200 A/cm², resist 8 to 75+ µC/cm², greatest side
/// about 1 down to 0.25 µm, settling 50 to 100 ns, 2 or 4 passes.
#[test]
fn every_builtin_parses_and_says_that_it_is_illustrative() {
    let mut densities = Vec::new();
    for name in Profile::builtins() {
        let p = Profile::builtin(name).unwrap();
        assert_eq!(p.name(), name);
        assert!(p.about().contains("illustrative"), "{name}: {}", p.about());
        assert!(p.sigma().is_some(), "{name}");
        assert!([2, 4].contains(&p.passes()), "{name}");
        if let (Some(density), Some(limits)) = (p.current_density(), p.shot_limits()) {
            densities.push(density.0);
            assert!((250.0..=1000.0).contains(&limits.greatest_side.0), "{name}");
            assert!(
                (50.0..=100.0).contains(&p.value(Key::Settle).unwrap()),
                "{name}"
            );
        } else {
            assert_eq!(p.kind(), Kind::Raster);
            assert!(p.beam_current().is_some());
        }
    }
    assert_eq!(densities, [70.0, 200.0, 400.0, 800.0, 1200.0]);
}

#[test]
fn an_unknown_builtin_is_refused_with_the_names_there_are() {
    let said = Profile::builtin("shaped-300").unwrap_err().to_string();
    assert_eq!(
        said,
        "no built-in profile `shaped-300`, expected one of shaped-70, shaped-200, shaped-400, shaped-800, shaped-1200, raster"
    );
}

#[test]
fn what_is_wrong_is_refused_by_name_with_its_line() {
    // key of the line replaced, its new text, what must be said
    let cases = [
        (
            "settle_ns",
            "settle_us = 0.06",
            "my.toml:9: unknown key `settle_us`, expected `settle_ns`",
        ),
        (
            "current_a_cm2",
            "current = 400",
            "my.toml:8: unknown key `current`, expected `current_a_cm2`",
        ),
        (
            "stripe_um",
            "stripes = 80",
            "my.toml:10: unknown key `stripes`, expected one of passes, pass_shift, current_a_cm2",
        ),
        (
            "passes",
            "beam_na = 100",
            "my.toml:7: unknown key `beam_na`, expected a key of a shaped writer",
        ),
        (
            "passes",
            "sigma_nm = 10",
            "my.toml:7: unknown key `sigma_nm`, expected it in [process]",
        ),
        (
            "alpha_nm",
            "settle_ns = 10",
            "my.toml:18: unknown key `settle_ns`, expected it in [writer]",
        ),
        (
            "name",
            "title = \"x\"",
            "my.toml:2: unknown key `title`, expected one of name, about, writer, process",
        ),
        (
            "settle_ns",
            "settle_ns = \"60 ns\"",
            "my.toml:9: `settle_ns` is \"60 ns\", expected a number or { value = …, plus_minus = … }",
        ),
        (
            "settle_ns",
            "settle_ns = true",
            "`settle_ns` is true, expected a number",
        ),
        (
            "settle_ns",
            "settle_ns = [60]",
            "`settle_ns` is [60], expected a number",
        ),
        (
            "settle_ns",
            "settle_ns = nan",
            "my.toml:9: `settle_ns` is NaN, expected a number from 0 to 1000000000 ns",
        ),
        (
            "settle_ns",
            "settle_ns = inf",
            "`settle_ns` is inf, expected a number from 0 to",
        ),
        (
            "settle_ns",
            "settle_ns = -1",
            "`settle_ns` is -1, expected a number from 0 to",
        ),
        (
            "settle_ns",
            "settle_ns = { value = 3, plus_minus = 5 }",
            "`settle_ns` is 3 ± 5, expected a number from 0 to",
        ),
        (
            "settle_ns",
            "settle_ns = { value = 3, plus_minus = -1 }",
            "`settle_ns` is 3 ± -1",
        ),
        (
            "settle_ns",
            "settle_ns = { value = 3, plus_minus = nan }",
            "`settle_ns` is 3 ± NaN",
        ),
        (
            "settle_ns",
            "settle_ns = { value = 3 }",
            "`settle_ns` is { value = 3 }, expected a number or { value = …, plus_minus = … }",
        ),
        (
            "settle_ns",
            "settle_ns = { value = 3, plus_minus = 1, sd = 2 }",
            "unknown key `sd`, expected one of value, plus_minus",
        ),
        (
            "settle_ns",
            "settle_ns = { value = \"3\", plus_minus = 1 }",
            "`settle_ns.value` is \"3\", expected a number",
        ),
        (
            "current_a_cm2",
            "current_a_cm2 = 0",
            "my.toml:8: `current_a_cm2` is 0, expected a number from 0.001 to 100000 A/cm²",
        ),
        (
            "current_a_cm2",
            "",
            "my.toml:5: `current_a_cm2` is missing from [writer], expected a number from 0.001 to 100000 A/cm²",
        ),
        (
            "base_dose_uc_cm2",
            "",
            "my.toml:16: `base_dose_uc_cm2` is missing from [process]",
        ),
        (
            "passes",
            "passes = 0",
            "`passes` is 0, expected a whole number from 1 to 64",
        ),
        (
            "passes",
            "passes = 2.5",
            "`passes` is 2.5, expected a whole number from 1 to 64",
        ),
        (
            "passes",
            "passes = { value = 2, plus_minus = 1 }",
            "`passes` is 2 ± 1, expected a whole number",
        ),
        (
            "kind",
            "kind = \"gaussian\"",
            "my.toml:6: `kind` is \"gaussian\", expected \"shaped\" or \"raster\"",
        ),
        (
            "kind",
            "",
            "my.toml:5: `kind` is missing from [writer], expected \"shaped\" or \"raster\"",
        ),
        (
            "name",
            "name = 7",
            "my.toml:2: `name` is 7, expected a text in quotes",
        ),
        (
            "address_nm",
            "address_nm = 0.0333",
            "my.toml:14: `address_nm` is 0.0333, expected a whole number of picometres",
        ),
        (
            "least_side_nm",
            "least_side_nm = 600",
            "my.toml:12: `least_side_nm` is 600, which contradicts `greatest_side_nm` 500",
        ),
        (
            "subfield_um",
            "subfield_um = 90",
            "my.toml:11: `subfield_um` is 90, which contradicts `stripe_um` 80",
        ),
        (
            "alpha_nm",
            "alpha_nm = 20\nsigma_nm = 14",
            "my.toml:18: `alpha_nm` is 20, which contradicts `sigma_nm` 14",
        ),
        (
            "alpha_nm",
            "alpha_nm = -20",
            "my.toml:18: `alpha_nm` is -20, expected a number from 0.01 to 100000 nm for σ = α/√2",
        ),
        (
            "alpha_nm",
            "fogging_eta = 0.01",
            "my.toml:18: `fogging_eta` is 0.01, which contradicts the absence of `fogging_radius_mm`",
        ),
        (
            "backscatter",
            "backscatter = 0.6",
            "my.toml:19: `backscatter` is 0.6, expected a list of",
        ),
        (
            "backscatter",
            "backscatter = [0.6]",
            "`backscatter` is 0.6, expected a list of",
        ),
        (
            "backscatter",
            "backscatter = [{ eta = 0.6 }]",
            "`backscatter` is { eta = 0.6 }, expected { eta = …, beta_nm = … }",
        ),
        (
            "backscatter",
            "backscatter = [{ eta = 0.6, beta_um = 10 }]",
            "unknown key `beta_um`, expected one of eta, beta_nm",
        ),
        (
            "backscatter",
            "backscatter = [{ eta = 0, beta_nm = 10 }]",
            "`backscatter.eta` is 0, expected a number over 0, up to 10",
        ),
        (
            "backscatter",
            "backscatter = [{ eta = 0.6, beta_nm = inf }]",
            "`backscatter.beta_nm` is inf, expected a number over 0",
        ),
        (
            "[process]",
            "[resist]",
            "unknown key `resist`, expected one of name, about, writer, process",
        ),
        (
            "[process]",
            "",
            "`process` is missing from the file, expected a table [process]",
        ),
        ("passes", "passes = ", "my.toml:7: "),
        ("passes", "kind = \"raster\"", "my.toml:7: "),
    ];
    for (key, line, said) in cases {
        let refusal = refusal(&with_line(key, line));
        assert!(
            refusal.contains(said),
            "{line}\n  said: {refusal}\n  not:  {said}"
        );
    }
}

#[test]
fn every_fault_is_reported_in_the_order_of_the_file() {
    let text = GOOD
        .replace("current_a_cm2 = 400", "current_a_cm2 = -4")
        .replace("stripe_um", "stripe_nm")
        .replace("25.0", "nan");
    let errors = Profile::parse(&text, "my.toml").unwrap_err().0;
    let said: Vec<_> = errors.iter().map(ToString::to_string).collect();
    assert_eq!(said.len(), 3, "{said:#?}");
    for (said, place) in said
        .iter()
        .zip(["my.toml:8:", "my.toml:10:", "my.toml:17:"])
    {
        assert!(said.starts_with(place), "{said}");
    }
}

#[test]
fn an_override_is_checked_like_the_file() {
    let mut p = Profile::builtin("shaped-400").unwrap();
    p.set("settle_ns", 75.0).unwrap();
    assert_eq!(p.number(Key::Settle).unwrap().value, 75.0);
    assert_eq!(p.number(Key::Settle).unwrap().plus_minus, 0.0);
    p.set("alpha_nm", 20.0).unwrap();
    assert!((p.sigma().unwrap().0 - 14.142_135_623_730_95).abs() < 1e-12);

    let before = p.clone();
    for (key, value, said) in [
        (
            "settle_us",
            1.0,
            "profile shaped-400: unknown key `settle_us`, expected `settle_ns`",
        ),
        (
            "settle_ns",
            f64::NAN,
            "profile shaped-400: `settle_ns` is NaN",
        ),
        (
            "beam_na",
            10.0,
            "unknown key `beam_na`, expected a key of a shaped writer",
        ),
        (
            "least_side_nm",
            900.0,
            "`least_side_nm` is 900, which contradicts `greatest_side_nm` 500",
        ),
    ] {
        let refusal = p.set(key, value).unwrap_err().to_string();
        assert!(refusal.contains(said), "{refusal}");
        assert_eq!(p, before, "unchanged after a refusal");
    }
    // Together they hold.
    p.set_all([("least_side_nm", 900.0), ("greatest_side_nm", 1000.0)])
        .unwrap();
}

#[test]
fn numbers_alone_make_a_profile_and_what_is_not_given_costs_nothing() {
    let p = Profile::from_numbers(
        "command line",
        Kind::Shaped,
        [("base_dose_uc_cm2", 25.0), ("current_a_cm2", 400.0)],
    )
    .unwrap();
    assert_eq!(p.value(Key::Settle), Some(0.0));
    assert_eq!(p.value(Key::Stage), None);
    assert_eq!(p.sigma(), None);
    assert_eq!(p.handling().0, 0.0);

    let errors = Profile::from_numbers("command line", Kind::Shaped, [])
        .unwrap_err()
        .0;
    let missing: Vec<_> = errors
        .iter()
        .map(|e| match e {
            ProfileError::Missing { key, .. } => *key,
            other => panic!("{other}"),
        })
        .collect();
    assert_eq!(missing, ["current_a_cm2", "base_dose_uc_cm2"]);
}

#[test]
fn keys_are_told_apart_by_name_and_lie_within_their_bounds() {
    let mut names: Vec<_> = Key::ALL.iter().map(|k| k.info().name).collect();
    names.sort_unstable();
    names.dedup();
    assert_eq!(names.len(), Key::ALL.len());
    for &key in Key::ALL {
        let info = key.info();
        assert_eq!(Key::named(info.name), Some(key));
        assert!(info.least < info.greatest, "{key}");
        if let shotwright::profile::Need::Default(value) = info.need {
            assert!((info.least..=info.greatest).contains(&value), "{key}");
        }
    }
}
