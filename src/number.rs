//! Numbers as people read them: one way for tables, sentences and pictures.

/// Shown where nothing was measured.
pub const UNMEASURED: &str = "–";
/// Space between digits of a group: thin, so that it reads as one number and never breaks.
pub const GROUP: char = '\u{202f}';

/// Digits in groups of three: `1 412`.
#[must_use]
pub fn grouped(count: u128) -> String {
    let digits = count.to_string();
    let mut out = String::with_capacity(digits.len() * 2);
    for (i, digit) in digits.chars().enumerate() {
        if i > 0 && (digits.len() - i).is_multiple_of(3) {
            out.push(GROUP);
        }
        out.push(digit);
    }
    out
}

/// Three significant digits, more only for whole numbers: `0.0412`, `3.08`, `41.5`, `412`, `1 412`; tiny as `4.1e-6`.
#[must_use]
pub fn significant(x: f64) -> String {
    let size = x.abs();
    if !x.is_finite() {
        UNMEASURED.to_owned()
    } else if size == 0.0 {
        "0".to_owned()
    } else if size < 0.000_995 {
        format!("{x:.1e}")
    } else if size >= 999.5 {
        whole(x)
    } else {
        let decimals = [
            (99.95, 0),
            (9.995, 1),
            (0.9995, 2),
            (0.09995, 3),
            (0.009_995, 4),
        ]
        .iter()
        .find(|(from, _)| size >= *from)
        .map_or(5, |(_, d)| *d);
        format!("{x:.decimals$}")
    }
}

/// As [`significant`], for sentences: what is whole is written so, `24` and not `24.0`.
#[must_use]
pub fn brief(x: f64) -> String {
    if x == x.trunc() && x.is_finite() {
        whole(x)
    } else {
        significant(x)
    }
}

/// Rounded to a whole number, in groups.
fn whole(x: f64) -> String {
    let digits = format!("{:.0}", x.abs());
    let text = digits.parse().map_or(digits, grouped);
    if x < 0.0 { format!("-{text}") } else { text }
}

/// To the thousandth, without trailing zeros.
#[must_use]
pub fn trimmed(x: f64) -> String {
    let text = format!("{x:.3}");
    text.trim_end_matches('0').trim_end_matches('.').to_owned()
}

/// A value that was given, as it was given: `1.5`, `2`, `400`; what is finer than a thousandth is rounded to three digits.
#[must_use]
pub fn given(x: f64) -> String {
    let text = trimmed(x);
    let same = text.parse() == Ok(x) && x.abs() < 1000.0;
    if same { text } else { brief(x) }
}

/// A length in the unit that suits it: `1.2 µm`.
#[must_use]
pub fn length(nm: f64) -> String {
    let (unit, name) = length_unit(nm);
    format!("{} {name}", trimmed(nm / unit))
}

/// The unit (nm, and its name) that suits a length.
#[must_use]
pub fn length_unit(nm: f64) -> (f64, &'static str) {
    match nm {
        1e6.. => (1e6, "mm"),
        1e3.. => (1e3, "µm"),
        _ => (1.0, "nm"),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn what_was_given_is_shown_so() {
        for (x, shown) in [
            (1.5, "1.5"),
            (2.0, "2"),
            (0.125, "0.125"),
            (40.0 / 3.0, "13.3"),
            (-0.5, "-0.5"),
            (0.000_4, "4.0e-4"),
            (10_000.0, "10\u{202f}000"),
        ] {
            assert_eq!(given(x), shown);
        }
    }

    #[test]
    fn sentences_and_tables_group_alike() {
        for (x, table, sentence) in [
            (1949.0, "1\u{202f}949", "1\u{202f}949"),
            (
                -1_234_567.0,
                "-1\u{202f}234\u{202f}567",
                "-1\u{202f}234\u{202f}567",
            ),
            (24.0, "24.0", "24"),
            (19.27, "19.3", "19.3"),
            (0.000_041_2, "4.1e-5", "4.1e-5"),
            (0.0, "0", "0"),
        ] {
            assert_eq!(
                (significant(x), brief(x)),
                (table.to_owned(), sentence.to_owned())
            );
        }
    }
}
