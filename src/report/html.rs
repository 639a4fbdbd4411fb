//! `report.html`: the quote as one page, with its pictures beside it and links to its files.

use crate::number::given;
use crate::quote::result::{Method, Quote};

use super::table::significant;
use super::text::{TextOptions, found, text};

/// A file beside the page.
#[derive(Clone, Copy, Debug)]
pub struct Beside<'a> {
    /// Its name.
    pub name: &'a str,
    /// What it holds, in words.
    pub about: &'a str,
}

const STYLE: &str = "body{font:16px/1.45 sans-serif;max-width:76em;margin:2em auto;padding:0 1em;color:#111}\
pre{font:14px/1.35 monospace;overflow-x:auto;background:#f5f5f5;padding:1em}\
img{max-width:100%;border:1px solid #ccc}table{border-collapse:collapse}\
td,th{padding:.25em .8em;text-align:left;border-bottom:1px solid #ddd;vertical-align:top}.n{white-space:nowrap}\
.verdict{font-size:1.25em;font-weight:bold}";

/// The whole page. `pictures` are shown, `files` linked; both stand beside the page. No script, nothing from elsewhere.
#[must_use]
pub fn page(quote: &Quote, pictures: &[Beside<'_>], files: &[Beside<'_>], most: usize) -> String {
    let names: Vec<&str> = quote.sources.iter().map(|s| s.name.as_str()).collect();
    let title = escaped(&format!("Quote of {}", names.join(", ")));
    let options = TextOptions {
        flags: 0,
        ..TextOptions::default()
    };
    let mut out = format!(
        "<!doctype html>\n<html lang=\"en\"><head><meta charset=\"utf-8\"><meta name=\"viewport\" content=\"width=device-width,initial-scale=1\"><title>{title}</title><style>{STYLE}</style></head><body>\n\
         <h1>{title}</h1>\n<p class=\"verdict\">{}</p>\n<p>Recommended: {}. {}</p>\n<p><em>{}</em></p>\n<pre>{}</pre>\n",
        escaped(&quote.verdict.sentence),
        quote.recommended.map_or("none", Method::name),
        escaped(&quote.reason),
        escaped(&quote.caution),
        escaped(&text(quote, options)),
    );
    out += &sensitivity(quote);
    out += &flags(quote, most);
    for picture in pictures {
        let (name, about) = (escaped(picture.name), escaped(picture.about));
        out += &format!("<h2>{about}</h2>\n<p><img src=\"{name}\" alt=\"{about}\"></p>\n");
    }
    out += "<h2>Files</h2>\n<table>\n";
    for file in files {
        let (name, about) = (escaped(file.name), escaped(file.about));
        out += &format!("<tr><td><a href=\"{name}\">{name}</a></td><td>{about}</td></tr>\n");
    }
    out += "</table>\n</body></html>\n";
    out
}

fn sensitivity(quote: &Quote) -> String {
    let mut out = String::from(
        "<h2>What moves the total</h2>\n<p>Each number alone 10 % less and 10 % more (a count one less and one more); hours of \
         the fracture to order.</p>\n<table>\n<tr><th>number</th><th>value</th><th>at less, h</th><th>at more, h</th></tr>\n",
    );
    for s in &quote.sensitivity {
        out += &format!(
            "<tr><td>{}</td><td>{}</td><td>{}</td><td>{}</td></tr>\n",
            escaped(&s.key),
            given(s.value),
            significant(s.at_lower_h),
            significant(s.at_upper_h)
        );
    }
    out + "</table>\n"
}

fn flags(quote: &Quote, most: usize) -> String {
    let flags = &quote.flags;
    if flags.is_empty() {
        return "<h2>Flags</h2>\n<p>No figure is flagged.</p>\n".to_owned();
    }
    let mut out = format!(
        "<h2>Flags</h2>\n<p>{} in all.</p>\n<table>\n<tr><th></th><th>figure</th><th>at, nm</th><th>what</th><th>remedy</th></tr>\n",
        flags.len()
    );
    for (number, flag) in (1..).zip(flags).take(most) {
        let what = found(flag).map_or_else(String::new, |found| format!(": {found}"));
        let figure = if quote.sources.len() > 1 {
            format!("clip {}, {}", flag.clip, flag.figure)
        } else {
            flag.figure.to_string()
        };
        let figure = flag.picture.as_ref().map_or_else(
            || figure.clone(),
            |name| format!("<a href=\"{}\">{figure}</a>", escaped(name)),
        );
        out += &format!(
            "<tr><td>{number}</td><td class=\"n\">{figure}</td><td class=\"n\">({}, {})</td><td>{}</td><td>{}</td></tr>\n",
            crate::number::trimmed(flag.place_nm[0]),
            crate::number::trimmed(flag.place_nm[1]),
            escaped(&format!("{}{what}", flag.kind.name().replace('_', " "))),
            escaped(&flag.remedy)
        );
    }
    out + "</table>\n"
}

/// Text that cannot become markup, whatever a layout or file is called.
fn escaped(text: &str) -> String {
    let mut out = String::with_capacity(text.len());
    for c in text.chars() {
        match c {
            '&' => out += "&amp;",
            '<' => out += "&lt;",
            '>' => out += "&gt;",
            '"' => out += "&quot;",
            '\'' => out += "&#39;",
            c => out.push(c),
        }
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_cannot_become_markup() {
        let text = escaped("<script>alert(\"a\" & 'b')</script>.oas");
        assert_eq!(
            text,
            "&lt;script&gt;alert(&quot;a&quot; &amp; &#39;b&#39;)&lt;/script&gt;.oas"
        );
    }
}
