//! One linear solve on one mesh.

use super::element::{Condensed, Sizes, Workspace, check_finite, condense, width};
use super::frame::Frame;
use super::nudge::Perturbation;
use super::tables::Library;
use crate::error::{Error, Result};
use crate::field::{Field, integrate_up};
use crate::mesh::{Element, Mesh};
use crate::model::{Batch, Layout, Linearised, Model};
use crate::tolerance;
use nalgebra::{DMatrix, DVector};

/// The outcome of one linear solve.
pub(crate) struct Pass {
    /// The solution; meaningless when `free` is not empty.
    pub field: Field,
    /// Condition number of the scaled closing system.
    pub condition: f64,
    /// Free motions of a singular problem.
    pub free: Vec<Field>,
    /// For each free motion: names of the conditions that cannot be told apart or contradict each other, and
    /// by how much (relative, 0: they repeat each other).
    pub contradictions: Vec<(Vec<String>, f64)>,
}

/// Solves the linear problem on a mesh. `scale` holds one size per unknown, `before` the field of an earlier pass,
/// from which the sizes on each element are known; `tick` is called with the number of elements done and
/// stops the solve by returning false.
pub(crate) fn solve(
    model: &dyn Model,
    mesh: &Mesh,
    library: &mut Library,
    scale: &[f64],
    before: Option<&Field>,
    perturbation: &Perturbation,
    tick: &mut dyn FnMut(usize) -> bool,
) -> Result<Pass> {
    let layout = model.layout();
    let sizes = local_sizes(mesh, scale, before);
    let ends = state_sizes(layout, mesh, scale, &sizes, before);
    let mut frame = Frame::new(model, mesh, scale, ends.clone(), perturbation)?;
    let mut responses: Vec<Response> = Vec::with_capacity(mesh.elements.len());
    let mut work = Workspace::default();
    let mut equations = Linearised::default();
    let (zeros, none) = (vec![0.0; layout.jets() * mesh.most_nodes()], vec![0.0; layout.constants()]);
    for (index, element) in mesh.elements.iter().enumerate() {
        if index % 64 == 0 && !tick(index) {
            return Err(Error::Interrupted);
        }
        let tables = library.get(element)?;
        let x: Vec<f64> = tables.nodes.iter().map(|s| element.coordinate(*s)).collect();
        equations.reset(layout, x.len());
        let jets = &zeros[..layout.jets() * x.len()];
        let batch = Batch { piece: element.piece, x: &x, jets, constants: &none };
        model.equations(&batch, &mut equations)?;
        check_finite(model, &x, &equations)?;
        perturbation.apply(model, &batch, &mut equations);
        let local = Sizes { common: scale, local: &sizes[index] };
        let Condensed { mut rows, response } = condense(layout, element, &tables, &equations, local, &mut work)?;
        let ratios = ratios(layout, x.len(), &equations);
        if element.length() < tolerance::SHORT_SHARE * mesh.length() && weak(layout, 0.5 * element.length(), &ratios) {
            balance(&mut rows, width(layout), &ends[index]);
        }
        // The last coefficient is visible at Gauss and Radau nodes: nothing is to be dropped there.
        let blind = library.lobatto() && element.open.is_none();
        let ratios = if blind { ratios } else { vec![0.0; ratios.len()] };
        responses.push(Response { values: response, ratios });
        frame.push(&rows);
        let at_break = mesh.elements.get(index + 1).is_some_and(|next| next.piece != element.piece);
        if at_break {
            frame.pass_point(element.piece + 1);
        }
    }
    let closed = frame.close(model)?;
    let unpack = |values: &DVector<f64>, unit: f64, library: &mut Library| -> Result<Field> {
        let (states, constants) = frame.states(values, unit)?;
        build_field(layout, mesh, library, scale, &sizes, &responses, &states, constants, unit)
    };
    let field = unpack(&closed.solution, 1.0, library)?;
    let free = closed.free.iter().map(|f| unpack(f, 0.0, library)).collect::<Result<Vec<_>>>()?;
    let contradictions = frame.contradictions(model, &closed);
    Ok(Pass { field, condition: closed.condition, free, contradictions })
}

/// Sizes of the unknowns on each element: from the field of an earlier pass, else the common ones.
fn local_sizes(mesh: &Mesh, scale: &[f64], before: Option<&Field>) -> Vec<Vec<f64>> {
    let Some(field) = before else { return vec![scale.to_vec(); mesh.elements.len()] };
    mesh.elements
        .iter()
        .map(|element| {
            let sizes = field.local_sizes(element.left, element.right);
            // Where an unknown vanishes, rows still need a yardstick.
            let largest = sizes.iter().zip(scale).map(|(s, u)| s / u).fold(0.0, f64::max);
            let usable = largest.is_finite() && largest > f64::MIN_POSITIVE * 1e30;
            let floor = if usable { 1e-12 * largest } else { 1.0 };
            sizes.iter().zip(scale).map(|(s, u)| if usable { s.max(floor * u) } else { *u }).collect()
        })
        .collect()
}

/// Whether the lower terms of the equations hardly matter over an element: the solution is all but a polynomial there, and
/// its derivatives are not tied to its size by any exponent.
fn weak(layout: &Layout, half: f64, ratios: &[f64]) -> bool {
    let states = layout.states();
    let own = |k: usize, m: usize| half.powi((m - k) as i32);
    ratios.chunks_exact(states.max(1)).zip(layout.orders()).all(|(row, &top)| {
        layout
            .orders()
            .iter()
            .enumerate()
            .all(|(i, &m)| (0..m).all(|k| row[layout.state(i, k)] * own(k, m.max(top)) <= tolerance::WEAK))
    })
}

/// Divides each row of an element by its largest entry, states counted in the sizes that they have there.
fn balance(rows: &mut [f64], width: usize, sizes: &[f64]) {
    for row in rows.chunks_exact_mut(width) {
        let (left, rest) = row.split_at(sizes.len());
        let entries = left.iter().zip(sizes).chain(rest.iter().zip(sizes));
        let size = entries.fold(0.0f64, |s, (a, z)| s.max((a * z).abs()));
        if size > 0.0 && size.is_finite() {
            row.iter_mut().for_each(|a| *a /= size);
        }
    }
}

/// Sizes of all states on each element, divided by the common scale: what the field of an earlier pass has there, else what
/// the size of the unknown and the length of the element allow. On a short element that is far too much for a derivative
/// of ordinary size, and rows balanced by it would lose that.
fn state_sizes(
    layout: &Layout,
    mesh: &Mesh,
    scale: &[f64],
    sizes: &[Vec<f64>],
    before: Option<&Field>,
) -> Vec<Vec<f64>> {
    let largest: Vec<f64> = match before {
        Some(field) => {
            let of = |(i, &m): (usize, &usize)| (0..m).map(move |k| field.size(i, k));
            layout.orders().iter().enumerate().flat_map(of).collect()
        }
        None => vec![f64::INFINITY; layout.states()],
    };
    mesh.elements
        .iter()
        .zip(sizes)
        .map(|(element, sizes)| {
            let half = 0.5 * element.length();
            let own = before.map(|field| field.local_states(element.left, element.right));
            let states = || layout.orders().iter().enumerate().flat_map(|(i, &m)| (0..m).map(move |k| (i, k)));
            let whole: Vec<f64> = states().map(|(i, k)| sizes[i] / scale[i] / half.powi(k as i32)).collect();
            let Some(own) = own else { return whole };
            let ordinary = states().enumerate().map(|(state, (i, _))| {
                let most = whole[state].min(largest[state].max(f64::MIN_POSITIVE) / scale[i]);
                // Where a state vanishes rows still need a yardstick.
                (own[state] / scale[i]).max(1e-10 * most)
            });
            let ordinary: Vec<f64> = ordinary.collect();
            let short = element.length() < tolerance::SHORT_SHARE * mesh.length();
            let short = short && ordinary.iter().zip(&whole).any(|(own, whole)| *own < tolerance::SHORT * whole);
            if short { ordinary } else { whole }
        })
        .collect()
}

/// A field on another mesh: its highest derivatives are met at the nodes, its states at the left ends.
pub(crate) fn transfer(field: &Field, mesh: &Mesh, library: &mut Library) -> Result<Field> {
    if field.mesh == *mesh {
        return Ok(field.clone());
    }
    let layout = &field.layout;
    let mut hint = 0;
    let mut nodes = Vec::with_capacity(mesh.elements.len());
    for element in &mesh.elements {
        let tables = library.get(element)?;
        let mut jets = Vec::with_capacity(tables.n + 1);
        for s in std::iter::once(&-1.0).chain(&tables.nodes) {
            let x = element.coordinate(*s);
            hint = field.locate_in(x, element.piece, hint);
            jets.push(field.jets(hint, field.element(hint).reference(x), layout.orders()));
        }
        nodes.push(jets);
    }
    from_nodes(layout, mesh, &nodes, field.constants.clone(), library)
}

/// A field from jets at the left end and at all nodes of each element: the states of the former, the highest derivatives
/// of the latter.
pub(crate) fn from_nodes(
    layout: &Layout,
    mesh: &Mesh,
    nodes: &[Vec<Vec<f64>>],
    constants: Vec<f64>,
    library: &mut Library,
) -> Result<Field> {
    let mut series = Vec::with_capacity(mesh.elements.len());
    for (element, nodes) in mesh.elements.iter().zip(nodes) {
        let tables = library.get(element)?;
        let mut jets = Vec::with_capacity(layout.jets());
        for (i, &m) in layout.orders().iter().enumerate() {
            let values: Vec<f64> = nodes[1..].iter().map(|jets| jets[layout.jet(i, m)]).collect();
            let first = layout.jet(i, 0);
            let state = &nodes[0][first..first + m];
            jets.extend(integrate_up(tables.modal(&values), state, 0.5 * element.length()));
        }
        series.push(jets);
    }
    Ok(Field::from_series(mesh.clone(), layout, constants, series))
}

/// What is kept of an element for the back-substitution.
struct Response {
    /// See [`Condensed::response`].
    values: Vec<f64>,
    /// |A_m^-1 A_k| for the lower terms, \[d\]\[M\], largest of three nodes: how large v can be for given states.
    ratios: Vec<f64>,
}

fn ratios(layout: &Layout, n: usize, equations: &Linearised) -> Vec<f64> {
    let (d, j, states) = (layout.unknowns(), layout.jets(), layout.states());
    let mut ratios = vec![0.0f64; d * states];
    for node in [0, n / 2, n - 1] {
        let entry = |e: usize, jet: usize| equations.jets[(e * j + jet) * n + node];
        let leading = DMatrix::from_fn(d, d, |e, i| entry(e, layout.jet(i, layout.orders()[i])));
        let Some(inverse) = leading.try_inverse() else { return vec![0.0; d * states] };
        for (i, &m) in layout.orders().iter().enumerate() {
            for k in 0..m {
                for row in 0..d {
                    let sum: f64 = (0..d).map(|e| (inverse[(row, e)] * entry(e, layout.jet(i, k))).abs()).sum();
                    let at = &mut ratios[row * states + layout.state(i, k)];
                    *at = at.max(sum);
                }
            }
        }
    }
    ratios
}

/// From states and responses to the polynomial on each element.
#[allow(clippy::too_many_arguments)]
fn build_field(
    layout: &Layout,
    mesh: &Mesh,
    library: &mut Library,
    scale: &[f64],
    sizes: &[Vec<f64>],
    responses: &[Response],
    states: &[[Vec<f64>; 2]],
    constants: Vec<f64>,
    unit: f64,
) -> Result<Field> {
    let mut series = Vec::with_capacity(mesh.elements.len());
    let shortest = mesh.elements.iter().map(Element::length).fold(f64::INFINITY, f64::min);
    for (index, element) in mesh.elements.iter().enumerate() {
        let tables = library.get(element)?;
        let (n, inner) = (tables.n, layout.unknowns() * tables.n);
        let [left, right] = &states[index];
        let known = left.iter().chain(right).chain(&constants).copied().chain([unit]);
        let mut v = vec![0.0; inner];
        for (column, z) in responses[index].values.chunks_exact(inner.max(1)).zip(known) {
            if z != 0.0 {
                v.iter_mut().zip(column).for_each(|(v, r)| *v += r * z);
            }
        }
        let half = 0.5 * element.length();
        let mut state = left.clone();
        let mut highest = Vec::with_capacity(layout.unknowns());
        for (i, &m) in layout.orders().iter().enumerate() {
            let factor = sizes[index][i] / half.powi(m as i32);
            let values = &mut v[i * n..(i + 1) * n];
            values.iter_mut().for_each(|v| *v *= factor);
            highest.push(tables.modal(values));
            (0..m).for_each(|k| state[layout.state(i, k)] *= scale[i]);
        }
        // Rounding of a slope comes from the shortest elements and is not damped on the way.
        let invisible = (tolerance::INVISIBLE_GROWTH * element.length() / shortest)
            .clamp(tolerance::INVISIBLE_LEAST, tolerance::INVISIBLE_MOST);
        drop_invisible(layout, half, invisible, &responses[index].ratios, &state, &mut highest);
        let mut jets = Vec::with_capacity(layout.jets());
        for (i, (v, &m)) in highest.into_iter().zip(layout.orders()).enumerate() {
            let first = if m > 0 { layout.state(i, 0) } else { 0 };
            jets.extend(integrate_up(v, &state[first..first + m], half));
        }
        series.push(jets);
    }
    Ok(Field::from_series(mesh.clone(), layout, constants, series))
}

/// Drops the last coefficient of v where it is rounding and nothing else.
///
/// The integral of P_(n-1) vanishes at all n Lobatto nodes, so this coefficient enters the equations only
/// through v itself. Where the coefficient of v is tiny (a stiff region far from its layers), rounding of the other
/// terms makes it a large, meaningless spike that shows between the nodes. It is dropped if it stands out of the
/// coefficients before it and what it adds to the equations is far below the accuracy of any answer.
fn drop_invisible(layout: &Layout, half: f64, invisible: f64, ratios: &[f64], state: &[f64], highest: &mut [Vec<f64>]) {
    let states = layout.states();
    let mut sizes = vec![0.0; states];
    for (i, &m) in layout.orders().iter().enumerate() {
        let largest = (0..m).map(|k| state[layout.state(i, k)].abs() * half.powi(k as i32)).fold(0.0, f64::max);
        (0..m).for_each(|k| sizes[layout.state(i, k)] = largest / half.powi(k as i32));
    }
    for (i, v) in highest.iter_mut().enumerate() {
        let n = v.len();
        if n < 4 || layout.orders()[i] == 0 {
            continue;
        }
        let last = v[n - 1].abs();
        let stands_out = last > 4.0 * v[n - 2].abs().max(v[n - 3].abs());
        let terms: f64 = ratios[i * states..(i + 1) * states].iter().zip(&sizes).map(|(r, s)| r * s).sum();
        if stands_out && last <= invisible * terms {
            v[n - 1] = 0.0;
        }
    }
}
