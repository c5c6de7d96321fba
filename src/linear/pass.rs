//! One linear solve on one mesh.

use super::chain::Chain;
use super::closure::{self, Closed};
use super::element::{Condensed, Sizes, Workspace, condense, width};
use super::tables::Library;
use crate::error::{Error, Result};
use crate::field::{Field, integrate_up};
use crate::mesh::{Element, Mesh};
use crate::model::{Batch, ConditionValue, Layout, Linearised, Model, Place, Side};
use crate::tolerance;
use nalgebra::{DMatrix, DVector};

/// A relative change of all coefficients, by which the sensitivity of the answer to the rounding of the
/// data is felt: every coefficient of an equation gets the factor 1 + size or 1 - size.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct Perturbation {
    /// Relative size; 0 changes nothing.
    size: f64,
    /// Which signs: 0, 1, 2 alternate by a bit of the column's number, so that any two of eight neighbouring
    /// coefficients of an equation differ in one of the three; from 3 on by a hash that also differs from piece to piece.
    pattern: u32,
}

impl Perturbation {
    /// No change.
    pub const NONE: Self = Self { size: 0.0, pattern: 0 };
    /// Number of patterns that make a good sample.
    pub const PATTERNS: u32 = 4;

    /// A change of the usual size with one of the patterns.
    pub fn nudge(pattern: u32) -> Self {
        Self { size: tolerance::NUDGE, pattern }
    }

    fn factor(&self, piece: usize, row: usize, column: usize) -> f64 {
        let by_bits = self.pattern < 3;
        let parts = if by_bits { [0, row as u64, 0] } else { [piece as u64 + 1, row as u64, column as u64] };
        // splitmix64, one step per part
        let mut h = 2385 + u64::from(self.pattern);
        for part in parts {
            h = (h ^ part).wrapping_add(0x9E37_79B9_7F4A_7C15);
            h = (h ^ (h >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
            h = (h ^ (h >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
            h ^= h >> 31;
        }
        let bit = if by_bits { (column >> self.pattern) as u64 & 1 } else { 0 };
        if (h >> 63) ^ bit == 0 { 1.0 + self.size } else { 1.0 - self.size }
    }

    fn apply(&self, piece: usize, layout: &Layout, n: usize, equations: &mut Linearised) {
        if self.size == 0.0 {
            return;
        }
        let (jets, constants) = (layout.jets(), layout.constants());
        for row in 0..layout.unknowns() {
            let multiply = |values: &mut [f64], column: usize| {
                let factor = self.factor(piece, row, column);
                values.iter_mut().for_each(|v| *v *= factor);
            };
            for jet in 0..jets {
                multiply(&mut equations.jets[(row * jets + jet) * n..][..n], jet);
            }
            for c in 0..constants {
                multiply(&mut equations.constants[(row * constants + c) * n..][..n], jets + c);
            }
            multiply(&mut equations.residual[row * n..][..n], jets + constants);
        }
    }

    fn apply_condition(&self, index: usize, value: &mut ConditionValue) {
        if self.size == 0.0 {
            return;
        }
        let row = 1_000_000 + index;
        let entries = value.jets.iter_mut().chain(value.constants.iter_mut()).chain([&mut value.residual]);
        for (column, entry) in entries.enumerate() {
            *entry *= self.factor(0, row, column);
        }
    }
}

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

/// How each point of the model is treated.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Treatment {
    /// All states continuous, no condition: an ordinary joint of two elements.
    Plain,
    /// As many conditions at this point alone as continuities given up: a link of its own.
    Local,
    /// Its states stay in the closing system.
    Kept,
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
    let mut frame = Frame::new(model, mesh, scale, &sizes, perturbation)?;
    let mut responses: Vec<Response> = Vec::with_capacity(mesh.elements.len());
    let mut work = Workspace::default();
    let mut equations = Linearised::default();
    let (zeros, none) = (vec![0.0; layout.jets() * mesh.most_nodes()], vec![0.0; layout.constants()]);
    for (index, element) in mesh.elements.iter().enumerate() {
        if index % 64 == 0 && !tick(index) {
            return Err(Error::Interrupted);
        }
        let tables = library.get(element.nodes)?;
        let x: Vec<f64> = tables.nodes.iter().map(|s| element.coordinate(*s)).collect();
        equations.reset(layout, x.len());
        let jets = &zeros[..layout.jets() * x.len()];
        model.equations(&Batch { piece: element.piece, x: &x, jets, constants: &none }, &mut equations)?;
        check_finite(model, &x, &equations)?;
        perturbation.apply(element.piece, layout, x.len(), &mut equations);
        let local = Sizes { common: scale, local: &sizes[index] };
        let Condensed { rows, response } = condense(layout, element, &tables, &equations, local, &mut work)?;
        responses.push(Response { values: response, ratios: ratios(layout, x.len(), &equations) });
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

/// A field on another mesh: its highest derivatives are met at the nodes, its states at the left ends.
pub(crate) fn transfer(field: &Field, mesh: &Mesh, library: &mut Library) -> Result<Field> {
    if field.mesh == *mesh {
        return Ok(field.clone());
    }
    let layout = &field.layout;
    let mut series = Vec::with_capacity(mesh.elements.len());
    let mut hint = 0;
    for element in &mesh.elements {
        let tables = library.get(element.nodes)?;
        let mut values = vec![Vec::with_capacity(tables.n); layout.unknowns()];
        let mut state = Vec::with_capacity(layout.states());
        for (node, s) in tables.nodes.iter().enumerate() {
            let x = element.coordinate(*s);
            hint = field.locate_in(x, element.piece, hint);
            let jets = field.jets(hint, field.element(hint).reference(x), layout.orders());
            for (i, &m) in layout.orders().iter().enumerate() {
                values[i].push(jets[layout.jet(i, m)]);
                if node == 0 {
                    state.extend((0..m).map(|k| jets[layout.jet(i, k)]));
                }
            }
        }
        let mut jets = Vec::with_capacity(layout.jets());
        let mut first = 0;
        for (values, &m) in values.iter().zip(layout.orders()) {
            jets.extend(integrate_up(tables.modal(values), &state[first..first + m], 0.5 * element.length()));
            first += m;
        }
        series.push(jets);
    }
    Ok(Field::from_series(mesh.clone(), layout, field.constants.clone(), series))
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

fn check_finite(model: &dyn Model, x: &[f64], equations: &Linearised) -> Result<()> {
    let n = x.len();
    let layout = model.layout();
    for (array, per_row) in
        [(&equations.residual, 1), (&equations.jets, layout.jets()), (&equations.constants, layout.constants())]
    {
        if let Some(index) = array.iter().position(|v| !v.is_finite()) {
            let what = model.equation_name(index / (n * per_row));
            return Err(Error::NotFinite { what, x: x[index % n] });
        }
    }
    Ok(())
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
        let tables = library.get(element.nodes)?;
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

/// The chains between kept points, and the rows of the closing system.
struct Frame {
    layout: Layout,
    /// Expected sizes of the states, divided by the common scale, on each element.
    ends: Vec<Vec<f64>>,
    treatments: Vec<Treatment>,
    /// Links to insert at local points.
    local: Vec<Option<Vec<f64>>>,
    /// Rows `[left state | right state | constants | 1]` that tie both sides of each kept inner point.
    joints: Vec<(usize, Vec<f64>)>,
    /// Conditions of the closing system: index, and coefficients per place, constants, 1.
    conditions: Vec<(usize, Vec<(Place, Vec<f64>)>, Vec<f64>)>,
    chains: Vec<Chain>,
    /// Positions on its chain of the left state of each element, in order: chain, position.
    elements: Vec<(usize, usize)>,
    /// Kept points, both ends included.
    kept: Vec<usize>,
}

impl Frame {
    fn new(
        model: &dyn Model,
        mesh: &Mesh,
        scale: &[f64],
        sizes: &[Vec<f64>],
        perturbation: &Perturbation,
    ) -> Result<Self> {
        let layout = model.layout().clone();
        let end = |element: &Element, sizes: &[f64]| -> Vec<f64> {
            let half = 0.5 * element.length();
            let of = |(i, &m): (usize, &usize)| (0..m).map(move |k| sizes[i] / scale[i] / half.powi(k as i32));
            layout.orders().iter().enumerate().flat_map(of).collect()
        };
        let ends: Vec<Vec<f64>> = mesh.elements.iter().zip(sizes).map(|(e, s)| end(e, s)).collect();
        let points = model.points().len();
        let conditions = model.conditions();
        let needed = layout.states() + layout.constants() + model.releases().len();
        if conditions.len() != needed {
            return Err(Error::ConditionCount { found: conditions.len(), needed });
        }
        let mut balance = vec![0isize; points];
        let mut kept = vec![false; points];
        let mut special = vec![false; points];
        (kept[0], kept[points - 1]) = (true, true);
        model.releases().iter().for_each(|r| (balance[r.point] -= 1, special[r.point] = true).0);
        for condition in conditions {
            let mut at: Vec<usize> = condition.places.iter().map(|p| p.point).collect();
            at.sort_unstable();
            at.dedup();
            if let [point] = at[..] {
                balance[point] += 1;
            } else {
                at.iter().for_each(|p| kept[*p] = true);
            }
            at.iter().for_each(|p| special[*p] = true);
        }
        let treatments: Vec<Treatment> = (0..points)
            .map(|p| match (kept[p] || balance[p] != 0, special[p]) {
                (true, _) => Treatment::Kept,
                (false, true) => Treatment::Local,
                (false, false) => Treatment::Plain,
            })
            .map(|t| if layout.states() == 0 && t == Treatment::Local { Treatment::Kept } else { t })
            .collect();
        let treatments: Vec<Treatment> = treatments
            .into_iter()
            .enumerate()
            .map(|(p, t)| if p == 0 || p + 1 == points { Treatment::Kept } else { t })
            .collect();
        let mut frame = Self {
            local: vec![None; points],
            joints: Vec::new(),
            conditions: Vec::new(),
            chains: vec![Chain::new(layout.states(), layout.constants())],
            elements: Vec::new(),
            kept: (0..points).filter(|p| treatments[*p] == Treatment::Kept).collect(),
            treatments,
            ends,
            layout,
        };
        frame.lay_out(model, mesh, scale, perturbation)?;
        Ok(frame)
    }

    /// Continuity rows and conditions, sorted into local links and the closing system.
    fn lay_out(&mut self, model: &dyn Model, mesh: &Mesh, scale: &[f64], perturbation: &Perturbation) -> Result<()> {
        let layout = self.layout.clone();
        let (m, width) = (layout.states(), width(&layout));
        let joint = |point: usize| -> Vec<f64> {
            let mut rows = Vec::with_capacity(m * width);
            for (i, &order) in layout.orders().iter().enumerate() {
                for k in 0..order {
                    if model.releases().iter().any(|r| (r.point, r.unknown, r.order) == (point, i, k)) {
                        continue;
                    }
                    let state = layout.state(i, k);
                    let mut row = vec![0.0; width];
                    (row[state], row[m + state]) = (1.0, -1.0);
                    rows.extend(row);
                }
            }
            rows
        };
        for point in 1..self.treatments.len() - 1 {
            match self.treatments[point] {
                Treatment::Plain => {}
                Treatment::Local => self.local[point] = Some(joint(point)),
                Treatment::Kept => self.joints.push((point, joint(point))),
            }
        }
        for (index, condition) in model.conditions().iter().enumerate() {
            let (places, tail) = linear_condition(model, index, scale, perturbation)?;
            let local = condition.places.first().and_then(|p| self.local[p.point].as_mut());
            if let Some(rows) = local {
                let mut row = vec![0.0; width];
                for (place, coefficients) in &places {
                    let first = if place.side == Side::Left { 0 } else { m };
                    row[first..first + m].iter_mut().zip(coefficients).for_each(|(r, c)| *r += c);
                }
                row[2 * m..].copy_from_slice(&tail);
                rows.extend(row);
            } else {
                self.conditions.push((index, places, tail));
            }
        }
        for (point, rows) in self.local.iter_mut().enumerate() {
            let Some(rows) = rows else { continue };
            let after = mesh.elements.partition_point(|e| e.piece < point);
            let weights: Vec<f64> = self.ends[after - 1].iter().chain(&self.ends[after]).copied().collect();
            for row in rows.chunks_exact_mut(width) {
                let size = row.iter().zip(&weights).fold(0.0f64, |s, (a, w)| s.max((a * w).abs()));
                if size > 0.0 {
                    row.iter_mut().for_each(|a| *a /= size);
                }
            }
        }
        Ok(())
    }

    /// Takes in the condensed rows of the next element.
    fn push(&mut self, rows: &[f64]) {
        let chain = self.chains.len() - 1;
        self.elements.push((chain, self.chains[chain].len() - 1));
        self.chains[chain].push(rows);
    }

    /// The last element ended at this inner point.
    fn pass_point(&mut self, point: usize) {
        match self.treatments[point] {
            Treatment::Plain => {}
            Treatment::Local => {
                if let (Some(link), Some(chain)) = (&self.local[point], self.chains.last_mut()) {
                    chain.push(link);
                }
            }
            Treatment::Kept => self.chains.push(Chain::new(self.layout.states(), self.layout.constants())),
        }
    }

    /// First column of the state on the inner side of chain `chain`: at its left or right end.
    fn column(&self, chain: usize, side: Side) -> usize {
        (2 * chain + usize::from(side == Side::Left)) * self.layout.states()
    }

    /// Column of a place in the closing system.
    fn place_column(&self, place: &Place) -> usize {
        let index = self.kept.partition_point(|k| *k < place.point);
        let last = self.kept.len() - 1;
        match (index, place.side) {
            (0, _) => self.column(0, Side::Right),
            (i, _) if i == last => self.column(last - 1, Side::Left),
            (i, Side::Left) => self.column(i - 1, Side::Left),
            (i, Side::Right) => self.column(i, Side::Right),
        }
    }

    fn close(&self, model: &dyn Model) -> Result<Closed> {
        let (m, constants) = (self.layout.states(), self.layout.constants());
        let size = 2 * m * self.chains.len() + constants;
        let (mut a, mut b) = (DMatrix::zeros(size, size), DVector::zeros(size));
        let mut next = 0;
        let mut add = |parts: &[(usize, &[f64])], tail: &[f64]| -> Result<()> {
            if next == size {
                return Err(Error::ConditionCount { found: size + 1, needed: size });
            }
            for (column, values) in parts {
                values.iter().enumerate().for_each(|(k, v)| a[(next, column + k)] += v);
            }
            tail[..constants].iter().enumerate().for_each(|(c, v)| a[(next, 2 * m * self.chains.len() + c)] = *v);
            b[next] = -tail[constants];
            next += 1;
            Ok(())
        };
        let width = width(&self.layout);
        for (index, chain) in self.chains.iter().enumerate() {
            let (left, right) = (self.column(index, Side::Right), self.column(index, Side::Left));
            for row in chain.reduced().unwrap_or(&[]).chunks_exact(width) {
                add(&[(left, &row[..m]), (right, &row[m..2 * m])], &row[2 * m..])?;
            }
        }
        for (point, rows) in &self.joints {
            let left = self.place_column(&Place { point: *point, side: Side::Left });
            let right = self.place_column(&Place { point: *point, side: Side::Right });
            for row in rows.chunks_exact(width) {
                add(&[(left, &row[..m]), (right, &row[m..2 * m])], &row[2 * m..])?;
            }
        }
        for (_, places, tail) in &self.conditions {
            let parts: Vec<(usize, &[f64])> =
                places.iter().map(|(place, c)| (self.place_column(place), c.as_slice())).collect();
            add(&parts, tail)?;
        }
        if next != size {
            return Err(Error::ConditionCount {
                found: model.conditions().len(),
                needed: model.conditions().len() + size - next,
            });
        }
        let mut sizes = DVector::from_element(size, 1.0);
        let last_elements = self.elements.windows(2).enumerate().filter(|(_, w)| w[0].0 != w[1].0).map(|(e, _)| e);
        let mut first = 0;
        for (chain, last) in last_elements.chain([self.elements.len() - 1]).enumerate() {
            for (side, element) in [(Side::Right, first), (Side::Left, last)] {
                sizes.rows_mut(self.column(chain, side), m).copy_from_slice(&self.ends[element]);
            }
            first = last + 1;
        }
        closure::close(&a, &b, &sizes)
    }

    /// States at both ends of each element, and the constants.
    #[allow(clippy::type_complexity)]
    fn states(&self, values: &DVector<f64>, unit: f64) -> Result<(Vec<[Vec<f64>; 2]>, Vec<f64>)> {
        let m = self.layout.states();
        let values = values.as_slice();
        let constants = values[2 * m * self.chains.len()..].to_vec();
        let mut all = Vec::with_capacity(self.chains.len());
        for (index, chain) in self.chains.iter().enumerate() {
            let at = |side| &values[self.column(index, side)..][..m];
            all.push(chain.states(at(Side::Right), at(Side::Left), &constants, unit)?);
        }
        let pairs = self.elements.iter().map(|(c, p)| [all[*c][*p].clone(), all[*c][*p + 1].clone()]).collect();
        Ok((pairs, constants))
    }

    /// Which conditions take part in each vanishing combination of rows.
    fn contradictions(&self, model: &dyn Model, closed: &Closed) -> Vec<(Vec<String>, f64)> {
        let first = closed.solution.len() - self.conditions.len();
        closed
            .combinations
            .iter()
            .map(|(weights, against)| {
                let largest = weights.amax();
                let mut names: Vec<String> = self
                    .conditions
                    .iter()
                    .enumerate()
                    .filter(|(row, _)| weights[first + row].abs() > 1e-6 * largest)
                    .map(|(_, (index, _, _))| model.conditions()[*index].name.clone())
                    .collect();
                names.dedup();
                (names, *against)
            })
            .collect()
    }
}

/// A condition as coefficients of scaled states at its places, of the constants, and the rest. Highest
/// derivatives are replaced through the equations, which hold at the ends of an element.
#[allow(clippy::type_complexity)]
fn linear_condition(
    model: &dyn Model,
    index: usize,
    scale: &[f64],
    perturbation: &Perturbation,
) -> Result<(Vec<(Place, Vec<f64>)>, Vec<f64>)> {
    let layout = model.layout();
    let condition = &model.conditions()[index];
    let mut value = ConditionValue::default();
    value.reset(layout, condition.places.len());
    let zeros = vec![0.0; condition.places.len() * layout.jets()];
    model.condition(index, &zeros, &vec![0.0; layout.constants()], &mut value)?;
    let entries = value.jets.iter().chain(&value.constants).chain([&value.residual]);
    if !entries.into_iter().all(|v| v.is_finite()) {
        let x = condition.places.first().map_or(0.0, |p| model.points()[p.point]);
        return Err(Error::NotFinite { what: format!("condition {}", condition.name), x });
    }
    perturbation.apply_condition(index, &mut value);
    let mut tail = value.constants.clone();
    tail.push(value.residual);
    let mut places = Vec::with_capacity(condition.places.len());
    for (place, jets) in condition.places.iter().zip(value.jets.chunks_exact(layout.jets().max(1))) {
        let mut coefficients = vec![0.0; layout.states()];
        for (i, &m) in layout.orders().iter().enumerate() {
            (0..m).for_each(|k| coefficients[layout.state(i, k)] = jets[layout.jet(i, k)]);
        }
        let highest: Vec<f64> = layout.orders().iter().enumerate().map(|(i, &m)| jets[layout.jet(i, m)]).collect();
        if highest.iter().any(|h| *h != 0.0) {
            replace_highest(model, place, perturbation, &highest, &mut coefficients, &mut tail)?;
        }
        for (i, &m) in layout.orders().iter().enumerate() {
            (0..m).for_each(|k| coefficients[layout.state(i, k)] *= scale[i]);
        }
        places.push((*place, coefficients));
    }
    Ok((places, tail))
}

/// Adds highest . v with v = -A_m^-1 (lower terms + constants + residual) at a place.
fn replace_highest(
    model: &dyn Model,
    place: &Place,
    perturbation: &Perturbation,
    highest: &[f64],
    coefficients: &mut [f64],
    tail: &mut [f64],
) -> Result<()> {
    let layout = model.layout();
    let (d, jets, constants) = (layout.unknowns(), layout.jets(), layout.constants());
    let last = model.points().len() - 1;
    let piece = match (place.point, place.side) {
        (0, _) => 0,
        (p, _) if p == last => last - 1,
        (p, Side::Left) => p - 1,
        (p, Side::Right) => p,
    };
    let x = [model.points()[place.point]];
    let mut equations = Linearised::default();
    equations.reset(layout, 1);
    let batch = Batch { piece, x: &x, jets: &vec![0.0; jets], constants: &vec![0.0; constants] };
    model.equations(&batch, &mut equations)?;
    check_finite(model, &x, &equations)?;
    perturbation.apply(piece, layout, 1, &mut equations);
    let leading = DMatrix::from_fn(d, d, |e, i| equations.jets[e * jets + layout.jet(i, layout.orders()[i])]);
    // highest . A_m^-1 as weights of the equations
    let weights = leading.transpose().full_piv_lu().solve(&DVector::from_column_slice(highest));
    let weights = weights.filter(|w| w.iter().all(|w| w.is_finite())).ok_or_else(|| {
        Error::Singular(format!(
            "the equations do not determine the highest derivatives at x = {} (SI), where a condition asks for one",
            x[0]
        ))
    })?;
    for (e, weight) in weights.iter().enumerate() {
        for (i, &m) in layout.orders().iter().enumerate() {
            for k in 0..m {
                coefficients[layout.state(i, k)] -= weight * equations.jets[e * jets + layout.jet(i, k)];
            }
        }
        for c in 0..constants {
            tail[c] -= weight * equations.constants[e * constants + c];
        }
        tail[constants] -= weight * equations.residual[e];
    }
    Ok(())
}
