//! Free motions and contradictions of a singular problem, in words.

use crate::field::Field;
use crate::model::Model;

/// How an unknown can move though nothing drives it.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
enum Motion {
    Translation,
    Rotation,
    Shape,
}

/// Explains why the problem has no unique solution. `free` holds the free motions, `contradictions` for
/// each of them the conditions involved and the part of loads and prescribed values that nothing balances.
pub(crate) fn explain(model: &dyn Model, free: &[Field], contradictions: &[(Vec<String>, f64)]) -> String {
    let mut motions: Vec<(usize, Motion)> = Vec::new();
    let mut constants_free = false;
    for field in free {
        match motion(model, field) {
            Some(found) if !motions.contains(&found) => motions.push(found),
            Some(_) => {}
            None => constants_free = true,
        }
    }
    // Two free motions of a beam are any mixture of shift and turn: name both.
    let turning: Vec<usize> = motions.iter().filter(|m| m.1 == Motion::Rotation).map(|m| m.0).collect();
    for unknown in turning {
        let same = free.len() >= 2 && !motions.contains(&(unknown, Motion::Translation));
        if same {
            motions.push((unknown, Motion::Translation));
        }
    }
    motions.sort_by_key(|m| (m.1, m.0));
    let mut parts: Vec<String> = motions
        .iter()
        .map(|(unknown, motion)| {
            let name = model.unknown_name(*unknown);
            match motion {
                Motion::Translation => {
                    format!("nothing holds {name} against translation (a constant can be added to it)")
                }
                Motion::Rotation => {
                    format!("nothing holds {name} against rotation (a straight line can be added to it)")
                }
                Motion::Shape => format!(
                    "{name} can take a shape of its own without any load (resonance, or a condition that does not bite)"
                ),
            }
        })
        .collect();
    if constants_free || parts.is_empty() {
        parts.push("nothing determines an unknown constant".into());
    }
    let against = contradictions.iter().any(|(_, size)| *size > 1e-9);
    let mut names: Vec<&str> = contradictions.iter().flat_map(|(n, _)| n.iter().map(String::as_str)).collect();
    names.sort_unstable();
    names.dedup();
    let quoted = names.iter().map(|n| format!("\"{n}\"")).collect::<Vec<_>>().join(", ");
    let head = if against { "no solution: the load has no reaction" } else { "the solution is not unique" };
    let tail = match (names.is_empty(), against) {
        (true, _) => String::new(),
        (false, true) => format!("; these conditions contradict the load or each other: {quoted}"),
        (false, false) => format!("; these conditions repeat each other: {quoted}"),
    };
    format!("{head}: {}{tail}", parts.join("; "))
}

/// The unknown that moves most in a free motion, and how.
fn motion(model: &dyn Model, field: &Field) -> Option<(usize, Motion)> {
    let layout = model.layout();
    let length = field.mesh.length();
    let mut best: Option<(usize, Motion)> = None;
    for (i, &m) in layout.orders().iter().enumerate() {
        let size = field.size(i, 0);
        if size == 0.0 {
            continue;
        }
        // How much it differs from a constant, and its slope from a constant slope, over the span.
        let bend = |k: usize| if k <= m { field.size(i, k) * length.powi(k as i32) / size } else { 0.0 };
        let small = 1e-6;
        let motion = if m >= 1 && bend(1) < small {
            Motion::Translation
        } else if m >= 2 && bend(2) < small {
            Motion::Rotation
        } else {
            Motion::Shape
        };
        // Unknowns come in the order of the sheet, carried fluxes last: the first that moves is the one
        // the user knows.
        let moves = field.constants.iter().all(|c| c.abs() <= 1e6 * size) && size > 1e-9;
        if moves && best.is_none() {
            best = Some((i, motion));
        }
    }
    best
}
