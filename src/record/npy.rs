//! The solution along the span as a NumPy array: format version 3.0 of `numpy.lib.format`.

use super::outcome::Outcome;

/// One record for each station with the columns of the table ([`super::csv::table`]) as named fields; NaN where there is
/// no value.
pub fn table(outcome: &Outcome) -> Vec<u8> {
    let mut names: Vec<String> = Vec::new();
    let columns = std::iter::once((outcome.coordinate.as_str(), outcome.coordinate_unit.as_str()))
        .chain(outcome.curves.iter().map(|c| (c.name.as_str(), c.unit.as_str())));
    for (name, unit) in columns {
        let mut name = if unit == "1" { name.to_owned() } else { format!("{name} [{unit}]") };
        // Names of fields must differ.
        while names.contains(&name) {
            name.push('_');
        }
        names.push(name);
    }
    let quoted = |name: &String| {
        let plain: String = name.chars().map(|c| if c.is_control() { ' ' } else { c }).collect();
        format!("('{}', '<f8')", plain.replace('\\', "\\\\").replace('\'', "\\'"))
    };
    let fields: Vec<String> = names.iter().map(quoted).collect();
    let shape = outcome.stations.len();
    let mut header = format!("{{'descr': [{}], 'fortran_order': False, 'shape': ({shape},), }}", fields.join(", "));
    // Magic, version and length take 12 bytes; blanks and a line feed fill up to a multiple of 64.
    let open = (64 - (12 + header.len() + 1) % 64) % 64;
    header.push_str(&" ".repeat(open));
    header.push('\n');
    let mut bytes = b"\x93NUMPY\x03\x00".to_vec();
    bytes.extend((header.len() as u32).to_le_bytes());
    bytes.extend(header.into_bytes());
    for row in &outcome.stations {
        let values = row.iter().copied().chain(std::iter::repeat(f64::NAN)).take(names.len());
        bytes.extend(values.flat_map(|value| if value.is_finite() { value } else { f64::NAN }.to_le_bytes()));
    }
    bytes
}
