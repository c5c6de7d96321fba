//! Initial-value problems: the solution element by element, as a start for the iteration on the whole span.
//!
//! On each element the collocation equations alone determine v = u^(m) once the state at the left end is known. The
//! march only has to come near the solution: [`super::nonlinear`] then solves all elements together, refines the mesh and
//! makes the bars, as for any other problem. So no error adds up from element to element.
//!
//! Lobatto and Gauss collocation carry a fast decaying mode on with hardly any damping once an element is much longer than
//! its length of decay. The march therefore resolves transients: an element counts only when its coefficients have
//! fallen, and where a transient has been resolved nothing of it is left to be carried on.

use super::{Progress, Settings};
use crate::error::{Error, Result};
use crate::field::{Field, integrate_up};
use crate::legendre;
use crate::linear::Tables;
use crate::mesh::{Element, Mesh};
use crate::model::{Batch, ConditionValue, Layout, Linearised, Model};
use nalgebra::{DMatrix, DVector};

/// Nodes of an element.
const NODES: usize = 16;
/// Size of the last coefficients, relative to the largest value so far, at which an element counts.
const TAIL: f64 = 1e-10;
/// Most elements.
const MOST: usize = 20_000;
/// Most steps of Newton's iteration on an element.
const STEPS: usize = 12;
/// Shortest element, relative to the span or the coordinate.
const SHORTEST: f64 = 1e-13;

/// Whether all conditions stand at the first point and determine the state there.
pub(super) fn initial(model: &dyn Model) -> bool {
    let layout = model.layout();
    layout.states() > 0
        && layout.constants() == 0
        && model.releases().is_empty()
        && model.conditions().len() == layout.states()
        && model.conditions().iter().all(|c| !c.places.is_empty() && c.places.iter().all(|p| p.point == 0))
}

/// Marches from the first point to the last. `None` where the conditions do not give the state at the start.
///
/// # Errors
/// [`Error::NoSolution`] with the place where the march came to its end: there is no other solution to look for.
pub(super) fn march(model: &dyn Model, settings: &Settings<'_>) -> Result<Option<Field>> {
    let layout = model.layout();
    let Some(state) = start(model)? else { return Ok(None) };
    let depth = layout.orders().iter().copied().max().unwrap_or(0);
    let tables = Tables::of(&legendre::radau(NODES, legendre::End::Right)?, depth)?;
    let points = model.points();
    let span = points[points.len() - 1] - points[0];
    let mut march = March {
        model,
        sizes: vec![0.0; layout.unknowns()],
        highest: highest(model, points[0], &state)?,
        state,
        elements: Vec::new(),
        series: Vec::new(),
    };
    let mut h = 1e-3 * span;
    for (piece, ends) in points.windows(2).enumerate() {
        let mut x = ends[0];
        h = h.min(ends[1] - ends[0]);
        while x < ends[1] {
            if let Some(watch) = settings.watch
                && !watch(Progress { pass: 0, elements: march.elements.len() + 1, done: march.elements.len() })
            {
                return Err(Error::Interrupted);
            }
            // No crumbs at the end of a piece.
            let rest = ends[1] - x;
            let right = if h >= rest * (1.0 - 1e-9) {
                ends[1]
            } else if h > 0.5 * rest {
                x + 0.5 * rest
            } else {
                x + h
            };
            let element = Element { left: x, right, nodes: NODES, piece, open: None };
            let length = element.length();
            match march.element(&element, &tables)? {
                Outcome::Resolved(spare) => {
                    x = right;
                    h = length * spare;
                }
                Outcome::Unresolved => h = 0.5 * length,
                Outcome::Lost => h = 0.25 * length,
            }
            let least = SHORTEST * span.max(x.abs());
            if h < least || march.elements.len() >= MOST.min(settings.most_elements) {
                let why = if h < least { "it cannot be continued smoothly" } else { "too many elements are needed" };
                let tried = format!("followed from x = {} to x = {x} (SI), where {why}", points[0]);
                return Err(Error::NoSolution { tried });
            }
        }
    }
    let mesh = Mesh { elements: march.elements };
    Ok(Some(Field::from_series(mesh, layout, Vec::new(), march.series)))
}

/// What became of an element.
enum Outcome {
    /// It counts; the next may be longer by this factor.
    Resolved(f64),
    Unresolved,
    /// Newton's iteration found nothing, or nothing admissible.
    Lost,
}

struct March<'a> {
    model: &'a dyn Model,
    /// Largest size of u_i^(m_i-1) (v for order 0) so far.
    sizes: Vec<f64>,
    /// v at the end reached.
    highest: Vec<f64>,
    /// State at the end reached.
    state: Vec<f64>,
    elements: Vec<Element>,
    series: Vec<Vec<Vec<f64>>>,
}

impl March<'_> {
    fn element(&mut self, element: &Element, tables: &Tables) -> Result<Outcome> {
        let layout = self.model.layout();
        let n = tables.n;
        let Some(v) = self.collocate(element, tables)? else { return Ok(Outcome::Lost) };
        let half = 0.5 * element.length();
        let mut series: Vec<Vec<f64>> = Vec::with_capacity(layout.jets());
        let mut worst = 0.0f64;
        let mut sizes = self.sizes.clone();
        for (i, &m) in layout.orders().iter().enumerate() {
            let first = if m > 0 { layout.state(i, 0) } else { 0 };
            let modal = tables.modal(&v.as_slice()[i * n..(i + 1) * n]);
            let tail = modal[n - 2..].iter().fold(0.0f64, |s, c| s.max(c.abs()));
            let jets = integrate_up(modal, &self.state[first..first + m], half);
            let size: f64 = jets[m.max(1) - 1].iter().map(|c| c.abs()).sum();
            sizes[i] = sizes[i].max(size);
            let factor = if m == 0 { 1.0 } else { half };
            if sizes[i] > 0.0 {
                worst = worst.max(factor * tail / sizes[i]);
            }
            series.extend(jets);
        }
        if !worst.is_finite() {
            return Ok(Outcome::Lost);
        }
        if worst > TAIL {
            return Ok(Outcome::Unresolved);
        }
        // At the right end every Legendre polynomial is 1.
        let end = |jet: usize| series[jet].iter().sum::<f64>();
        for (i, &m) in layout.orders().iter().enumerate() {
            (0..m).for_each(|k| self.state[layout.state(i, k)] = end(layout.jet(i, k)));
            self.highest[i] = end(layout.jet(i, m));
        }
        self.sizes = sizes;
        self.elements.push(*element);
        self.series.push(series);
        Ok(Outcome::Resolved(if worst < 1e-4 * TAIL { 2.0 } else { 1.2 }))
    }

    /// v at the nodes from the state at the left end, by Newton's iteration; `None` if that fails.
    fn collocate(&self, element: &Element, tables: &Tables) -> Result<Option<DVector<f64>>> {
        let layout = self.model.layout();
        let (n, d, j) = (tables.n, layout.unknowns(), layout.jets());
        let half = 0.5 * element.length();
        let x: Vec<f64> = tables.nodes.iter().map(|s| element.coordinate(*s)).collect();
        let mut v = DVector::from_fn(d * n, |k, _| self.highest[k / n]);
        let mut equations = Linearised::default();
        let mut before = f64::INFINITY;
        for _ in 0..STEPS {
            let jets = self.jets(layout, tables, half, &v);
            equations.reset(layout, n);
            self.model
                .equations(&Batch { piece: element.piece, x: &x, jets: &jets, constants: &[] }, &mut equations)?;
            if !equations.residual.iter().chain(&equations.jets).all(|r| r.is_finite()) {
                return Ok(None);
            }
            let mut matrix = DMatrix::zeros(d * n, d * n);
            for (i, &m) in layout.orders().iter().enumerate() {
                for e in 0..d {
                    for k in 0..=m {
                        let row = (e * j + layout.jet(i, k)) * n;
                        let a = &equations.jets[row..row + n];
                        if a.iter().all(|a| *a == 0.0) {
                            continue;
                        }
                        let factor = half.powi((m - k) as i32);
                        for (node, a) in a.iter().enumerate() {
                            if k == m {
                                matrix[(e * n + node, i * n + node)] += a;
                            } else {
                                let q = &tables.integrals[m - k - 1];
                                (0..n).for_each(|c| matrix[(e * n + node, i * n + c)] += a * factor * q[c * n + node]);
                            }
                        }
                    }
                }
            }
            let Some(step) = matrix.lu().solve(&DVector::from_column_slice(&equations.residual)) else {
                return Ok(None);
            };
            v -= &step;
            let size = (step.amax()) / v.amax().max(f64::MIN_POSITIVE);
            if !size.is_finite() || size > 1e3 * before {
                return Ok(None);
            }
            if size < 1e-9 || v.amax() == 0.0 {
                let jets = self.jets(layout, tables, half, &v);
                let at = |node: usize| (0..j).map(|k| jets[k * n + node]).collect::<Vec<f64>>();
                let inside = (0..n).all(|node| self.model.admissible(x[node], &at(node), &[]));
                return Ok(inside.then_some(v));
            }
            before = size;
        }
        Ok(None)
    }

    /// Jets at the nodes, \[J\]\[n\]: Taylor polynomial of the state and integrals of v.
    fn jets(&self, layout: &Layout, tables: &Tables, half: f64, v: &DVector<f64>) -> Vec<f64> {
        let n = tables.n;
        let mut jets = vec![0.0; layout.jets() * n];
        for (i, &m) in layout.orders().iter().enumerate() {
            let own = &v.as_slice()[i * n..(i + 1) * n];
            for k in 0..=m {
                let row = &mut jets[layout.jet(i, k) * n..][..n];
                if k == m {
                    row.copy_from_slice(own);
                    continue;
                }
                let factor = half.powi((m - k) as i32);
                let q = &tables.integrals[m - k - 1];
                for (node, jet) in row.iter_mut().enumerate() {
                    let step = half * (1.0 + tables.nodes[node]);
                    let (mut power, mut sum) = (1.0, 0.0);
                    for l in k..m {
                        sum += self.state[layout.state(i, l)] * power;
                        power *= step / (l - k + 1) as f64;
                    }
                    *jet = sum + factor * own.iter().enumerate().map(|(c, v)| v * q[c * n + node]).sum::<f64>();
                }
            }
        }
        jets
    }
}

/// The state at the first point from the conditions, by Newton's iteration from zero.
fn start(model: &dyn Model) -> Result<Option<Vec<f64>>> {
    let layout = model.layout();
    let size = layout.states();
    let mut state = DVector::zeros(size);
    let mut value = ConditionValue::default();
    for step in 0..40 {
        let jets = jets_of(layout, state.as_slice(), None);
        let mut matrix = DMatrix::zeros(size, size);
        let mut residual = DVector::zeros(size);
        for (row, condition) in model.conditions().iter().enumerate() {
            let places = condition.places.len();
            value.reset(layout, places);
            model.condition(row, &jets.repeat(places), &[], &mut value)?;
            residual[row] = value.residual;
            for place in 0..places {
                for (i, &m) in layout.orders().iter().enumerate() {
                    let at = |k: usize| value.jets[place * layout.jets() + layout.jet(i, k)];
                    if at(m) != 0.0 {
                        return Ok(None);
                    }
                    (0..m).for_each(|k| matrix[(row, layout.state(i, k))] += at(k));
                }
            }
        }
        let Some(change) = matrix.full_piv_lu().solve(&residual).filter(|c| c.iter().all(|c| c.is_finite())) else {
            return Ok(None);
        };
        state -= &change;
        if step > 0 && change.amax() <= 1e-13 * state.amax() || state.amax() == 0.0 {
            return Ok(Some(state.as_slice().to_vec()));
        }
    }
    Ok(None)
}

/// v at a point from the state, as far as Newton's iteration finds it; zero else.
fn highest(model: &dyn Model, x: f64, state: &[f64]) -> Result<Vec<f64>> {
    let layout = model.layout();
    let (d, j) = (layout.unknowns(), layout.jets());
    let mut v = DVector::zeros(d);
    let mut equations = Linearised::default();
    for _ in 0..20 {
        let jets = jets_of(layout, state, Some(v.as_slice()));
        equations.reset(layout, 1);
        model.equations(&Batch { piece: 0, x: &[x], jets: &jets, constants: &[] }, &mut equations)?;
        let matrix = DMatrix::from_fn(d, d, |e, i| equations.jets[e * j + layout.jet(i, layout.orders()[i])]);
        let change = matrix.full_piv_lu().solve(&DVector::from_column_slice(&equations.residual));
        let Some(change) = change.filter(|c| c.iter().all(|c| c.is_finite())) else { break };
        v -= &change;
        if change.amax() <= 1e-9 * v.amax() {
            break;
        }
    }
    Ok(v.as_slice().to_vec())
}

fn jets_of(layout: &Layout, state: &[f64], highest: Option<&[f64]>) -> Vec<f64> {
    let mut jets = vec![0.0; layout.jets()];
    for (i, &m) in layout.orders().iter().enumerate() {
        (0..m).for_each(|k| jets[layout.jet(i, k)] = state[layout.state(i, k)]);
        jets[layout.jet(i, m)] = highest.map_or(0.0, |v| v[i]);
    }
    jets
}
