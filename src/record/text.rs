//! Results for people, on a terminal.

use super::number::concise;
use super::outcome::{Outcome, Quantity, Status};
use std::fmt::Write;

/// The asked numbers as a table, remarks below, then the checks in short.
pub fn results(outcome: &Outcome) -> String {
    let mut text = String::new();
    if !outcome.title.is_empty() {
        let _ = writeln!(text, "{}\n", outcome.title);
    }
    if let Some(reason) = outcome.reason.as_ref().filter(|_| outcome.status == Status::Failed) {
        let _ = writeln!(text, "not solved: {reason}");
        text.push_str(&super::path::text(outcome));
        return text;
    }
    text.push_str(&super::modes::text(outcome));
    // Numbers of modes stand in their own table.
    let quantities = if outcome.modes.is_empty() { &outcome.quantities[..] } else { &[] };
    let rows: Vec<[String; 3]> = quantities.iter().map(row).collect();
    let width = |k: usize| rows.iter().map(|r| r[k].chars().count()).max().unwrap_or(0);
    let (label, value) = (width(0), width(1));
    for (row, quantity) in rows.iter().zip(quantities) {
        let pad = |s: &str, n: usize| format!("{s}{}", " ".repeat(n - s.chars().count().min(n)));
        let line = format!("{}   {}   {}", pad(&row[0], label), pad(&row[1], value), row[2]);
        let _ = writeln!(text, "{}", line.trim_end());
        for remark in quantity.remarks.iter().chain(quantity.reason.as_ref().filter(|_| quantity.value.is_some())) {
            let _ = writeln!(text, "    {remark}");
        }
    }
    if !outcome.checks.is_empty() {
        text.push('\n');
        let width = outcome.checks.iter().map(|c| c.name.chars().count()).max().unwrap_or(0);
        for check in &outcome.checks {
            let verdict = match check.passed {
                Some(true) => "ok  ",
                Some(false) => "LOOK",
                None => "    ",
            };
            let gap = " ".repeat(width - check.name.chars().count());
            let _ = writeln!(text, "{verdict}  {}{gap}   {}", check.name, check.result);
        }
    }
    text.push_str(&super::path::text(outcome));
    text.push_str(&super::cases::text(outcome));
    text
}

fn row(quantity: &Quantity) -> [String; 3] {
    let value = match quantity.value {
        Some(value) => concise(value, quantity.error),
        None => "none".into(),
    };
    let unit = match (&quantity.reason, quantity.value) {
        (Some(reason), None) => reason.clone(),
        _ if quantity.unit == "1" => String::new(),
        _ => quantity.unit.clone(),
    };
    [quantity.name.clone(), value, unit]
}

/// The problem as understood, for `check`.
pub fn statement(outcome: &Outcome) -> String {
    let mut text = String::new();
    if !outcome.title.is_empty() {
        let _ = writeln!(text, "{}\n", outcome.title);
    }
    let (from, to) = outcome.span;
    let unit = if outcome.coordinate_unit == "1" { "" } else { outcome.coordinate_unit.as_str() };
    let place = |x: f64| crate::sheet::short(x);
    let _ = writeln!(text, "span: {} from {} to {} {unit}", outcome.coordinate, place(from), place(to));
    let section = |text: &mut String, head: &str, entries: &[super::outcome::Entry]| {
        if entries.is_empty() {
            return;
        }
        let _ = writeln!(text, "\n{head}");
        let width = entries.iter().map(|e| e.name.chars().count()).max().unwrap_or(0);
        for entry in entries {
            let gap = " ".repeat(width - entry.name.chars().count());
            let remark = if entry.remark.is_empty() { String::new() } else { format!("   ({})", entry.remark) };
            let _ = writeln!(text, "  {}{gap}   {}{remark}", entry.name, entry.text);
        }
    };
    section(&mut text, "data", &outcome.data);
    section(&mut text, "unknowns", &outcome.unknowns);
    section(&mut text, "equations", &outcome.equations);
    section(&mut text, "conditions", &outcome.conditions);
    if !outcome.features.is_empty() {
        let _ = writeln!(text, "\npoints");
        for feature in &outcome.features {
            let label = if feature.label.is_empty() { "break of the data" } else { feature.label.as_str() };
            let _ = writeln!(text, "  {} {unit}   {label}", place(feature.x));
        }
    }
    text
}
