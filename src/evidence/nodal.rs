//! Second route: nodal values, differentiation matrices, one dense factorisation.
//!
//! Shares with the main route only the model and the nodes' tables: the unknowns are nodal values of u_i
//! at n + m_i Lobatto nodes, derivatives come from differentiation matrices, the equations hold at n Gauss
//! nodes, and one LU factorisation solves everything. Digits are lost with growing n (the condition of the
//! differentiation matrices), so it is evidence, not an answer.

use crate::adapt::exponents;
use crate::error::{Error, Result};
use crate::field::Field;
use crate::legendre;
use crate::mesh::{Element, Mesh};
use crate::model::{Batch, ConditionValue, Layout, Linearised, Model, Place, Side};
use crate::operator;
use nalgebra::{DMatrix, DVector};

/// Largest dense system: some two seconds of factorisation.
const LARGEST: usize = 3000;

/// Solves a linear problem on a mesh by the second route.
///
/// # Errors
/// [`Error::Unsupported`] when the dense system would be too large; [`Error::Singular`] when it is
/// singular.
pub fn nodal(model: &dyn Model, mesh: &Mesh) -> Result<Field> {
    let layout = model.layout();
    let offsets = offsets(layout, mesh);
    let size = offsets.last().copied().unwrap_or(0) + layout.constants();
    if size > LARGEST {
        return Err(Error::Unsupported(format!(
            "the second route is a dense system of {size} unknowns here; it is limited to {LARGEST}"
        )));
    }
    let mut system = System { layout, mesh, offsets, a: DMatrix::zeros(size, size), b: DVector::zeros(size), row: 0 };
    let mut grids = Vec::with_capacity(mesh.elements.len());
    for element in &mesh.elements {
        grids.push(Grid::new(layout, element)?);
    }
    for (index, element) in mesh.elements.iter().enumerate() {
        system.equations(model, index, element, &grids[index])?;
    }
    for index in 1..mesh.elements.len() {
        system.joint(model, index, &grids);
    }
    for index in 0..model.conditions().len() {
        system.condition(model, index, &grids)?;
    }
    if system.row != size {
        return Err(Error::ConditionCount { found: system.row, needed: size });
    }
    let solution = system.solve(&exponents::scales(model)?)?;
    let series = mesh.elements.iter().enumerate().map(|(index, _)| {
        let grid = &grids[index];
        let mut start = system.offsets[index];
        let mut all = Vec::with_capacity(layout.jets());
        for (i, &m) in layout.orders().iter().enumerate() {
            let count = grid.modal[i].nrows();
            let values = solution.rows(start, count).into_owned();
            all.extend((0..=m).map(|k| (&grid.modal[i] * (&grid.derivatives[i][k] * &values)).as_slice().to_vec()));
            start += count;
        }
        all
    });
    let series = series.collect();
    let constants = solution.rows(size - layout.constants(), layout.constants()).as_slice().to_vec();
    Ok(Field::from_series(mesh.clone(), layout, constants, series))
}

/// First column of each element, and the number of columns.
fn offsets(layout: &Layout, mesh: &Mesh) -> Vec<usize> {
    let mut offsets = vec![0];
    for element in &mesh.elements {
        let columns: usize = layout.orders().iter().map(|m| element.nodes + m).sum();
        offsets.push(offsets[offsets.len() - 1] + columns);
    }
    offsets
}

/// Matrices of one element, for each unknown.
struct Grid {
    /// D^k, k = 0..=m, in the coordinate x.
    derivatives: Vec<Vec<DMatrix<f64>>>,
    /// From the unknown's nodes to the Gauss nodes.
    resample: Vec<DMatrix<f64>>,
    /// From the unknown's nodes to Legendre coefficients.
    modal: Vec<DMatrix<f64>>,
    /// Gauss nodes in x.
    x: Vec<f64>,
}

impl Grid {
    fn new(layout: &Layout, element: &Element) -> Result<Self> {
        let gauss = legendre::gauss(element.nodes)?;
        let (mut derivatives, mut resample, mut modal) = (Vec::new(), Vec::new(), Vec::new());
        for &m in layout.orders() {
            let rule = legendre::lobatto((element.nodes + m).max(2))?;
            let scale = 2.0 / element.length();
            let mut powers = vec![DMatrix::identity(rule.len(), rule.len())];
            for k in 1..=m {
                powers.push(operator::differentiation(rule.nodes(), k)? * scale.powi(k as i32));
            }
            derivatives.push(powers);
            resample.push(operator::interpolation(rule.nodes(), gauss.nodes())?);
            modal.push(legendre::to_modal(&rule));
        }
        let x = gauss.nodes().iter().map(|s| element.coordinate(*s)).collect();
        Ok(Self { derivatives, resample, modal, x })
    }

    /// Row of D^k of an unknown at the left or right end.
    fn end(&self, unknown: usize, order: usize, side: Side) -> nalgebra::RowDVector<f64> {
        let matrix = &self.derivatives[unknown][order];
        matrix.row(if side == Side::Right { 0 } else { matrix.nrows() - 1 }).into_owned()
    }
}

struct System<'a> {
    layout: &'a Layout,
    mesh: &'a Mesh,
    offsets: Vec<usize>,
    a: DMatrix<f64>,
    b: DVector<f64>,
    row: usize,
}

impl System<'_> {
    /// First column of an unknown on an element.
    fn column(&self, element: usize, unknown: usize) -> usize {
        let before: usize = self.layout.orders()[..unknown].iter().map(|m| self.mesh.elements[element].nodes + m).sum();
        self.offsets[element] + before
    }

    fn add(&mut self, column: usize, coefficients: &nalgebra::RowDVector<f64>, factor: f64) {
        for (k, c) in coefficients.iter().enumerate() {
            self.a[(self.row, column + k)] += factor * c;
        }
    }

    fn equations(&mut self, model: &dyn Model, index: usize, element: &Element, grid: &Grid) -> Result<()> {
        let (d, j, p) = (self.layout.unknowns(), self.layout.jets(), self.layout.constants());
        let n = grid.x.len();
        let mut equations = Linearised::default();
        equations.reset(self.layout, n);
        let (jets, constants) = (vec![0.0; j * n], vec![0.0; p]);
        let batch = Batch { piece: element.piece, x: &grid.x, jets: &jets, constants: &constants };
        model.equations(&batch, &mut equations)?;
        let first_constant = self.offsets[self.offsets.len() - 1];
        for e in 0..d {
            for node in 0..n {
                for i in 0..d {
                    let m = self.layout.orders()[i];
                    let column = self.column(index, i);
                    for k in 0..=m {
                        let a = equations.jets[(e * j + self.layout.jet(i, k)) * n + node];
                        if a != 0.0 {
                            let row = grid.resample[i].row(node) * &grid.derivatives[i][k];
                            self.add(column, &row, a);
                        }
                    }
                }
                for c in 0..p {
                    self.a[(self.row, first_constant + c)] = equations.constants[(e * p + c) * n + node];
                }
                self.b[self.row] = -equations.residual[e * n + node];
                self.row += 1;
            }
        }
        Ok(())
    }

    /// Continuity between element `index - 1` and `index`.
    fn joint(&mut self, model: &dyn Model, index: usize, grids: &[Grid]) {
        let (before, after) = (self.mesh.elements[index - 1].piece, self.mesh.elements[index].piece);
        for i in 0..self.layout.unknowns() {
            for k in 0..self.layout.orders()[i] {
                let released =
                    before != after && model.releases().iter().any(|r| (r.point, r.unknown, r.order) == (after, i, k));
                if released {
                    continue;
                }
                let (left, right) = (self.column(index - 1, i), self.column(index, i));
                self.add(left, &grids[index - 1].end(i, k, Side::Left), 1.0);
                self.add(right, &grids[index].end(i, k, Side::Right), -1.0);
                self.row += 1;
            }
        }
    }

    fn condition(&mut self, model: &dyn Model, index: usize, grids: &[Grid]) -> Result<()> {
        let condition = &model.conditions()[index];
        let mut value = ConditionValue::default();
        value.reset(self.layout, condition.places.len());
        let zeros = vec![0.0; condition.places.len() * self.layout.jets()];
        model.condition(index, &zeros, &vec![0.0; self.layout.constants()], &mut value)?;
        for (place, jets) in condition.places.iter().zip(value.jets.chunks_exact(self.layout.jets().max(1))) {
            let (element, side) = self.element_at(model, place);
            for i in 0..self.layout.unknowns() {
                for k in 0..=self.layout.orders()[i] {
                    let a = jets[self.layout.jet(i, k)];
                    if a != 0.0 {
                        let column = self.column(element, i);
                        self.add(column, &grids[element].end(i, k, side), a);
                    }
                }
            }
        }
        let first_constant = self.offsets[self.offsets.len() - 1];
        for (c, a) in value.constants.iter().enumerate() {
            self.a[(self.row, first_constant + c)] = *a;
        }
        self.b[self.row] = -value.residual;
        self.row += 1;
        Ok(())
    }

    /// The element on the given side of a place, and the side of the place it lies on.
    fn element_at(&self, model: &dyn Model, place: &Place) -> (usize, Side) {
        let last = model.points().len() - 1;
        let side = match place.point {
            0 => Side::Right,
            p if p == last => Side::Left,
            _ => place.side,
        };
        let elements = &self.mesh.elements;
        let element = match side {
            Side::Right => elements.partition_point(|e| e.piece < place.point),
            Side::Left => elements.partition_point(|e| e.piece < place.point) - 1,
        };
        (element, side)
    }

    fn solve(&mut self, scale: &[f64]) -> Result<DVector<f64>> {
        // Columns first (sizes of the unknowns), then rows, so that pivots compare like with like.
        let mut columns = vec![1.0; self.a.ncols()];
        for (element, e) in self.mesh.elements.iter().enumerate() {
            for (i, &m) in self.layout.orders().iter().enumerate() {
                let first = self.column(element, i);
                columns[first..first + e.nodes + m].fill(1.0 / scale[i]);
            }
        }
        for (mut column, scale) in self.a.column_iter_mut().zip(&columns) {
            column /= *scale;
        }
        for (mut row, b) in self.a.row_iter_mut().zip(self.b.iter_mut()) {
            let scale = row.amax();
            if scale > 0.0 {
                row /= scale;
                *b /= scale;
            }
        }
        let lu = self.a.clone().lu();
        let solved = lu.solve(&self.b).and_then(|mut x| {
            // Two steps of refinement against the growth of the factors.
            for _ in 0..2 {
                x += lu.solve(&(&self.b - &self.a * &x))?;
            }
            Some(x)
        });
        let mut solution = solved
            .filter(|s| s.iter().all(|v| v.is_finite()))
            .ok_or_else(|| Error::Singular("the dense system of the second route is singular".into()))?;
        solution.iter_mut().zip(&columns).for_each(|(s, c)| *s /= c);
        Ok(solution)
    }
}
