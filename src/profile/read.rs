//! TOML text → [`Profile`], every fault with its line.

use std::collections::BTreeMap;

use toml::Spanned;
use toml::de::{DeString, DeTable, DeValue};

use super::{ALPHA, Backscatter, Key, Kind, Number, Profile, ProfileError, ProfileErrors};

/// Reads and checks a whole profile.
pub(super) fn profile(text: &str, source: &str) -> Result<Profile, ProfileErrors> {
    read(text, source, |reader| {
        let root = reader.root()?;
        reader.profile(&root)
    })
}

/// Reads and checks a table of a text.
pub(super) fn profile_within(
    text: &str,
    source: &str,
    table: &'static str,
) -> Result<Profile, ProfileErrors> {
    read(text, source, |reader| {
        let root = reader.root()?;
        let table = reader.table(&root, table)?;
        reader.profile(table.get())
    })
}

/// The numbers in a table of a text, their keys and bounds not looked at, each with its place.
pub(super) fn numbers_within(
    text: &str,
    source: &str,
    table: &str,
) -> Result<Vec<(String, Number, String)>, ProfileErrors> {
    read(text, source, |reader| {
        let root = reader.root()?;
        let mut numbers = Vec::new();
        let Some(value) = root.get(table) else {
            return Some(numbers);
        };
        let Some(inner) = value.get_ref().as_table() else {
            reader.wrong(table, value, &format!("a table [{table}]"));
            return None;
        };
        for (name, value) in inner {
            let key: &str = name.get_ref();
            if let Some(number) = reader.number(key, value) {
                let place = reader.place(value.span().start);
                numbers.push((key.to_owned(), number, place));
            }
        }
        Some(numbers)
    })
}

fn read<T>(
    text: &str,
    source: &str,
    profile: impl FnOnce(&mut Reader<'_>) -> Option<T>,
) -> Result<T, ProfileErrors> {
    let mut reader = Reader {
        text,
        source,
        errors: Vec::new(),
    };
    match profile(&mut reader) {
        Some(profile) if reader.errors.is_empty() => Ok(profile),
        _ => {
            reader.errors.sort_by_key(|(at, _)| *at);
            Err(ProfileErrors(
                reader.errors.into_iter().map(|(_, e)| e).collect(),
            ))
        }
    }
}

type Value<'t> = Spanned<DeValue<'t>>;
type Name<'t> = Spanned<DeString<'t>>;

struct Reader<'t> {
    text: &'t str,
    source: &'t str,
    /// Each with the byte where it stands.
    errors: Vec<(usize, ProfileError)>,
}

const NUMBER_FORM: &str = "a number or { value = …, plus_minus = … }";

impl<'t> Reader<'t> {
    fn root(&mut self) -> Option<DeTable<'t>> {
        match DeTable::parse(self.text) {
            Ok(root) => Some(root.into_inner()),
            Err(error) => {
                let at = error.span().map_or(0, |span| span.start);
                let fault = ProfileError::Syntax {
                    place: self.place(at),
                    message: error.message().to_owned(),
                };
                self.errors.push((at, fault));
                None
            }
        }
    }

    fn profile(&mut self, root: &DeTable<'_>) -> Option<Profile> {
        self.only(root, &["name", "about", "writer", "process"]);
        let name = self.words(root, "name");
        let about = self.words(root, "about");
        let (writer, process) = (self.table(root, "writer"), self.table(root, "process"));
        let (writer, process) = (writer?, process?);
        let mut profile = Profile {
            name: name.unwrap_or_else(|| self.source.to_owned()),
            about: about.unwrap_or_default(),
            kind: self.kind(writer)?,
            numbers: BTreeMap::new(),
            backscatter: Vec::new(),
        };
        self.numbers(&mut profile, writer, "writer", "kind");
        self.numbers(&mut profile, process, "process", "backscatter");
        if let Some(terms) = process.get().get("backscatter") {
            profile.backscatter = self.backscatter(terms);
        }
        self.one_blur(process);
        // What is missing or contradicts says little while values were refused.
        if self.errors.is_empty() {
            let at = |key: Key| {
                let section = match key.info().section.name() {
                    "writer" => writer,
                    _ => process,
                };
                name_of(section.get(), key.info().name).map_or(section.at(), |n| n.span().start)
            };
            let faults = profile.faults(&|key| self.place(at(key)));
            self.errors.extend(
                faults
                    .into_iter()
                    .map(|(key, fault)| (at(key), fault))
                    .collect::<Vec<_>>(),
            );
        }
        Some(profile)
    }

    fn kind(&mut self, writer: Section<'_, '_>) -> Option<Kind> {
        let expected = "\"shaped\" or \"raster\"";
        let Some(value) = writer.get().get("kind") else {
            let fault = ProfileError::Missing {
                place: self.place(writer.at()),
                key: "kind",
                section: "[writer]",
                expected: expected.to_owned(),
            };
            self.errors.push((writer.at(), fault));
            return None;
        };
        let kind = [Kind::Shaped, Kind::Raster]
            .into_iter()
            .find(|kind| value.get_ref().as_str() == Some(kind.name()));
        if kind.is_none() {
            self.wrong("kind", value, expected);
        }
        kind
    }

    /// Takes over all numbers of one table; `other` is its key that is none.
    fn numbers(
        &mut self,
        profile: &mut Profile,
        section: Section<'_, '_>,
        table: &str,
        other: &str,
    ) {
        for (name, value) in section.get() {
            let key: &str = name.get_ref();
            if key == other {
                continue;
            }
            let at = name.span().start;
            let elsewhere = Key::named(key).is_some_and(|k| k.info().section.name() != table)
                || (key == ALPHA && table != "process");
            if elsewhere {
                let there = if table == "writer" {
                    "process"
                } else {
                    "writer"
                };
                self.unknown(name, &format!("it in [{there}]"));
            } else if !(key == ALPHA || Key::named(key).is_some()) {
                let fault = profile.unknown(key, &self.place(at));
                self.errors.push((at, fault));
            } else if let Some(number) = self.number(key, value) {
                let place = self.place(value.span().start);
                if let Err(fault) = profile.insert(key, number, &place) {
                    self.errors.push((at, fault));
                }
            }
        }
    }

    /// A number in either form; its bounds are not looked at.
    fn number(&mut self, key: &str, value: &Value<'_>) -> Option<Number> {
        if let DeValue::Table(parts) = value.get_ref() {
            self.only(parts, &["value", "plus_minus"]);
            let mut part = |name: &str| match parts.get(name) {
                Some(part) => self.plain(&format!("{key}.{name}"), part),
                None => {
                    self.wrong(key, value, NUMBER_FORM);
                    None
                }
            };
            let (value, plus_minus) = (part("value"), part("plus_minus"));
            return Some(Number {
                value: value?,
                plus_minus: plus_minus?,
            });
        }
        self.plain(key, value).map(Number::from)
    }

    fn plain(&mut self, key: &str, value: &Value<'_>) -> Option<f64> {
        let number = match value.get_ref() {
            #[allow(
                clippy::cast_precision_loss,
                reason = "bounds of all keys are below 2^53"
            )]
            DeValue::Integer(i) => i64::from_str_radix(i.as_str(), i.radix())
                .ok()
                .map(|i| i as f64),
            DeValue::Float(f) => f.as_str().parse().ok(),
            _ => None,
        };
        if number.is_none() {
            self.wrong(key, value, NUMBER_FORM);
        }
        number
    }

    fn backscatter(&mut self, terms: &Value<'_>) -> Vec<Backscatter> {
        let form = "a list of { eta = …, beta_nm = … }";
        let Some(list) = terms.get_ref().as_array() else {
            self.wrong("backscatter", terms, form);
            return Vec::new();
        };
        let mut read = Vec::new();
        for term in list {
            let Some(parts) = term.get_ref().as_table() else {
                self.wrong("backscatter", term, form);
                continue;
            };
            self.only(parts, &["eta", "beta_nm"]);
            let eta = self.term_number(parts, term, "eta", 10.0);
            let beta_nm = self.term_number(parts, term, "beta_nm", 1e6);
            if let (Some(eta), Some(beta_nm)) = (eta, beta_nm) {
                read.push(Backscatter { eta, beta_nm });
            }
        }
        read
    }

    /// A number of a backscatter term: over 0, up to `greatest`.
    fn term_number(
        &mut self,
        parts: &DeTable<'_>,
        term: &Value<'_>,
        name: &str,
        greatest: f64,
    ) -> Option<Number> {
        let key = format!("backscatter.{name}");
        let Some(value) = parts.get(name) else {
            self.wrong("backscatter", term, "{ eta = …, beta_nm = … }");
            return None;
        };
        let number = self.number(&key, value)?;
        let holds = number.plus_minus >= 0.0
            && number.value - number.plus_minus > 0.0
            && number.value + number.plus_minus <= greatest;
        if !holds {
            self.wrong(&key, value, &format!("a number over 0, up to {greatest}"));
        }
        holds.then_some(number)
    }

    /// σ and α state the same thing.
    fn one_blur(&mut self, process: Section<'_, '_>) {
        let sigma = Key::Sigma.info().name;
        if let Some(alpha) = name_of(process.get(), ALPHA)
            && let Some(stated) = process.get().get(sigma)
        {
            let at = alpha.span().start;
            let fault = ProfileError::Contradiction {
                place: self.place(at),
                key: ALPHA,
                found: self.snippet(process.get().get(ALPHA).unwrap_or(stated)),
                other: format!("`{sigma}` {}: state one of the two", self.snippet(stated)),
            };
            self.errors.push((at, fault));
        }
    }

    fn words(&mut self, root: &DeTable<'_>, name: &str) -> Option<String> {
        let value = root.get(name)?;
        let words = value.get_ref().as_str().map(str::to_owned);
        if words.is_none() {
            self.wrong(name, value, "a text in quotes");
        }
        words
    }

    fn table<'r, 'd>(
        &mut self,
        root: &'r DeTable<'d>,
        name: &'static str,
    ) -> Option<Section<'r, 'd>> {
        let Some(value) = root.get(name) else {
            let fault = ProfileError::Missing {
                place: self.place(self.text.len()),
                key: name,
                section: "the file",
                expected: format!("a table [{name}]"),
            };
            self.errors.push((self.text.len(), fault));
            return None;
        };
        if !value.get_ref().is_table() {
            self.wrong(name, value, &format!("a table [{name}]"));
        }
        let header = name_of(root, name)?;
        Some(Section {
            header,
            table: value.get_ref().as_table()?,
        })
    }

    fn only(&mut self, table: &DeTable<'_>, known: &[&str]) {
        for name in table.keys() {
            if !known.contains(&name.get_ref().as_ref()) {
                self.unknown(name, &format!("one of {}", known.join(", ")));
            }
        }
    }

    fn unknown(&mut self, name: &Name<'_>, expected: &str) {
        let at = name.span().start;
        let fault = ProfileError::UnknownKey {
            place: self.place(at),
            key: name.get_ref().to_string(),
            expected: expected.to_owned(),
        };
        self.errors.push((at, fault));
    }

    fn wrong(&mut self, key: &str, value: &Value<'_>, expected: &str) {
        let at = value.span().start;
        let fault = ProfileError::Value {
            place: self.place(at),
            key: key.to_owned(),
            found: self.snippet(value),
            expected: expected.to_owned(),
        };
        self.errors.push((at, fault));
    }

    /// The value as it stands in the file.
    fn snippet(&self, value: &Value<'_>) -> String {
        self.text.get(value.span()).unwrap_or_default().to_owned()
    }

    fn place(&self, at: usize) -> String {
        let before = &self.text.as_bytes()[..at.min(self.text.len())];
        let line = 1 + before.iter().filter(|&&b| b == b'\n').count();
        format!("{}:{line}", self.source)
    }
}

/// A table with its header.
#[derive(Clone, Copy)]
struct Section<'r, 't> {
    header: &'r Name<'t>,
    table: &'r DeTable<'t>,
}

impl<'r, 't> Section<'r, 't> {
    fn get(self) -> &'r DeTable<'t> {
        self.table
    }

    fn at(self) -> usize {
        self.header.span().start
    }
}

/// A key of a table as it stands in the file.
fn name_of<'r, 't>(table: &'r DeTable<'t>, key: &str) -> Option<&'r Name<'t>> {
    table.keys().find(|name| name.get_ref() == key)
}
