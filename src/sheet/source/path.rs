//! The section `[path]`.

use super::{Declared, Entry, Given, Located, Reader, Source, Value};
use crate::sheet::fault::{Faults, nearest};
use std::ops::Range;
use toml::de::DeValue;

/// Points of a path where nothing is said.
const POINTS: usize = 21;
/// Most points that a sheet may ask for.
const MOST_POINTS: usize = 1000;

/// A parameter to follow.
#[derive(Debug, Clone, PartialEq)]
pub(in crate::sheet) struct Follow {
    /// Where the section stands.
    pub span: Range<usize>,
    pub parameter: Located,
    pub from: Located,
    pub to: Located,
    pub through_folds: bool,
    pub points: usize,
}

impl Reader<'_, '_> {
    pub(super) fn path(&mut self, source: &mut Source, span: Range<usize>, value: &Value<'_>) {
        let (mut parameter, mut from, mut to) = (None, None, None);
        let (mut through_folds, mut points) = (false, Some(POINTS));
        let mut sound = matches!(value.get_ref(), DeValue::Table(_));
        self.each(value, |r, (name, name_span), value| match (name.as_str(), value.get_ref()) {
            ("parameter", DeValue::String(_)) => parameter = r.text(value),
            ("parameter", _) => {
                sound = false;
                r.wrong(value, "name a datum in quotes: parameter = \"delta\"");
            }
            ("from", _) => from = r.text(value),
            ("to", _) => to = r.text(value),
            ("through_folds", DeValue::Boolean(b)) => through_folds = *b,
            ("through_folds", _) => {
                sound = false;
                r.wrong(value, "write through_folds = true");
            }
            ("points", DeValue::Integer(_)) => {
                points = r.text(value).and_then(|l| l.text.replace('_', "").parse().ok());
                points = points.filter(|n| (2..=MOST_POINTS).contains(n));
                if points.is_none() {
                    let message = format!("a path has 2 to {MOST_POINTS} points");
                    r.faults.add("path", value.span(), message, Some(format!("{POINTS} where nothing is written")));
                }
            }
            ("points", _) => {
                sound = false;
                r.wrong(value, "write a whole number: points = 40");
            }
            (other, _) => {
                sound = false;
                let hint = nearest(other, ["parameter", "from", "to", "through_folds", "points"]);
                let hint = hint.map(|k| format!("did you mean `{k}`?"));
                r.faults.add("unknown key", name_span, format!("`{other}` says nothing about a path"), hint);
            }
        });
        for (name, missing) in [("parameter", parameter.is_none()), ("from", from.is_none()), ("to", to.is_none())] {
            if missing && sound {
                let hint = "write parameter = \"delta\", from = \"0\", to = \"4\"";
                self.faults.add("path", span.clone(), format!("[path] lacks `{name}`"), Some(hint.into()));
            }
        }
        if let (Some(parameter), Some(from), Some(to), Some(points)) = (parameter, from, to, points) {
            source.path = Some(Follow { span, parameter, from, to, through_folds, points });
        }
    }
}

impl Source {
    /// An unknown constant that a path follows is a datum that is held: its value is that at the start.
    pub fn settle_path(&mut self, faults: &mut Faults) {
        let Some(follow) = &self.path else { return };
        if self.infinite() {
            let message = "a path along an infinite span is not part of this version";
            let hint = "cut the span where the solution has settled";
            faults.add("not yet", follow.parameter.span.clone(), message, Some(hint.into()));
            self.path = None;
            return;
        }
        let name = &follow.parameter.text;
        let constant = |e: &Entry<Declared>| e.value.constant && e.name == *name;
        if let Some(index) = self.unknowns.iter().position(constant) {
            let Entry { name, name_span, .. } = self.unknowns.remove(index);
            self.given.push(Entry { name, name_span, value: Given::Formula(follow.from.clone()) });
        }
        let known = self.given.iter().any(|e| e.name == follow.parameter.text)
            || self.faulty.iter().any(|(name, _)| *name == follow.parameter.text);
        if !known {
            let place = follow.parameter.span.clone();
            let message = format!("`{}` is not among the data of this sheet", follow.parameter.text);
            let hint = nearest(&follow.parameter.text, self.given.iter().map(|e| e.name.as_str()));
            let hint = hint.map(|k| format!("did you mean `{k}`?"));
            let hint = hint.unwrap_or_else(|| "the parameter of a path is one number of [given]".into());
            faults.add("path", place, message, Some(hint));
            self.path = None;
        }
    }
}
