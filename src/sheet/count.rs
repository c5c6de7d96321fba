//! Conditions against order: releases, counts, integrals that run along.

use super::assemble::Assembler;
use super::condition::{Read, Running};
use super::points::SAME_POINT;
use super::short;
use super::singular::Expanded;
use crate::formula::graph::NodeId;
use crate::model::Release;

/// A condition as it counts: the unknowns that it speaks of, and the end (0 or 1) that it stands at.
struct Tied {
    unknowns: Vec<usize>,
    end: Option<usize>,
}

/// Gives as many conditions as possible to an unknown that they speak of, no unknown more than it has room for.
fn assigned(ties: &[Tied], room: &[usize]) -> Vec<Option<usize>> {
    fn give(k: usize, ties: &[Tied], room: &[usize], owners: &mut [Option<usize>], seen: &mut [bool]) -> bool {
        for &u in &ties[k].unknowns {
            if std::mem::replace(&mut seen[u], true) {
                continue;
            }
            let held: Vec<usize> = (0..ties.len()).filter(|j| owners[*j] == Some(u)).collect();
            if held.len() < room[u] || held.into_iter().any(|j| give(j, ties, room, owners, seen)) {
                owners[k] = Some(u);
                return true;
            }
        }
        false
    }
    let mut owners = vec![None; ties.len()];
    for k in 0..ties.len() {
        give(k, ties, room, &mut owners, &mut vec![false; room.len()]);
    }
    owners
}

impl Assembler<'_, '_> {
    /// Whether all points of a condition are points of the model.
    pub(super) fn inside(&self, read: &Read, points: &[f64]) -> bool {
        let (first, last) = (points[0], points[points.len() - 1]);
        let small = SAME_POINT * (last - first).max(first.abs()).max(last.abs());
        let slots = self.lowerer.all_slots(&read.node.into_iter().collect::<Vec<_>>());
        let named = slots.iter().flat_map(|s| &self.lowerer.functionals[*s as usize].points);
        let values =
            |nodes: Vec<NodeId>| nodes.into_iter().filter_map(|p| self.lowerer.number_of(p)).collect::<Vec<_>>();
        let placed = values(named.copied().collect()).iter().all(|x| *x >= first - small && *x <= last + small);
        let released = read.release.iter().map(|(_, point, _)| *point).collect();
        placed && values(released).iter().all(|x| *x > first + small && *x < last - small)
    }

    /// Continuities given up; `None` if some cannot be.
    pub(super) fn releases(
        &mut self,
        reads: &[Read],
        expanded: &[Expanded],
        orders: &[u8],
        points: &[f64],
    ) -> Option<Vec<Release>> {
        let before = self.lowerer.faults.len();
        let mut releases = Vec::new();
        for read in reads {
            let Some((what, point, text)) = &read.release else { continue };
            // A point that is no datum has been refused already.
            let x = self.lowerer.number_of(*point)?;
            let near = |k: &usize| (points[*k] - x).abs();
            let point = (0..points.len()).min_by(|p, q| near(p).total_cmp(&near(q)))?;
            let state = self.lowerer.state_of(*what).or_else(|| self.behind_flux(*what, expanded));
            let state = state.filter(|(u, k)| *k < orders[usize::from(*u)]);
            let Some((unknown, order)) = state else {
                let message = format!("`{text}` is not one of the continuous quantities of this problem");
                let hint = "name an unknown, one of its lower derivatives, or a flux as it stands in the equation";
                self.lowerer.faults.add("release", read.at.span.clone(), message, Some(hint.into()));
                continue;
            };
            let release = Release { point, unknown: usize::from(unknown), order: usize::from(order) };
            if releases.contains(&release) {
                let message = format!("the continuity of `{text}` is given up twice at this point");
                self.lowerer.faults.add("release", read.at.span.clone(), message, None);
            } else {
                releases.push(release);
            }
        }
        (self.lowerer.faults.len() == before).then_some(releases)
    }

    /// Conditions must number order + constants + releases.
    pub(super) fn check_count(&mut self, reads: &[Read], orders: &[u8], releases: usize, points: &[f64]) {
        let order: usize = orders.iter().map(|m| usize::from(*m)).sum();
        // The eigenvalue is paid for by the size of the mode.
        let constants = self.lowerer.constants.len() - usize::from(self.source.eigen.is_some());
        let needed = order + constants + releases;
        let given = reads.iter().filter(|r| r.node.is_some()).count();
        // A section of conditions that was not recognised is a fault of its own.
        if given == needed || (self.source.conditions.is_empty() && !self.lowerer.faults.is_empty()) {
            return;
        }
        let unit = self.coordinate_unit();
        let shown = |x: f64| format!("{} = {} {}", self.lowerer.coordinate, short(unit.from_si(x)), unit.text);
        let (mut from, mut to, mut inner, mut spread) = (0, 0, 0, 0);
        let mut ties: Vec<Tied> = Vec::new();
        for node in reads.iter().filter_map(|r| r.node) {
            let slots = self.lowerer.all_slots(&[node]);
            let places: Vec<f64> = slots
                .iter()
                .flat_map(|s| self.lowerer.functionals[*s as usize].points.clone())
                .filter_map(|p| self.lowerer.number_of(p))
                .collect();
            let integral = slots.iter().any(|s| self.lowerer.functionals[*s as usize].runs());
            let small = 1e-12 * (points[points.len() - 1] - points[0]);
            let all = |x: f64| !places.is_empty() && !integral && places.iter().all(|p| (p - x).abs() <= small);
            let end = [all(points[0]), all(points[points.len() - 1])].iter().position(|here| *here);
            ties.push(Tied { unknowns: self.tied(&slots), end });
            if end == Some(0) {
                from += 1;
            } else if end == Some(1) {
                to += 1;
            } else if places.len() == 1 || (places.len() > 1 && places.iter().all(|p| (p - places[0]).abs() <= small)) {
                inner += 1;
            } else {
                spread += 1;
            }
        }
        let mut parts = vec![format!("order {order}")];
        if constants > 0 {
            parts.push(format!("{constants} unknown constant{}", if constants == 1 { "" } else { "s" }));
        }
        if releases > 0 {
            parts.push(format!(
                "{releases} jump{} or release{}",
                if releases == 1 { "" } else { "s" },
                if releases == 1 { "" } else { "s" }
            ));
        }
        let mut sides =
            vec![format!("{from} at {}", shown(points[0])), format!("{to} at {}", shown(points[points.len() - 1]))];
        if inner > 0 {
            sides.push(format!("{inner} inside"));
        }
        if spread > 0 {
            sides.push(format!("{spread} over several points"));
        }
        let message = format!(
            "{needed} condition{} needed ({}), {given} given: {}",
            if needed == 1 { " is" } else { "s are" },
            parts.join(", "),
            sides.join(", ")
        );
        let place = self.source.conditions.last().map_or_else(
            || self.source.equations.last().map_or(0..0, |e| e.name_span.clone()),
            |c| c.name_span.clone(),
        );
        let ends = [points[0], points[points.len() - 1]].map(shown);
        let hint = match given < needed {
            true => self.lacking(&ties, orders, &ends, needed - given, releases > inner),
            false => {
                let much = format!("{} too many", given - needed);
                let flux = self.source.equations.first().and_then(|_| self.support(orders));
                match flux.filter(|_| inner > releases) {
                    Some(flux) => {
                        format!("{much}: a support inside the span gives up a continuity, release({flux}, place)")
                    }
                    None => much,
                }
            }
        };
        self.lowerer.faults.add("condition count", place, message, Some(hint));
    }

    /// Unknown functions that a condition speaks of, fluxes counted for the unknown that they follow from.
    fn tied(&self, slots: &std::collections::BTreeSet<u32>) -> Vec<usize> {
        let functions = self.lowerer.functions.len();
        let mut tied = Vec::new();
        for slot in slots {
            let expression = self.lowerer.functionals[*slot as usize].expression;
            for (unknown, _) in self.lowerer.graph.jets_of(expression) {
                let unknown = usize::from(unknown);
                let carried = self.lowerer.carried.get(unknown.wrapping_sub(functions));
                let first = carried.and_then(|c| self.lowerer.graph.jets_of(c.written).into_iter().next());
                let own = if unknown < functions { Some(unknown) } else { first.map(|(u, _)| usize::from(u)) };
                tied.extend(own.filter(|u| *u < functions && !tied.contains(u)));
            }
        }
        tied
    }

    /// Which unknown lacks how many conditions at which end.
    fn lacking(&self, ties: &[Tied], orders: &[u8], ends: &[String; 2], short: usize, inside: bool) -> String {
        if inside {
            return format!("{short} more: each jump or release needs one condition more at its place");
        }
        let room: Vec<usize> = (0..self.lowerer.functions.len()).map(|u| self.true_order(u, orders)).collect();
        let owners = assigned(ties, &room);
        let mut parts = Vec::new();
        for (u, function) in self.lowerer.functions.iter().enumerate() {
            let own = || ties.iter().zip(&owners).filter(|(_, owner)| **owner == Some(u)).map(|(tie, _)| tie);
            let missing = room[u] - own().count();
            if missing == 0 {
                continue;
            }
            let at = |end: usize| own().filter(|tie| tie.end == Some(end)).count();
            let [left, right] = [at(0), at(1)];
            let place = match missing {
                _ if left + missing <= right => format!(" at {}", ends[0]),
                _ if right + missing <= left => format!(" at {}", ends[1]),
                _ if left == right && missing.is_multiple_of(2) => " on both ends together".to_owned(),
                1 => " at one end".to_owned(),
                _ => String::new(),
            };
            let s = if missing == 1 { "" } else { "s" };
            parts.push(format!("`{}` (order {}) lacks {missing} condition{s}{place}", function.name, room[u]));
        }
        if parts.is_empty() {
            return format!("{short} more: an unknown constant needs a condition of its own");
        }
        parts.join("; ")
    }

    /// The flux whose continuity a support gives up: the last one carried, as the sheet names it.
    fn support(&mut self, orders: &[u8]) -> Option<String> {
        let functions = self.lowerer.functions.len();
        let last =
            self.lowerer.carried.last().map(|c| (c.written, orders.get(functions + self.lowerer.carried.len() - 1)));
        let (written, order) = last?;
        let named = self.source.given.iter().find_map(|entry| {
            let name = crate::formula::syntax::name(&entry.name)?;
            let scalars = std::mem::replace(&mut self.lowerer.scalars, false);
            let typed = self.lowerer.named(&name);
            self.lowerer.scalars = scalars;
            (typed?.node == written).then_some(name)
        })?;
        // The highest state of the flux itself.
        Some(named + &"'".repeat(usize::from(*order?).saturating_sub(1)))
    }

    /// Order of an unknown with the fluxes that follow from it.
    pub(super) fn true_order(&self, unknown: usize, orders: &[u8]) -> usize {
        let own = usize::from(orders[unknown]);
        let mut total = own;
        for (k, carried) in self.lowerer.carried.iter().enumerate() {
            let first = self.lowerer.graph.jets_of(carried.written).into_iter().next();
            if first.is_some_and(|(u, _)| usize::from(u) == unknown) {
                total += usize::from(orders[self.lowerer.functions.len() + k]);
            }
        }
        total
    }

    pub(super) fn running(&mut self, reads: &[Read], given: usize) -> Vec<(usize, Running)> {
        let nodes: Vec<NodeId> = reads.iter().filter_map(|r| r.node).collect();
        let slots = self.lowerer.all_slots(&nodes);
        let integrals = slots.into_iter().filter(|s| self.lowerer.functionals[*s as usize].runs());
        integrals
            .enumerate()
            .map(|(k, slot)| {
                let functional = &self.lowerer.functionals[slot as usize];
                let ends = match functional.points[..] {
                    [from, to] => Some([from, to]),
                    _ => None,
                };
                let unknown = (given + k) as u16;
                (slot as usize, Running { unknown, integrand: functional.expression, ends })
            })
            .collect()
    }

    /// I' - integrand = 0 inside the stretch, I' = 0 outside.
    pub(super) fn running_equation(&mut self, run: &Running) -> NodeId {
        let ends = run.ends.map(|ends| ends.map(|end| self.lowerer.number_of(end)));
        let backwards = matches!(ends, Some([Some(from), Some(to)]) if to < from);
        let graph = &mut self.lowerer.graph;
        let zero = graph.number(0.0);
        let mut inside = graph.expand(run.integrand);
        if let Some([from, to]) = run.ends {
            let x = graph.coordinate();
            let [from, to] = if backwards { [to, from] } else { [from, to] };
            let (below, above) = (graph.subtract(x, from), graph.subtract(x, to));
            inside = graph.choose(above, true, inside, zero);
            inside = graph.choose(below, true, zero, inside);
        }
        let slope = graph.jet(run.unknown, 1);
        graph.subtract(slope, inside)
    }
}
