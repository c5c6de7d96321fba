//! The solution along the span as comma-separated values (RFC 4180).

use super::outcome::Outcome;
use std::fmt::Write;

/// One column for the coordinate and one for each curve, with units in the header, all digits, one row per station. At a
/// place where a curve jumps there are two rows, first the left, then the right limit.
pub fn table(outcome: &Outcome) -> String {
    let head = |name: &str, unit: &str| {
        let text = if unit == "1" { name.to_owned() } else { format!("{name} [{unit}]") };
        if text.contains([',', '"', '\n']) { format!("\"{}\"", text.replace('"', "\"\"")) } else { text }
    };
    let mut text = head(&outcome.coordinate, &outcome.coordinate_unit);
    for curve in &outcome.curves {
        let _ = write!(text, ",{}", head(&curve.name, &curve.unit));
    }
    text.push('\n');
    for row in &outcome.stations {
        for (k, value) in row.iter().enumerate() {
            if k > 0 {
                text.push(',');
            }
            if value.is_finite() {
                let _ = write!(text, "{value:?}");
            }
        }
        text.push('\n');
    }
    text
}
