//! Records read back: the numbers in them, and how those of two records stand to each other.

use super::number::concise;
use crate::unit::Unit;
use serde::Serialize;
use serde_json::Value;
use std::fmt::Write;

/// Most numbers taken from one record.
const MOST_NUMBERS: usize = 200_000;
/// Deepest nesting that is searched for numbers.
const DEEPEST: usize = 8;

/// A number of a record.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Recorded {
    /// Its label, behind the case, mode or solution that it belongs to.
    pub name: String,
    /// Value in `unit`, `None` where the record has none.
    pub value: Option<f64>,
    /// Bar in `unit`.
    pub error: f64,
    /// Unit as printed.
    pub unit: String,
}

/// A record as far as it is read back.
#[derive(Debug, Clone, PartialEq)]
pub struct Record {
    /// Name of the sheet.
    pub sheet: String,
    /// Version of the program that wrote it.
    pub version: String,
    /// Digest of the sheet.
    pub sha256: String,
    /// All numbers.
    pub numbers: Vec<Recorded>,
}

/// How two numbers stand to each other.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "lowercase")]
pub enum Verdict {
    /// The difference is within both bars.
    Agrees,
    /// It is not.
    Differs,
    /// Only one of the records has the number.
    Missing,
    /// The units cannot be converted into each other.
    Incomparable,
}

/// A number in two records.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Compared {
    /// Its name.
    pub name: String,
    /// In the first.
    pub first: Option<Recorded>,
    /// In the second, in the unit of the first.
    pub second: Option<Recorded>,
    /// Second less first.
    pub difference: Option<f64>,
    /// Difference in units of both bars together.
    pub bars: Option<f64>,
    /// What that means.
    pub verdict: Verdict,
}

/// Reads a record.
///
/// # Errors
/// What makes the text no record.
pub fn read(text: &str) -> Result<Record, String> {
    let document: Value = serde_json::from_str(text).map_err(|error| format!("not JSON: {error}"))?;
    if document["program"] != "spanwise" || !document["quantities"].is_array() {
        return Err("it is JSON, but not a record of this program".into());
    }
    let text = |key: &str| document[key].as_str().unwrap_or_default().to_owned();
    let mut numbers = Vec::new();
    gather(&document, "", DEEPEST, &mut numbers);
    Ok(Record { sheet: text("sheet"), version: text("version"), sha256: text("sha256"), numbers })
}

/// Numbers of a document and of the cases, modes and solutions in it.
fn gather(value: &Value, before: &str, depth: usize, numbers: &mut Vec<Recorded>) {
    let Some(object) = value.as_object().filter(|_| depth > 0) else { return };
    let named = |name: &str| if before.is_empty() { name.to_owned() } else { format!("{before}, {name}") };
    if let Some(parameter) = object.get("parameter").filter(|p| p.is_object()) {
        number(parameter, &named("parameter"), numbers);
    }
    for quantity in object.get("quantities").and_then(Value::as_array).into_iter().flatten() {
        number(quantity, &named(quantity["name"].as_str().unwrap_or("?")), numbers);
    }
    for (key, inner) in object {
        match inner {
            Value::Array(list) if key != "quantities" => {
                let word = key.strip_suffix('s').unwrap_or(key);
                for (k, part) in list.iter().enumerate().filter(|(_, part)| part.is_object()) {
                    let name = part["name"].as_str().map_or_else(|| (k + 1).to_string(), str::to_owned);
                    gather(part, &named(&format!("{word} {name}")), depth - 1, numbers);
                }
            }
            Value::Object(_) if key != "parameter" => gather(inner, &named(key), depth - 1, numbers),
            _ => {}
        }
    }
}

fn number(quantity: &Value, name: &str, numbers: &mut Vec<Recorded>) {
    if numbers.len() >= MOST_NUMBERS {
        return;
    }
    // A bar has no sign.
    let error = quantity["error"].as_f64().unwrap_or(0.0).abs();
    let unit = quantity["unit"].as_str().unwrap_or("1").to_owned();
    let value = quantity["value"].as_f64();
    numbers.push(Recorded { name: name.to_owned(), value, error, unit: unit.clone() });
    if let Some(imaginary) = quantity.get("imaginary") {
        let name = format!("{name}, imaginary part");
        numbers.push(Recorded { name, value: imaginary.as_f64(), error, unit });
    }
}

/// Sets the numbers of two records side by side, in the order of the first; those of the second alone come last.
pub fn compare(first: &[Recorded], second: &[Recorded]) -> Vec<Compared> {
    // By name, and among equal names in order.
    let mut rest: std::collections::HashMap<&str, std::collections::VecDeque<&Recorded>> = Default::default();
    for number in second {
        rest.entry(&number.name).or_default().push_back(number);
    }
    let mut list: Vec<Compared> = first
        .iter()
        .map(|a| match rest.get_mut(a.name.as_str()).and_then(std::collections::VecDeque::pop_front) {
            Some(b) => pair(a, b),
            None => alone(Some(a), None),
        })
        .collect();
    for number in second {
        let open = rest.get_mut(number.name.as_str());
        if let Some(open) = open
            && open.front().is_some_and(|front| std::ptr::eq(*front, number))
        {
            open.pop_front();
            list.push(alone(None, Some(number)));
        }
    }
    list
}

fn alone(first: Option<&Recorded>, second: Option<&Recorded>) -> Compared {
    let name = first.or(second).map(|r| r.name.clone()).unwrap_or_default();
    let (first, second) = (first.cloned(), second.cloned());
    Compared { name, first, second, difference: None, bars: None, verdict: Verdict::Missing }
}

fn pair(a: &Recorded, b: &Recorded) -> Compared {
    let same = |verdict, second| Compared {
        name: a.name.clone(),
        first: Some(a.clone()),
        second: Some(second),
        difference: None,
        bars: None,
        verdict,
    };
    let Some(b) = in_unit_of(a, b) else { return same(Verdict::Incomparable, b.clone()) };
    let (Some(x), Some(y)) = (a.value, b.value) else {
        let verdict = if a.value == b.value { Verdict::Agrees } else { Verdict::Differs };
        return same(verdict, b);
    };
    let difference = y - x;
    // Written and read back: a unit in the last place each.
    let slack = 2.0 * f64::EPSILON * x.abs().max(y.abs());
    let both = a.error + b.error;
    let verdict = if difference.abs() <= both + slack { Verdict::Agrees } else { Verdict::Differs };
    let bars = (both > 0.0).then(|| difference.abs() / both).filter(|bars| bars.is_finite());
    Compared { difference: Some(difference), bars, ..same(verdict, b) }
}

fn in_unit_of(a: &Recorded, b: &Recorded) -> Option<Recorded> {
    if a.unit == b.unit {
        return Some(b.clone());
    }
    let [own, other] = [&a.unit, &b.unit].map(|text| Unit::parse(text, true).ok());
    let (own, other) = (own?, other?);
    if own.dimension != other.dimension {
        return None;
    }
    let value = b.value.map(|value| own.from_si(other.to_si(value)));
    let error = (b.error * other.factor / own.factor).abs();
    Some(Recorded { name: b.name.clone(), value, error, unit: a.unit.clone() })
}

/// Whether all agree.
pub fn all_agree(list: &[Compared]) -> bool {
    list.iter().all(|c| c.verdict == Verdict::Agrees)
}

/// For a terminal; `heads` name the two records.
pub fn text(list: &[Compared], heads: [&str; 2]) -> String {
    let shown = |r: &Option<Recorded>| match r {
        None => "-".to_owned(),
        Some(Recorded { value: None, .. }) => "none".to_owned(),
        Some(Recorded { value: Some(value), error, .. }) => concise(*value, *error),
    };
    let mut rows =
        vec![["".into(), "".into(), heads[0].into(), heads[1].into(), "unit".into(), "apart, in bars".into()]];
    for c in list {
        let verdict = match c.verdict {
            Verdict::Agrees => "ok",
            Verdict::Differs => "DIFFERS",
            Verdict::Missing => "MISSING",
            Verdict::Incomparable => "UNITS",
        };
        let unit = c.first.as_ref().or(c.second.as_ref()).map_or("", |r| r.unit.as_str());
        let bars = match (c.bars, c.difference) {
            (Some(bars), _) if bars >= 1e4 => format!("{bars:.1e}"),
            (Some(bars), _) => format!("{bars:.2}"),
            (None, Some(difference)) if difference != 0.0 => format!("{difference:.1e} without bars"),
            _ => String::new(),
        };
        let unit = if unit == "1" { "" } else { unit };
        rows.push([verdict.into(), c.name.clone(), shown(&c.first), shown(&c.second), unit.into(), bars]);
    }
    let width = |k: usize| rows.iter().map(|r| r[k].chars().count()).max().unwrap_or(0);
    let widths: Vec<usize> = (0..6).map(width).collect();
    let mut text = String::new();
    for row in &rows {
        let mut line = String::new();
        for (cell, width) in row.iter().zip(&widths) {
            let _ = write!(line, "{cell}{}   ", " ".repeat(width - cell.chars().count()));
        }
        let _ = writeln!(text, "{}", line.trim_end());
    }
    let apart = list.iter().filter(|c| c.verdict != Verdict::Agrees).count();
    let _ = match apart {
        0 => writeln!(text, "\nall {} numbers agree within their bars", list.len()),
        n => writeln!(text, "\n{n} of {} numbers do not agree", list.len()),
    };
    text
}

#[cfg(test)]
mod tests {
    use super::*;

    fn number(name: &str, value: f64, error: f64, unit: &str) -> Recorded {
        Recorded { name: name.into(), value: Some(value), error, unit: unit.into() }
    }

    #[test]
    fn numbers_agree_within_their_bars_in_any_unit() {
        let first = [number("y", 12.5, 0.01, "mm"), number("T", 20.0, 0.001, "degC"), number("y", 1.0, 0.0, "mm")];
        let second = [number("T", 293.1505, 0.001, "K"), number("y", 0.012515, 1e-5, "m"), number("z", 1.0, 0.0, "N")];
        let list = compare(&first, &second);
        let verdicts: Vec<Verdict> = list.iter().map(|c| c.verdict).collect();
        assert_eq!(verdicts, [Verdict::Agrees, Verdict::Agrees, Verdict::Missing, Verdict::Missing]);
        assert!((list[0].bars.expect("bars") - 0.75).abs() < 1e-9, "{list:?}");
        assert_eq!(
            compare(&[number("y", 1.0, 0.0, "m")], &[number("y", 1.0, 0.0, "s")])[0].verdict,
            Verdict::Incomparable
        );
        assert_eq!(compare(&[number("y", 1.0, 0.0, "m")], &[number("y", 1.1, 0.0, "m")])[0].verdict, Verdict::Differs);
        assert!(text(&list, ["a", "b"]).contains("2 of 4 numbers do not agree"));
    }

    #[test]
    fn numbers_of_cases_and_modes_are_found() {
        let record = read(
            r#"{ "program": "spanwise", "quantities": [ { "name": "y", "value": 1.5, "error": 0.1, "unit": "mm" } ],
                 "cases": [ { "name": "snow", "quantities": [ { "name": "y", "value": null, "unit": "mm" } ] } ],
                 "modes": [ { "parameter": { "value": 2.0, "imaginary": 1.0, "error": 0.0, "unit": "1/s" }, "quantities": [] } ] }"#,
        )
        .expect("a record");
        let names: Vec<&str> = record.numbers.iter().map(|n| n.name.as_str()).collect();
        let mut sorted = names.clone();
        sorted.sort_unstable();
        assert_eq!(sorted, ["case snow, y", "mode 1, parameter", "mode 1, parameter, imaginary part", "y"]);
        assert!(read("{}").is_err() && read("[1").is_err() && read("").is_err());
    }
}
