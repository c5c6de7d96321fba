//! Data by stretches of the span.

use super::lower::{Cover, Formula, Lowerer, Typed};
use crate::unit::Dimension;

impl Lowerer<'_> {
    /// Values by stretches of the span as nested choices on the coordinate.
    pub(super) fn pieces(&mut self, name: &str, pieces: &[[Formula; 3]], otherwise: Option<&Formula>) -> Option<Typed> {
        let coordinate = self.graph.coordinate();
        let rest = otherwise.map(|f| self.lower(&f.at, &f.tree));
        let mut parts = Vec::new();
        for [from, to, value] in pieces {
            let limits = [from, to].map(|f| {
                let limit = self.lower(&f.at, &f.tree)?;
                self.expect(&f.at, &f.tree, limit, self.coordinate_dimension)?;
                match self.number_of(limit.node) {
                    Some(x) => {
                        let place = f.at.place(&f.tree.span);
                        self.limits.push((limit.node, place));
                        Some((limit.node, x))
                    }
                    None => self.fault("piece", &f.at, &f.tree.span, "a limit of a piece must be a datum", ""),
                }
            });
            let value = self.lower(&value.at, &value.tree).map(|t| (value, t));
            parts.push((limits, value, [from, to]));
        }
        let mut sorted: Vec<(f64, f64, [&Formula; 2])> = Vec::new();
        let place = |f: &Formula| f.at.place(&f.tree.span);
        for (limits, _, ends) in &parts {
            if let [Some((_, a)), Some((_, b))] = limits {
                if a >= b {
                    let message = format!("a piece of `{name}` runs backwards");
                    self.faults.add("piece", place(ends[0]), message, Some("write the smaller limit first".into()));
                }
                sorted.push((*a, *b, *ends));
            }
        }
        sorted.sort_by(|p, q| p.0.total_cmp(&q.0));
        for pair in sorted.windows(2) {
            let ((_, end, _), (start, _, [from, _])) = (pair[0], pair[1]);
            let small = 1e-12 * (end.abs() + start.abs());
            if start < end - small {
                let message = format!("pieces of `{name}` overlap");
                self.faults.add("piece", place(from), message, Some("each place may lie in one piece only".into()));
            } else if start > end + small && otherwise.is_none() {
                let message = format!("`{name}` has a gap between two pieces");
                self.faults.add("piece", place(from), message, Some(Cover::HINT.into()));
            }
        }
        if let (None, Some(first), Some(last)) = (otherwise, sorted.first(), sorted.last())
            && sorted.len() == parts.len()
        {
            let places = [place(first.2[0]), place(last.2[1])];
            self.covers.push(Cover { name: name.to_owned(), ends: [first.0, last.1], places });
        }
        let mut dimension: Option<Option<Dimension>> = None;
        let mut first: Option<(&Formula, Typed)> = None;
        if let (Some(formula), Some(rest)) = (otherwise, rest) {
            let rest = rest?;
            first = Some((formula, rest));
            dimension = Some(rest.dimension);
        }
        let mut absolute = first.map(|(_, t)| t.absolute);
        let mut node = first.map(|(_, t)| t.node);
        for (limits, value, _) in parts.into_iter().rev() {
            let [Some((a, _)), Some((b, _))] = limits else { return None };
            let (formula, value) = value?;
            dimension = Some(match (dimension.flatten(), value.dimension) {
                (Some(d), Some(own)) if d != own => {
                    let hint = first.map(|(f, _)| format!("the others are like `{}`", f.at.text)).unwrap_or_default();
                    let message =
                        format!("this piece of `{name}` is {} but another is {}", own.describe(), d.describe());
                    return self.fault("dimension", &formula.at, &formula.tree.span, message, &hint);
                }
                (d, own) => d.or(own),
            });
            first = first.or(Some((formula, value)));
            absolute = Some(absolute.map_or(value.absolute, |a| a.either(value.absolute)));
            node = Some(match node {
                // The last piece of a gapless list holds everywhere: its limits are checked, not tested.
                None => value.node,
                Some(rest) => {
                    let (below, above) = (self.graph.subtract(coordinate, a), self.graph.subtract(coordinate, b));
                    let inside = self.graph.choose(above, true, value.node, rest);
                    self.graph.choose(below, true, rest, inside)
                }
            });
        }
        Some(Typed { node: node?, dimension: dimension?, absolute: absolute? })
    }
}
