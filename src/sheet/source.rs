//! The sheet's file as sections of located texts: TOML and nothing else; no formula is read here.

use super::fault::{Faults, NOT_TOML, nearest};
use crate::formula::syntax::{self, Kind};
use std::ops::Range;
use toml::Spanned;
use toml::de::{DeTable, DeValue};

mod cases;
mod eigen;
mod measured;
mod path;

pub(super) use cases::Changes;
pub(super) use eigen::{EigenSection, Wish};
pub(super) use measured::{Measured, Rows, files};

/// Largest sheet, in bytes.
pub const MOST_BYTES: usize = 1_000_000;

/// A text of the sheet and where each byte of it stands.
#[derive(Debug, Clone, Default, PartialEq)]
pub(super) struct Located {
    pub text: String,
    /// Bytes of the sheet that hold it, quotes included.
    pub span: Range<usize>,
    /// Place in the sheet of each byte of `text`, and of its end.
    origin: Vec<usize>,
}

impl Located {
    fn new(sheet: &str, span: Range<usize>, text: &str) -> Self {
        let raw = sheet.get(span.clone()).unwrap_or("");
        Self { origin: origins(raw, span.start, text), text: text.to_owned(), span }
    }

    /// A text that is written without quotes: a number, a key.
    fn bare(span: Range<usize>, text: String) -> Self {
        let origin = (0..=text.len()).map(|k| (span.start + k).min(span.end)).collect();
        Self { text, span, origin }
    }

    /// A text that does not stand in the sheet, in place of what stands at `span`.
    pub fn elsewhere(span: Range<usize>, text: &str) -> Self {
        Self { origin: vec![span.start; text.len() + 1], text: text.to_owned(), span }
    }

    /// A part of a text.
    pub fn part(whole: &Located, part: Range<usize>) -> Self {
        let origin = whole.origin.get(part.start..=part.end).unwrap_or(&[]).to_vec();
        let span = whole.place(&part);
        Self { text: whole.text.get(part).unwrap_or("").to_owned(), span, origin }
    }

    /// Bytes of the sheet behind bytes of the text.
    pub fn place(&self, inside: &Range<usize>) -> Range<usize> {
        let at = |k: usize| self.origin.get(k).copied().unwrap_or(self.span.end);
        let (start, end) = (at(inside.start), at(inside.end));
        start..end.max(start)
    }
}

/// Where each byte of a decoded TOML string comes from.
fn origins(raw: &str, start: usize, text: &str) -> Vec<usize> {
    let long = ["\"\"\"", "'''"].into_iter().find(|q| raw.starts_with(q));
    let literal = raw.starts_with('\'');
    let quoted = literal || raw.starts_with('"');
    let mut at = if long.is_some() { 3 } else { usize::from(quoted) };
    if long.is_some() {
        let rest = &raw[at..];
        at += if rest.starts_with("\r\n") { 2 } else { usize::from(rest.starts_with('\n')) };
    }
    let mut origin = Vec::with_capacity(text.len() + 1);
    for c in text.chars() {
        let rest = raw.get(at..).unwrap_or("");
        let mut length = rest.chars().next().map_or(0, char::len_utf8);
        if !literal && quoted && rest.starts_with('\\') {
            // A backslash at the end of a line swallows the white space behind it.
            let after = &rest[1..];
            if long.is_some() && after.trim_start_matches([' ', '\t', '\r']).starts_with('\n') {
                at += 1 + after.len() - after.trim_start().len();
                length = raw.get(at..).and_then(|r| r.chars().next()).map_or(0, char::len_utf8);
            } else {
                length = match after.chars().next() {
                    Some('u') => 6,
                    Some('U') => 10,
                    Some('x') => 4,
                    _ => 2,
                };
            }
        }
        origin.extend(std::iter::repeat_n(start + at, c.len_utf8()));
        at += length;
    }
    origin.push(start + at);
    origin
}

/// A value of `[given]`.
#[derive(Debug, Clone, PartialEq)]
pub(super) enum Given {
    Formula(Located),
    /// Stretches "from .. to" with their values, and the rest.
    Pieces {
        pieces: Vec<(Located, Located)>,
        otherwise: Option<Located>,
    },
    Measured(Measured),
}

/// A named entry.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Entry<T> {
    pub name: String,
    pub name_span: Range<usize>,
    pub value: T,
}

/// An unknown as declared.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Declared {
    pub unit: Located,
    pub constant: bool,
    pub guess: Option<Located>,
    pub above: Option<Located>,
    pub below: Option<Located>,
}

/// The sections of a sheet.
#[derive(Debug, Clone, Default)]
pub(super) struct Source {
    pub title: String,
    pub note: Option<String>,
    pub given: Vec<Entry<Given>>,
    pub coordinate: Option<Entry<[Located; 2]>>,
    pub breaks: Vec<Located>,
    pub smooth: Vec<Located>,
    pub unknowns: Vec<Entry<Declared>>,
    pub equations: Vec<Entry<Located>>,
    pub conditions: Vec<Entry<Vec<Located>>>,
    pub report: Vec<Entry<Located>>,
    pub relative: Option<(f64, Range<usize>)>,
    /// A parameter to follow.
    pub path: Option<path::Follow>,
    /// The eigenproblem.
    pub eigen: Option<EigenSection>,
    /// Load cases: data changed in each.
    pub cases: Vec<Entry<Changes>>,
    /// Names whose entry is at fault: they are declared all the same.
    pub faulty: Vec<(String, Range<usize>)>,
}

impl Source {
    /// Whether an end of the span is infinite.
    pub fn infinite(&self) -> bool {
        self.infinite_ends().contains(&true)
    }

    /// Which ends are.
    pub fn infinite_ends(&self) -> [bool; 2] {
        let infinite = |end: &Located| end.text.trim().trim_start_matches('-').trim() == "inf";
        self.coordinate.as_ref().map_or([false; 2], |c| [infinite(&c.value[0]), infinite(&c.value[1])])
    }

    /// Where infinite ends are cut at first: ten times the unit or the size of a finite end.
    pub fn first_cut(&self) -> f64 {
        let ends = self.coordinate.iter().flat_map(|c| &c.value);
        let size = ends.into_iter().filter_map(|end| match syntax::parse(&end.text).ok()?.kind {
            Kind::Number { value, unit, .. } => {
                let scale = unit.as_ref().map_or(1.0, |unit| unit.difference_from_si(1.0).recip());
                Some(scale.abs() * value.abs().max(1.0))
            }
            _ => None,
        });
        10.0 * size.fold(None, |s: Option<f64>, v| Some(s.map_or(v, |s| s.max(v)))).unwrap_or(1.0)
    }

    /// Puts other formulas in place of data.
    pub fn replace(&mut self, replaced: &[(&str, &str)], faults: &mut Faults) {
        for (name, text) in replaced {
            match self.given.iter_mut().find(|entry| entry.name == *name) {
                Some(entry) => entry.value = Given::Formula(Located::elsewhere(entry.name_span.clone(), text)),
                None => {
                    let message = format!("`{name}` is not among the data of this sheet");
                    faults.add("held", 0..0, message, Some("only names of [given] can be replaced".into()));
                }
            }
        }
    }
}

const SECTIONS: [&str; 8] = ["title", "note", "given", "span", "unknowns", "equations", "conditions", "report"];

/// Sections that belong to parts of the contract that are not built yet.
const LATER: [(&str, &str); 3] =
    [("solutions", "a search for several solutions"), ("sweep", "sweeps over data"), ("complex", "complex sheets")];

type Table<'i> = DeTable<'i>;
type Value<'i> = Spanned<DeValue<'i>>;

/// Reads the file's structure. Faults are noted; what could be read is returned all the same.
pub(super) fn read(sheet: &str, faults: &mut Faults) -> Source {
    let mut source = Source::default();
    let (table, errors) = Table::parse_recoverable(sheet);
    for error in errors {
        let span = error.span().unwrap_or(0..0);
        let typographic =
            sheet.get(span.clone()).is_some_and(|text| text.contains(['“', '”', '„', '‘', '’', '«', '»']));
        let hint = if typographic { "write straight quotes: \"" } else { TOML_HINT };
        faults.add(NOT_TOML, span, format!("not TOML: {}", error.message()), Some(hint.into()));
    }
    let mut reader = Reader { sheet, faults };
    for (key, value) in table.get_ref() {
        reader.section(&mut source, key.as_ref(), key.span(), value);
    }
    reader.check_cases(&source);
    for (name, missing) in [
        ("span", source.coordinate.is_none()),
        ("unknowns", source.unknowns.is_empty() && source.faulty.is_empty()),
        ("equations", source.equations.is_empty()),
        ("report", source.report.is_empty() && table.get_ref().iter().all(|(k, _)| k.as_ref().as_ref() != "eigen")),
    ] {
        let place = table.get_ref().iter().find(|(k, _)| k.as_ref().as_ref() == name).map(|(k, _)| k.span());
        let written = place.is_some();
        if missing && reader.faults.is_empty() {
            let message =
                if written { format!("[{name}] is empty") } else { format!("the sheet has no section [{name}]") };
            let hint = match name {
                "span" => "name the coordinate and its ends: x = [\"0 m\", \"L\"]",
                "unknowns" => "declare what is sought and its unit: y = \"mm\"",
                "equations" => "write one equation per unknown function: balance = \"M'' = q\"",
                _ => "ask for at least one number: \"tip deflection\" = \"y(L) in mm\"",
            };
            reader.faults.add("empty section", place.unwrap_or(0..0), message, Some(hint.into()));
        }
    }
    source
}

const TOML_HINT: &str = "a sheet is TOML: sections in [brackets], name = \"text in quotes\"";

struct Reader<'s, 'f> {
    sheet: &'s str,
    faults: &'f mut Faults,
}

impl Reader<'_, '_> {
    fn section(&mut self, source: &mut Source, key: &str, span: Range<usize>, value: &Value<'_>) {
        if let Some((_, what)) = LATER.iter().find(|(name, _)| *name == key) {
            if key == "complex" && matches!(value.get_ref(), DeValue::Boolean(false)) {
                return;
            }
            let message = format!("`{key}`: {what} are not part of this version");
            let message = message.replace("a search for several solutions are", "a search for several solutions is");
            self.faults.add("not yet", span, message, None);
            return;
        }
        match key {
            "title" => source.title = self.text(value).map(|l| l.text).unwrap_or_default(),
            "note" => source.note = self.text(value).map(|l| l.text),
            "given" => self.each(value, |r, entry, value| match r.given(entry.clone(), value) {
                Some(given) => source.given.push(given),
                None => source.faulty.push(entry),
            }),
            "span" => self.each(value, |r, entry, value| r.span(source, entry, value)),
            "unknowns" => self.each(value, |r, entry, value| match r.unknown(entry.clone(), value) {
                Some(unknown) => source.unknowns.push(unknown),
                None => source.faulty.push(entry),
            }),
            "equations" => self.each(value, |r, entry, value| source.equations.extend(r.formula(entry, value))),
            "report" => self.each(value, |r, entry, value| source.report.extend(r.formula(entry, value))),
            "conditions" => self.each(value, |r, (name, name_span), value| {
                let value = match value.get_ref() {
                    DeValue::Array(list) => list.iter().filter_map(|v| r.text(v)).collect(),
                    _ => r.text(value).into_iter().collect(),
                };
                source.conditions.push(Entry { name, name_span, value });
            }),
            "path" => self.path(source, span, value),
            "eigen" => self.eigen(source, span, value),
            "cases" => self.each(value, |r, entry, value| r.case(source, entry, value)),
            "accuracy" => self.each(value, |r, entry, value| r.accuracy(source, entry, value)),
            _ => {
                let known = SECTIONS.into_iter().chain(["accuracy", "cases", "path", "eigen"]);
                let hint = nearest(key, known).map(|k| format!("did you mean `{k}`?")).unwrap_or_else(|| {
                    "the sections are given, span, unknowns, equations, conditions, report, accuracy".into()
                });
                self.faults.add("unknown key", span, format!("`{key}` is not a key of a sheet"), Some(hint));
            }
        }
    }

    /// Calls `take` for each entry of a table.
    fn each(&mut self, value: &Value<'_>, mut take: impl FnMut(&mut Self, (String, Range<usize>), &Value<'_>)) {
        match value.get_ref() {
            DeValue::Table(table) => {
                for (key, value) in table {
                    take(self, (key.as_ref().to_string(), key.span()), value);
                }
            }
            _ => self.wrong(value, "a section is a table: [name] on a line of its own"),
        }
    }

    fn wrong(&mut self, value: &Value<'_>, hint: &str) {
        let what = match value.get_ref() {
            DeValue::String(_) => "a text",
            DeValue::Integer(_) | DeValue::Float(_) => "a number",
            DeValue::Boolean(_) => "true or false",
            DeValue::Datetime(_) => "a date",
            DeValue::Array(_) => "a list",
            DeValue::Table(table) if table.is_empty() => "an empty table",
            DeValue::Table(_) => "a table",
        };
        self.faults.add("wrong kind", value.span(), format!("{what} cannot stand here"), Some(hint.into()));
    }

    /// A text or a number, as a formula.
    fn text(&mut self, value: &Value<'_>) -> Option<Located> {
        match value.get_ref() {
            DeValue::String(text) => Some(Located::new(self.sheet, value.span(), text)),
            DeValue::Integer(n) => Some(Located::bare(value.span(), n.as_str().to_owned())),
            DeValue::Float(f) => {
                let text = f.as_str().to_owned();
                if text.contains("nan") {
                    self.faults.add("not finite", value.span(), "nan is not a number to calculate with", None);
                    return None;
                }
                Some(Located::bare(value.span(), text))
            }
            _ => {
                self.wrong(value, "write a formula in quotes, or a number");
                None
            }
        }
    }

    fn formula(&mut self, (name, name_span): (String, Range<usize>), value: &Value<'_>) -> Option<Entry<Located>> {
        self.text(value).map(|value| Entry { name, name_span, value })
    }

    fn given(&mut self, (name, name_span): (String, Range<usize>), value: &Value<'_>) -> Option<Entry<Given>> {
        let DeValue::Table(table) = value.get_ref() else {
            return self.text(value).map(|f| Entry { name, name_span, value: Given::Formula(f) });
        };
        if table.iter().any(|(k, _)| matches!(k.as_ref().as_ref(), "against" | "points" | "file" | "through")) {
            let measured = self.measured(&name, value.span(), table)?;
            return Some(Entry { name, name_span, value: Given::Measured(measured) });
        }
        if table.is_empty() {
            self.wrong(value, "write \"value\", or pieces: { \"0 m .. 1.4 m\" = \"value\", else = \"value\" }");
            return None;
        }
        let (mut pieces, mut otherwise) = (Vec::new(), None);
        for (key, value) in table {
            let text: &str = key.as_ref();
            if text == "else" {
                otherwise = self.text(value);
            } else if text.contains("..") {
                let located = Located::new(self.sheet, key.span(), text);
                pieces.extend(self.text(value).map(|value| (located, value)));
            } else {
                let hint = "pieces are written \"0 m .. 1.4 m\" = \"value\", and else = \"value\"";
                self.faults.add(
                    "unknown key",
                    key.span(),
                    format!("`{text}` is not a stretch of the span"),
                    Some(hint.into()),
                );
            }
        }
        Some(Entry { name, name_span, value: Given::Pieces { pieces, otherwise } })
    }

    fn span(&mut self, source: &mut Source, (name, name_span): (String, Range<usize>), value: &Value<'_>) {
        match name.as_str() {
            "breaks" | "smooth" => {
                let list: Vec<Located> = match value.get_ref() {
                    DeValue::Array(list) => list.iter().filter_map(|v| self.text(v)).collect(),
                    _ => self.text(value).into_iter().collect(),
                };
                if name == "breaks" {
                    source.breaks = list
                } else {
                    source.smooth = list
                }
                return;
            }
            "until" => {
                self.faults.add(
                    "not yet",
                    name_span,
                    "`until`: marching to an event is not part of this version",
                    None,
                );
                return;
            }
            _ => {}
        }
        let ends = match value.get_ref() {
            DeValue::Array(list) if list.len() == 2 => {
                list.iter().filter_map(|v| self.text(v)).collect::<Vec<Located>>().try_into().ok()
            }
            _ => {
                self.wrong(value, "the span is written x = [\"0 m\", \"L\"]");
                None
            }
        };
        let Some(ends) = ends else {
            source.faulty.push((name, name_span));
            return;
        };
        if source.coordinate.is_some() {
            self.faults.add("unknown key", name_span, format!("`{name}`: a sheet has one coordinate"), None);
            return;
        }
        source.coordinate = Some(Entry { name, name_span, value: ends });
    }

    fn unknown(&mut self, (name, name_span): (String, Range<usize>), value: &Value<'_>) -> Option<Entry<Declared>> {
        let DeValue::Table(table) = value.get_ref() else {
            let unit = self.text(value)?;
            let value = Declared { unit, constant: false, guess: None, above: None, below: None };
            return Some(Entry { name, name_span, value });
        };
        let (mut unit, mut constant) = (None, false);
        let (mut guess, mut above, mut below) = (None, None, None);
        for (key, value) in table {
            match (key.as_ref().as_ref(), value.get_ref()) {
                ("unit", _) => unit = self.text(value),
                ("constant", DeValue::Boolean(b)) => constant = *b,
                ("constant", _) => self.wrong(value, "write constant = true"),
                ("guess", _) => guess = self.text(value),
                ("above", _) => above = self.text(value),
                ("below", _) => below = self.text(value),
                (other, _) => {
                    let hint = nearest(other, ["unit", "constant", "guess", "above", "below"]);
                    let hint = hint.map(|k| format!("did you mean `{k}`?"));
                    self.faults.add(
                        "unknown key",
                        key.span(),
                        format!("`{other}` says nothing about an unknown"),
                        hint,
                    );
                }
            }
        }
        let Some(unit) = unit else {
            let hint = Some("write { unit = \"m\" }; the unit of a pure number is \"1\"".into());
            self.faults.add("missing unit", name_span, format!("`{name}` has no unit"), hint);
            return None;
        };
        Some(Entry { name, name_span, value: Declared { unit, constant, guess, above, below } })
    }

    fn accuracy(&mut self, source: &mut Source, (name, name_span): (String, Range<usize>), value: &Value<'_>) {
        if name != "relative" {
            let hint = Some("the accuracy is written relative = 1e-10".into());
            self.faults.add("unknown key", name_span, format!("`{name}` is not an accuracy"), hint);
            return;
        }
        let number = self.text(value).and_then(|l| l.text.replace('_', "").parse::<f64>().ok());
        match number.filter(|n| (1e-14..=1e-2).contains(n)) {
            Some(number) => source.relative = Some((number, value.span())),
            None => {
                let hint = Some("between 1e-14 and 1e-2; 1e-10 where nothing is written".into());
                self.faults.add("accuracy", value.span(), "this accuracy cannot be asked for", hint);
            }
        }
    }
}
