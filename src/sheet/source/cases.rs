//! The sections `[cases.NAME]`.

use super::{Entry, Given, Reader, Source, Value};
use crate::sheet::fault::nearest;
use std::ops::Range;
use toml::de::DeValue;

/// Data changed in one case.
pub(in crate::sheet) type Changes = Vec<Entry<Given>>;

impl Reader<'_, '_> {
    pub(super) fn case(&mut self, source: &mut Source, (name, name_span): (String, Range<usize>), value: &Value<'_>) {
        let DeValue::Table(table) = value.get_ref() else {
            return self
                .wrong(value, "a load case is a table of changed data: [cases.snow] and below it s = \"2 kN/m\"");
        };
        if name == "base" {
            let message = "`base` is the sheet as it stands: a case needs another name";
            return self.faults.add("case", name_span, message, None);
        }
        if table.is_empty() {
            let hint = "write what changes: s = \"2 kN/m\"";
            return self.faults.add("case", name_span, format!("case `{name}` changes nothing"), Some(hint.into()));
        }
        let mut changes = Changes::new();
        for (key, value) in table {
            changes.extend(self.given((key.as_ref().to_string(), key.span()), value));
        }
        source.cases.push(Entry { name, name_span, value: changes });
    }

    /// Only names of [given] can be changed.
    pub(super) fn check_cases(&mut self, source: &Source) {
        for change in source.cases.iter().flat_map(|case| &case.value) {
            let names = source.given.iter().map(|g| g.name.as_str());
            let faulty = source.faulty.iter().any(|(name, _)| *name == change.name);
            if faulty || names.clone().any(|name| name == change.name) {
                continue;
            }
            let hint = nearest(&change.name, names).map(|k| format!("did you mean `{k}`?"));
            let hint = hint.unwrap_or_else(|| "a case gives other values to names of [given]".into());
            let message = format!("`{}` is not among the data of this sheet", change.name);
            self.faults.add("case", change.name_span.clone(), message, Some(hint));
        }
    }
}

impl Source {
    /// The same sheet with changed data.
    pub fn varied(&self, changes: &Changes) -> Source {
        let mut varied = self.clone();
        varied.cases.clear();
        for change in changes {
            if let Some(entry) = varied.given.iter_mut().find(|entry| entry.name == change.name) {
                entry.value = change.value.clone();
            }
        }
        varied
    }
}

impl Given {
    /// As people read it.
    pub fn text(&self) -> String {
        match self {
            Given::Formula(at) => at.text.clone(),
            Given::Pieces { pieces, otherwise } => {
                let mut parts: Vec<String> =
                    pieces.iter().map(|(k, v)| format!("{}: {}", k.text.trim(), v.text)).collect();
                parts.extend(otherwise.iter().map(|o| format!("else {}", o.text)));
                parts.join("; ")
            }
            Given::Measured(measured) => measured.describe(),
        }
    }
}
