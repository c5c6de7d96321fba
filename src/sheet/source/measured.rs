//! Measured data as a sheet writes them.

use super::{Entry, Given, Located, Reader, Table, Value, read};
use crate::formula::table::Through;
use crate::sheet::fault::{Faults, nearest};
use std::ops::Range;
use toml::de::DeValue;

/// Measured data.
#[derive(Debug, Clone, PartialEq)]
pub(in crate::sheet) struct Measured {
    pub against: Located,
    pub through: Through,
    pub rows: Rows,
    /// Where the points, or the name of the file, stand.
    pub place: Range<usize>,
}

/// Where measured data come from.
#[derive(Debug, Clone, PartialEq)]
pub(in crate::sheet) enum Rows {
    Points(Vec<[Located; 2]>),
    File { file: Located, columns: Option<[Located; 2]> },
}

impl Measured {
    /// In words.
    pub fn describe(&self) -> String {
        let how = match self.through {
            Through::Smooth => "smooth",
            Through::Straight => "straight",
        };
        let rows = match &self.rows {
            Rows::Points(rows) => format!("{} points", rows.len()),
            Rows::File { file, .. } => file.text.clone(),
        };
        format!("measured against {}, {rows}, {how}", self.against.text.trim())
    }
}

/// Names of the data files of a sheet.
pub(in crate::sheet) fn files(sheet: &str) -> Vec<String> {
    let source = read(sheet, &mut Faults::default());
    let mut names = Vec::new();
    let changed = source.cases.into_iter().flat_map(|case| case.value);
    for Entry { value, .. } in source.given.into_iter().chain(changed) {
        if let Given::Measured(Measured { rows: Rows::File { file, .. }, .. }) = value
            && !names.contains(&file.text)
        {
            names.push(file.text);
        }
    }
    names
}

impl Reader<'_, '_> {
    pub(super) fn measured(&mut self, name: &str, place: Range<usize>, table: &Table<'_>) -> Option<Measured> {
        let (mut against, mut through, mut rows, mut columns) = (None, Through::Smooth, None, None);
        let mut sound = true;
        for (key, value) in table {
            match key.as_ref().as_ref() {
                "against" => against = self.text(value),
                "through" => match value.get_ref() {
                    DeValue::String(how) if how == "smooth" => through = Through::Smooth,
                    DeValue::String(how) if how == "straight" => through = Through::Straight,
                    _ => {
                        let message = "measured data run smooth or straight between their points";
                        let hint = Some("write through = \"smooth\" or through = \"straight\"".into());
                        self.faults.add("measured", value.span(), message, hint);
                        sound = false;
                    }
                },
                "points" => match value.get_ref() {
                    DeValue::Array(list) => {
                        let pairs: Vec<Option<[Located; 2]>> = list.iter().map(|pair| self.pair(pair)).collect();
                        let pairs: Option<Vec<[Located; 2]>> = pairs.into_iter().collect();
                        sound &= pairs.is_some();
                        rows = pairs.map(|pairs| (Rows::Points(pairs), value.span()));
                    }
                    _ => sound &= self.pair(value).is_some(),
                },
                "file" => {
                    let file = self.text(value)?;
                    rows = Some((Rows::File { file, columns: None }, value.span()));
                }
                "columns" => columns = self.pair(value),
                other => {
                    let hint = nearest(other, ["against", "points", "file", "through", "columns"]);
                    let hint = hint.map(|k| format!("did you mean `{k}`?"));
                    let message = format!("`{other}` says nothing about measured data");
                    self.faults.add("unknown key", key.span(), message, hint);
                    sound = false;
                }
            }
        }
        if let (Some((Rows::File { columns: own, .. }, _)), Some(columns)) = (&mut rows, columns) {
            *own = Some(columns);
        }
        match (against, rows) {
            (Some(against), Some((rows, place))) if sound => Some(Measured { against, through, rows, place }),
            (Some(_), Some(_)) => None,
            (against, _) => {
                if sound {
                    let missing = if against.is_none() { "against what they are measured" } else { "points or a file" };
                    let message = format!("measured data `{name}` lack {missing}");
                    let hint = "write { against = \"T\", points = [[\"20 degC\", \"15.1 W/(m K)\"], ...] }";
                    self.faults.add("measured", place, message, Some(hint.into()));
                }
                None
            }
        }
    }

    /// A list of two texts or numbers.
    fn pair(&mut self, value: &Value<'_>) -> Option<[Located; 2]> {
        match value.get_ref() {
            DeValue::Array(list) if list.len() == 2 => {
                let texts: Vec<Option<Located>> = list.iter().map(|v| self.text(v)).collect();
                texts.into_iter().collect::<Option<Vec<Located>>>()?.try_into().ok()
            }
            _ => {
                self.wrong(value, "a point is a pair: [\"20 degC\", \"15.1 W/(m K)\"]");
                None
            }
        }
    }
}
