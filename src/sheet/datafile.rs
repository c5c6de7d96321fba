//! Measured data from files: two columns of numbers with a header that names their units.

use crate::unit::Unit;

/// A data file that a sheet names: content, or why it could not be read.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct DataFile {
    /// The name as the sheet writes it.
    pub name: String,
    /// Its text, or why there is none.
    pub content: Result<String, String>,
}

/// Two columns of a data file.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Columns {
    /// Units of both.
    pub units: [Unit; 2],
    /// Numbers in these units, and the line of each.
    pub rows: Vec<([f64; 2], usize)>,
}

/// What is wrong with a file, and what to do.
type Trouble = (String, &'static str);

const HEADER: &str = "the first line names the columns and their units: T [degC],k [W/(m K)]";

/// Reads two columns, the first two or those of the names given. A blank line or one that begins with # is skipped.
pub(super) fn read(text: &str, wanted: Option<[&str; 2]>, most: usize) -> Result<Columns, Trouble> {
    let text = text.strip_prefix('\u{feff}').unwrap_or(text);
    let lines = text.lines().enumerate().map(|(k, line)| (k + 1, line.trim()));
    let mut lines = lines.filter(|(_, line)| !line.is_empty() && !line.starts_with('#'));
    let Some((number, header)) = lines.next() else { return Err(("it holds no line".into(), HEADER)) };
    let separator = [';', '\t', ','].into_iter().find(|s| header.contains(*s));
    let Some(separator) = separator else {
        return Err((format!("line {number} is one column only"), HEADER));
    };
    let cells =
        |line: &str| -> Vec<String> { line.split(separator).map(|c| c.trim().trim_matches('"').to_owned()).collect() };
    let header = cells(header);
    if header.iter().any(|cell| cell.parse::<f64>().is_ok()) {
        return Err((format!("line {number} is no header"), HEADER));
    }
    let heads: Vec<(&str, &str)> = header.iter().map(|cell| split(cell)).collect();
    let mut columns = [0, 1];
    if let Some(wanted) = wanted {
        for (column, name) in columns.iter_mut().zip(wanted) {
            let Some(k) = heads.iter().position(|(n, _)| *n == name) else {
                let names: Vec<String> = heads.iter().map(|(n, _)| format!("`{n}`")).collect();
                return Err((
                    format!("it has no column `{name}`, only {}", names.join(", ")),
                    "name two of its columns",
                ));
            };
            *column = k;
        }
    }
    let unit = |k: usize| {
        let Some((name, text)) = heads.get(k) else {
            return Err((format!("line {number} is one column only"), HEADER));
        };
        let text = if text.is_empty() { "1" } else { text };
        Unit::parse(text, true).map_err(|e| (format!("unit of column `{name}`: {}", e.message), HEADER))
    };
    let units = [unit(columns[0])?, unit(columns[1])?];
    let mut rows = Vec::new();
    for (number, line) in lines {
        if rows.len() >= most {
            return Err((format!("it has more than {most} points"), "keep those that matter"));
        }
        let cells = cells(line);
        let mut row = [0.0; 2];
        for (value, k) in row.iter_mut().zip(columns) {
            let Some(cell) = cells.get(k) else {
                return Err((
                    format!("line {number} has no column {}", k + 1),
                    "each line holds as many values as the header",
                ));
            };
            *value = match cell.parse::<f64>() {
                Ok(v) if v.is_finite() => v,
                _ if cell.contains(',') => {
                    let message = format!("line {number}: `{cell}` is not a number");
                    return Err((message, "write a decimal point, not a comma"));
                }
                _ => {
                    return Err((
                        format!("line {number}: `{cell}` is not a number"),
                        "only digits, point, sign, exponent",
                    ));
                }
            };
        }
        if separator == ',' && cells.len() > header.len() {
            let message = format!("line {number} has {} values but the header {}", cells.len(), header.len());
            return Err((message, "write a decimal point, not a comma"));
        }
        rows.push((row, number));
    }
    Ok(Columns { units, rows })
}

/// Name and unit of a head: `T [degC]`.
fn split(cell: &str) -> (&str, &str) {
    match cell.split_once('[') {
        Some((name, unit)) => (name.trim(), unit.trim_end().trim_end_matches(']').trim()),
        None => (cell.trim(), ""),
    }
}

#[cfg(test)]
mod tests {
    use super::read;

    #[test]
    fn columns_with_units_are_read_and_slips_named() {
        let good =
            read("# from the laboratory\nT [degC],k [W/(m K)]\n\n20,15.1\n1e2 , 16.2\n", None, 10).expect("good");
        assert_eq!(good.units[1].text, "W/(m K)");
        assert_eq!(good.rows, [([20.0, 15.1], 4), ([100.0, 16.2], 5)]);
        let some = read("x [m];y;z [mm]\n1;2;3\n", Some(["z", "y"]), 10).expect("good");
        assert_eq!(some.rows, [([3.0, 2.0], 2)]);
        let message = |text: &str| read(text, None, 3).expect_err("a slip").0;
        assert!(message("").contains("no line"));
        assert!(message("1,2\n3,4\n").contains("no header"));
        assert!(message("T [degC]\n").contains("one column"));
        assert!(message("T [degC],k\n20,1,5\n").contains("3 values"));
        assert!(message("T [degC];k\n20;1,5\n").contains("`1,5` is not a number"));
        assert!(message("T [degX],k\n20,1\n").contains("column `T`"));
        assert!(message("a,b\n1,2\n1,2\n1,2\n1,2\n").contains("more than 3"));
        assert!(message("a,b\n1,nan\n").contains("not a number"));
        assert!(message("a,b\n1\n").contains("no column 2"));
    }
}
