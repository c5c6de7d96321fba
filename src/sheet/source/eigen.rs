//! `[eigen]`: which number is the eigenvalue, and which of them are wanted.

use super::{DeValue, Located, Reader, Source, Value, nearest};
use std::ops::Range;

/// Most eigenvalues that may be asked for.
const MOST_MODES: i64 = 1000;

/// Which eigenvalues are wanted, as written.
#[derive(Debug, Clone)]
pub(in crate::sheet) enum Wish {
    Lowest(usize),
    Between([Located; 2]),
    Near(Located, usize),
    LargestReal(usize),
    LargestImaginary(usize),
    Pairs(usize),
}

/// The section as written.
#[derive(Debug, Clone)]
pub(in crate::sheet) struct EigenSection {
    pub parameter: Located,
    pub unit: Option<Located>,
    pub wish: Wish,
    /// Numbers of the modes to be shown, from 1; all where there are none.
    pub modes: Vec<usize>,
    pub normalise: Option<Located>,
}

const KEYS: [&str; 11] = [
    "parameter",
    "unit",
    "lowest",
    "between",
    "near",
    "count",
    "largest_real",
    "largest",
    "pairs",
    "modes",
    "normalise",
];

const WAYS: &str = "say lowest = 6, between = [\"0\", \"1e4\"], near = \"9.4\" with count = 4, largest_real = 3, \
                    largest = \"im(lambda)\" with count = 4, or pairs = 5";

impl Reader<'_, '_> {
    /// Reads the section; what is wrong with it is noted.
    pub(super) fn eigen(&mut self, source: &mut Source, place: Range<usize>, value: &Value<'_>) {
        let DeValue::Table(table) = value.get_ref() else {
            self.wrong(value, "write [eigen] on a line of its own, parameter = \"lambda\" below it");
            return;
        };
        let before = self.faults.len();
        let (mut parameter, mut unit, mut normalise) = (None, None, None);
        let (mut near, mut largest, mut count) = (None, None, None);
        let mut modes = Vec::new();
        let mut wishes: Vec<Wish> = Vec::new();
        let mut ways: Vec<(String, Range<usize>)> = Vec::new();
        for (key, value) in table {
            let name: &str = key.as_ref();
            if matches!(name, "lowest" | "between" | "near" | "largest_real" | "largest" | "pairs") {
                ways.push((name.to_owned(), key.span()));
            }
            match name {
                "parameter" => parameter = self.text(value),
                "unit" => unit = self.text(value),
                "normalise" => normalise = self.text(value),
                "near" => near = self.text(value),
                "largest" => largest = self.text(value),
                "count" => count = self.whole(value),
                "lowest" => wishes.extend(self.whole(value).map(Wish::Lowest)),
                "largest_real" => wishes.extend(self.whole(value).map(Wish::LargestReal)),
                "pairs" => wishes.extend(self.whole(value).map(Wish::Pairs)),
                "between" => {
                    let ends: Option<[Located; 2]> = match value.get_ref() {
                        DeValue::Array(list) => {
                            list.iter().filter_map(|v| self.text(v)).collect::<Vec<_>>().try_into().ok()
                        }
                        _ => None,
                    };
                    match ends {
                        Some(ends) => wishes.push(Wish::Between(ends)),
                        None => self.wrong(value, "write two limits: between = [\"0\", \"1e4\"]"),
                    }
                }
                "modes" => match value.get_ref() {
                    DeValue::Array(list) => modes = list.iter().filter_map(|v| self.whole(v)).collect(),
                    _ => self.wrong(value, "write a list of numbers: modes = [1, 2, 5]"),
                },
                _ => {
                    let hint =
                        nearest(name, KEYS).map(|k| format!("did you mean `{k}`?")).unwrap_or_else(|| WAYS.into());
                    let message = format!("`{name}` is not an option of [eigen]");
                    self.faults.add("unknown key", key.span(), message, Some(hint));
                }
            }
        }
        if let [(first, _), (second, at), ..] = &ways[..] {
            let message = format!("both `{first}` and `{second}`: eigenvalues are asked for in one way");
            self.faults.add("eigen", at.clone(), message, Some(WAYS.into()));
        }
        let Some(parameter) = parameter else {
            let message = "[eigen] does not say which number is the eigenvalue";
            self.faults.add("eigen", place, message, Some("write parameter = \"lambda\"".into()));
            return;
        };
        if (near.is_some() || largest.is_some()) && count.is_none() && self.faults.len() == before {
            let message = "how many eigenvalues are wanted is not said";
            self.faults.add("eigen", place.clone(), message, Some("add count = 4".into()));
        }
        if let (Some(near), Some(count)) = (near, count) {
            wishes.push(Wish::Near(near, count));
        }
        if let (Some(largest), Some(count)) = (largest, count) {
            let text: String = largest.text.chars().filter(|c| !c.is_whitespace()).collect();
            let of = |function: &str| text == format!("{function}({})", parameter.text.trim());
            if of("im") {
                wishes.push(Wish::LargestImaginary(count));
            } else if of("re") {
                wishes.push(Wish::LargestReal(count));
            } else {
                let hint = format!("write im({0}) or re({0})", parameter.text);
                let message = "eigenvalues cannot be sorted by this formula";
                self.faults.add("eigen", largest.span.clone(), message, Some(hint));
            }
        }
        if self.faults.len() > before {
            return;
        }
        match wishes.pop() {
            Some(wish) => source.eigen = Some(EigenSection { parameter, unit, wish, modes, normalise }),
            None => {
                let message = "[eigen] does not say which eigenvalues are wanted";
                self.faults.add("eigen", place, message, Some(WAYS.into()));
            }
        }
    }

    fn whole(&mut self, value: &Value<'_>) -> Option<usize> {
        let number = match value.get_ref() {
            DeValue::Integer(n) => n.as_str().replace('_', "").parse::<i64>().ok(),
            _ => None,
        };
        match number {
            Some(n @ 1..=MOST_MODES) => usize::try_from(n).ok(),
            _ => {
                let hint = Some(format!("write a whole number from 1 to {MOST_MODES}"));
                self.faults.add("eigen", value.span(), "this cannot be counted", hint);
                None
            }
        }
    }
}
