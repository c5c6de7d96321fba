//! The pencil as matrices over all nodes of a mesh, and their eigenvalues.
//!
//! Unknowns are the nodal values of the highest derivatives and the states at the ends of the elements, as in
//! [`crate::linear`]; in this integrated basis A_0 is well conditioned, so that the wanted eigenvalues are the large
//! ones of (A(shift))^-1 A'(shift).

use super::pencil::{POWERS, Pencil};
use crate::error::{Error, Result};
use crate::field::{Field, integrate_up};
use crate::legendre;
use crate::linear::Library;
use crate::linear::tables::Tables;
use crate::mesh::{Element, Mesh, Side};
use crate::model::Place;
use faer::linalg::solvers::Solve;
use faer::{Mat, c64};
use num_complex::Complex64;

/// Matrices of the pencil on a mesh.
pub(crate) struct Dense<'a> {
    pencil: &'a Pencil<'a>,
    mesh: Mesh,
    scale: Vec<f64>,
    /// For each element: first column of its highest derivatives, of the state at its left and at its right end.
    columns: Vec<[usize; 3]>,
    size: usize,
    /// Rows of A_0, A_1, A_2: column and coefficient.
    rows: Vec<Row>,
}

/// An eigenvalue of the matrices, with its vector.
pub(crate) struct Candidate {
    /// The eigenvalue.
    pub value: Complex64,
    /// The vector.
    vector: Vec<Complex64>,
}

/// Eigenvalues about a shift.
pub(crate) struct Candidates {
    /// All that are not infinite.
    pub found: Vec<Candidate>,
    /// Number of finite eigenvalues, rounding apart.
    pub finite: usize,
    /// Whether the matrix at the shift was regular.
    pub regular: bool,
}

impl<'a> Dense<'a> {
    /// Assembles the matrices. `scale` holds one size per unknown.
    pub fn new(pencil: &'a Pencil<'a>, mesh: Mesh, scale: &[f64], library: &mut Library) -> Result<Self> {
        let (d, m) = (pencil.layout.unknowns(), pencil.layout.states());
        let mut columns = Vec::with_capacity(mesh.elements.len());
        let mut next = 0;
        let mut left = None;
        for (e, element) in mesh.elements.iter().enumerate() {
            let inner = next;
            next += d * element.nodes;
            let start = left.unwrap_or_else(|| {
                next += m;
                next - m
            });
            columns.push([inner, start, next]);
            next += m;
            let broken = mesh.elements.get(e + 1).is_some_and(|after| {
                after.piece != element.piece && pencil.model.releases().iter().any(|r| r.point == after.piece)
            });
            left = (!broken).then_some(next - m);
        }
        let size = next + pencil.layout.constants();
        let mut dense = Self { pencil, mesh, scale: scale.to_vec(), columns, size, rows: Vec::with_capacity(size) };
        for e in 0..dense.mesh.elements.len() {
            let tables = library.get(&dense.mesh.elements[e])?;
            dense.collocation(e, &tables)?;
            dense.ends(e, &tables);
        }
        dense.joints();
        dense.conditions(library)?;
        if dense.rows.len() != dense.size {
            return Err(Error::ConditionCount { found: dense.rows.len(), needed: dense.size });
        }
        dense.balance();
        Ok(dense)
    }

    /// Columns of the highest derivatives of each element, and the number of all columns.
    pub(super) fn inner_columns(&self) -> (Vec<std::ops::Range<usize>>, usize) {
        let d = self.pencil.layout.unknowns();
        let inner = self.columns.iter().zip(&self.mesh.elements).map(|(c, e)| c[0]..c[0] + d * e.nodes);
        (inner.collect(), self.size)
    }

    /// All rows.
    pub(super) fn rows(&self) -> &[Row] {
        &self.rows
    }

    /// Rows of an element: collocation and ends.
    pub(super) fn rows_of_element(&self, e: usize) -> std::ops::Range<usize> {
        let of = |e: usize| self.pencil.layout.unknowns() * self.mesh.elements[e].nodes + self.pencil.layout.states();
        let start = (0..e).map(of).sum();
        start..start + of(e)
    }

    /// Number of rows.
    pub fn size(&self) -> usize {
        self.size
    }

    fn constant(&self, p: usize) -> usize {
        self.size - self.pencil.layout.constants() + p
    }

    /// (h/2) / L: from states on the span to those on an element.
    fn shrink(&self, e: usize) -> f64 {
        0.5 * self.mesh.elements[e].length() / self.pencil.length()
    }

    fn collocation(&mut self, e: usize, tables: &Tables) -> Result<()> {
        let (layout, element) = (&self.pencil.layout, self.mesh.elements[e]);
        let n = tables.n;
        let x: Vec<f64> = tables.nodes.iter().map(|s| element.coordinate(*s)).collect();
        let powers = self.pencil.equations(element.piece, &x)?;
        let (columns, half, shrink) = (self.pencil.columns(), 0.5 * element.length(), self.shrink(e));
        let [inner, left, _] = self.columns[e];
        for equation in 0..layout.unknowns() {
            for node in 0..n {
                let mut row: Vec<(usize, [Complex64; POWERS])> = Vec::new();
                let at = |column: usize, p: usize| powers[p][(equation * columns + column) * n + node];
                for (i, &m) in layout.orders().iter().enumerate() {
                    let mut own = vec![[Complex64::ZERO; POWERS]; n];
                    let mut state = vec![[Complex64::ZERO; POWERS]; m];
                    for k in 0..=m {
                        let factor = self.scale[i] / half.powi(k as i32);
                        let a: [Complex64; POWERS] = std::array::from_fn(|p| factor * at(layout.jet(i, k), p));
                        if a.iter().all(|a| *a == Complex64::ZERO) {
                            continue;
                        }
                        if k == m {
                            add(&mut own[node], &a, 1.0);
                        } else {
                            let q = &tables.integrals[m - k - 1];
                            (0..n).for_each(|l| add(&mut own[l], &a, q[l * n + node]));
                        }
                        for (l, state) in state.iter_mut().enumerate().skip(k) {
                            add(state, &a, taylor(1.0 + tables.nodes[node], l - k) * shrink.powi(l as i32));
                        }
                    }
                    row.extend(own.into_iter().enumerate().map(|(l, a)| (inner + i * n + l, a)));
                    row.extend(state.into_iter().enumerate().map(|(l, a)| (left + layout.state(i, l), a)));
                }
                for p in 0..layout.constants() {
                    row.push((self.constant(p), std::array::from_fn(|q| at(layout.jets() + p, q))));
                }
                self.rows.push(row);
            }
        }
        Ok(())
    }

    /// Rows "state at the right end = Taylor polynomial of the left state + integral of v", as in `linear::element`.
    fn ends(&mut self, e: usize, tables: &Tables) {
        let layout = &self.pencil.layout;
        let (n, shrink) = (tables.n, self.shrink(e));
        let [inner, left, right] = self.columns[e];
        for (i, &m) in layout.orders().iter().enumerate() {
            for k in 0..m {
                let mut row: Vec<(usize, [Complex64; POWERS])> = Vec::new();
                let mut put = |column: usize, value: f64| row.push((column, constant(value)));
                (0..n).for_each(|l| put(inner + i * n + l, tables.ends[m - k - 1][l]));
                put(right + layout.state(i, k), -shrink.powi(k as i32));
                (k..m).for_each(|l| put(left + layout.state(i, l), taylor(2.0, l - k) * shrink.powi(l as i32)));
                self.rows.push(row);
            }
        }
    }

    /// Continuity at points where some of it is given up.
    fn joints(&mut self) {
        let layout = &self.pencil.layout;
        let releases = self.pencil.model.releases();
        let step = if self.pencil.complex { 2 } else { 1 };
        for e in 0..self.mesh.elements.len().saturating_sub(1) {
            let (right, left) = (self.columns[e][2], self.columns[e + 1][1]);
            if right == left {
                continue;
            }
            let point = self.mesh.elements[e + 1].piece;
            for (i, &m) in layout.orders().iter().enumerate() {
                for k in 0..m {
                    if releases.iter().any(|r| (r.point, r.unknown, r.order) == (point, step * i, k)) {
                        continue;
                    }
                    let state = layout.state(i, k);
                    self.rows.push(vec![(right + state, constant(1.0)), (left + state, constant(-1.0))]);
                }
            }
        }
    }

    fn conditions(&mut self, library: &mut Library) -> Result<()> {
        let pencil = self.pencil;
        let (layout, length) = (&pencil.layout, pencil.length());
        for tied in &pencil.conditions {
            let mut row: Vec<(usize, [Complex64; POWERS])> = Vec::new();
            for (index, place) in tied.places.iter().enumerate() {
                let (e, side) = self.element_at(place);
                let tables = library.get(&self.mesh.elements[e])?;
                let half = 0.5 * self.mesh.elements[e].length();
                let [inner, left, right] = self.columns[e];
                for (i, &m) in layout.orders().iter().enumerate() {
                    for k in 0..=m {
                        let column = index * layout.jets() + layout.jet(i, k);
                        let a: [Complex64; POWERS] = std::array::from_fn(|p| tied.powers[p][column]);
                        if a.iter().all(|a| *a == Complex64::ZERO) {
                            continue;
                        }
                        if k < m {
                            let start = if side == Side::Left { right } else { left };
                            let factor = self.scale[i] / length.powi(k as i32);
                            row.push((start + layout.state(i, k), a.map(|a| a * factor)));
                            continue;
                        }
                        let factor = self.scale[i] / half.powi(m as i32);
                        for (l, weight) in end_weights(&tables, side).into_iter().enumerate() {
                            row.push((inner + i * tables.n + l, a.map(|a| a * factor * weight)));
                        }
                    }
                }
            }
            for p in 0..layout.constants() {
                let column = tied.places.len() * layout.jets() + p;
                row.push((self.constant(p), std::array::from_fn(|q| tied.powers[q][column])));
            }
            self.rows.push(row);
        }
        Ok(())
    }

    /// The element beside a place, and the side of it from which the place is seen.
    fn element_at(&self, place: &Place) -> (usize, Side) {
        let last = self.pencil.model.points().len() - 1;
        let after = || self.mesh.elements.partition_point(|e| e.piece < place.point);
        match (place.point, place.side) {
            (0, _) => (0, Side::Right),
            (p, _) if p == last => (self.mesh.elements.len() - 1, Side::Left),
            (_, Side::Left) => (after() - 1, Side::Left),
            (_, Side::Right) => (after(), Side::Right),
        }
    }

    /// Divides each row by its largest entry, the parameter taken at its size.
    fn balance(&mut self) {
        let s = self.pencil.size;
        for row in &mut self.rows {
            let size = |a: &[Complex64; POWERS]| a[0].norm() + s * a[1].norm() + s * s * a[2].norm();
            let largest = row.iter().map(|(_, a)| size(a)).fold(0.0, f64::max);
            if largest > 0.0 {
                row.iter_mut().flat_map(|(_, a)| a).for_each(|a| *a /= largest);
            }
        }
    }

    /// Eigenvalues, with or without their vectors, by (A(shift))^-1 A'(shift), among the vectors that meet all rows without the parameter.
    pub fn eigenvalues(&self, shift: Complex64, vectors: bool) -> Result<Candidates> {
        let s = self.pencil.size.max(shift.norm() * 1e-3);
        // With lambda = shift + s nu: B_0 + nu B_1 + nu^2 B_2.
        let shifted = |a: &[Complex64; POWERS]| {
            [a[0] + shift * (a[1] + shift * a[2]), s * (a[1] + 2.0 * shift * a[2]), s * s * a[2]]
        };
        let real = shift.im == 0.0 && self.rows.iter().flatten().flat_map(|(_, a)| a).all(|a| a.im == 0.0);
        let quadratic = self.pencil.degree == 2;
        let free = |row: &&Row| row.iter().all(|(_, a)| a[1] == Complex64::ZERO && a[2] == Complex64::ZERO);
        let (constraints, active): (Vec<&Row>, Vec<&Row>) = self.rows.iter().partition(free);
        let spectrum = if real {
            real::spectrum(self.size, &constraints, &active, &|a, p| shifted(a)[p].re, [quadratic, vectors])
        } else {
            complex::spectrum(self.size, &constraints, &active, &|a, p| shifted(a)[p], [quadratic, vectors])
        };
        let Some((values, vectors)) = spectrum else {
            return Ok(Candidates { found: Vec::new(), finite: 0, regular: false });
        };
        let largest = values.iter().map(|v| v.norm()).fold(0.0, f64::max);
        let mut found = Vec::new();
        let mut finite = 0;
        for (k, mu) in values.iter().enumerate() {
            finite += usize::from(mu.norm() > 1e-10 * largest);
            if mu.norm() > 1e-14 * largest {
                let value = shift + s / mu;
                found.push(Candidate { value, vector: (0..vectors.nrows()).map(|r| vectors[(r, k)]).collect() });
            }
        }
        // An eigenvalue at the shift itself spoils all others.
        Ok(Candidates { found, finite, regular: largest < 1e10 })
    }

    /// The vector of a candidate as functions: real and imaginary part.
    pub fn fields(&self, candidate: &Candidate, library: &mut Library) -> Result<[Field; 2]> {
        let layout = &self.pencil.layout;
        let part = |pick: &dyn Fn(&Complex64) -> f64, library: &mut Library| -> Result<Field> {
            let x: Vec<f64> = candidate.vector.iter().map(pick).collect();
            let mut series = Vec::with_capacity(self.mesh.elements.len());
            for (e, element) in self.mesh.elements.iter().enumerate() {
                let (tables, half) = (library.get(element)?, 0.5 * element.length());
                let [inner, left, _] = self.columns[e];
                let mut jets = Vec::with_capacity(layout.jets());
                for (i, &m) in layout.orders().iter().enumerate() {
                    let factor = self.scale[i] / half.powi(m as i32);
                    let values: Vec<f64> = x[inner + i * tables.n..][..tables.n].iter().map(|v| v * factor).collect();
                    let state: Vec<f64> = (0..m)
                        .map(|k| x[left + layout.state(i, k)] * self.scale[i] / self.pencil.length().powi(k as i32))
                        .collect();
                    jets.extend(integrate_up(tables.modal(&values), &state, half));
                }
                series.push(jets);
            }
            let constants = (0..layout.constants()).map(|p| x[self.constant(p)]).collect();
            Ok(Field::from_series(self.mesh.clone(), layout, constants, series))
        };
        Ok([part(&|v| v.re, library)?, part(&|v| v.im, library)?])
    }
}

pub(super) type Row = Vec<(usize, [Complex64; POWERS])>;
type Eigen = (Vec<Complex64>, Mat<c64>);

/// The same for both kinds of numbers: faer's generics are not generic over them in this respect.
macro_rules! spectra {
    ($name:ident, $number:ty, $zero:expr, $one:expr) => {
        mod $name {
            use super::{Complex64, Eigen, Mat, POWERS, Row, Solve, c64};

            type Pick<'a> = &'a dyn Fn(&[Complex64; POWERS], usize) -> $number;

            fn gathered(rows: &[&Row], size: usize, pick: Pick<'_>, power: usize) -> Mat<$number> {
                let mut matrix = Mat::zeros(rows.len(), size);
                for (r, row) in rows.iter().enumerate() {
                    row.iter().for_each(|(c, a)| matrix[(r, *c)] += pick(a, power));
                }
                matrix
            }

            /// Reciprocal eigenvalues, with vectors: of the rows with the parameter on the null space of those without.
            pub(super) fn spectrum(
                size: usize,
                constraints: &[&Row],
                active: &[&Row],
                pick: Pick<'_>,
                [quadratic, vectors]: [bool; 2],
            ) -> Option<Eigen> {
                let n = active.len();
                let basis: Mat<$number> = if constraints.is_empty() {
                    Mat::identity(size, size)
                } else {
                    let adjoint = gathered(constraints, size, pick, 0).adjoint().to_owned();
                    let q = adjoint.qr().compute_Q();
                    q.as_ref().subcols(constraints.len(), n).to_owned()
                };
                let on_basis = |power: usize| gathered(active, size, pick, power) * &basis;
                let factors = on_basis(0).partial_piv_lu();
                let first = factors.solve(on_basis(1));
                let full = if quadratic {
                    // mu^2 + mu F + S = 0 on (mu x, x).
                    let second = factors.solve(on_basis(2));
                    Mat::from_fn(2 * n, 2 * n, |r, c| match (r < n, c < n) {
                        (true, true) => -first[(r, c)],
                        (true, false) => -second[(r, c - n)],
                        (false, true) if r - n == c => $one,
                        _ => $zero,
                    })
                } else {
                    -first
                };
                let finite = (0..full.ncols()).all(|c| (0..full.nrows()).all(|r| full[(r, c)].is_finite()));
                if !finite {
                    return None;
                }
                if !vectors {
                    return Some((full.eigenvalues().ok()?, Mat::zeros(0, 0)));
                }
                let eigen = full.eigen().ok()?;
                let lower = if quadratic { n } else { 0 };
                let own = eigen.U().subrows(lower, n);
                let wide = Mat::<c64>::from_fn(size, n, |r, c| Complex64::from(basis[(r, c)]));
                Some((eigen.S().column_vector().iter().copied().collect(), wide * own))
            }
        }
    };
}

spectra!(real, f64, 0.0, 1.0);
spectra!(complex, c64, Complex64::ZERO, Complex64::ONE);

fn add(to: &mut [Complex64; POWERS], a: &[Complex64; POWERS], factor: f64) {
    to.iter_mut().zip(a).for_each(|(t, a)| *t += a * factor);
}

fn constant(value: f64) -> [Complex64; POWERS] {
    [value.into(), Complex64::ZERO, Complex64::ZERO]
}

/// t^k / k!
fn taylor(t: f64, k: usize) -> f64 {
    (1..=k).fold(1.0, |value, j| value * t / j as f64)
}

/// Weights of the nodal values in the value at an end of the element.
fn end_weights(tables: &Tables, side: Side) -> Vec<f64> {
    let s = if side == Side::Left { 1.0 } else { -1.0 };
    let unit = |l: usize| (0..tables.n).map(|k| f64::from(u8::from(k == l))).collect::<Vec<f64>>();
    (0..tables.n).map(|l| legendre::series(&tables.modal(&unit(l)), s)).collect()
}

/// Nodes of all elements.
pub(crate) fn nodes(mesh: &Mesh) -> usize {
    mesh.elements.iter().map(|e: &Element| e.nodes).sum()
}

/// Eigenvalues of a small matrix given by rows, ascending by real part, then descending by imaginary part; NaN where
/// there are none. The mean is taken off first, so that close ones are told apart as well as the entries allow.
pub(crate) fn small_eigenvalues(matrix: &[Complex64], k: usize) -> Vec<Complex64> {
    let mean = (0..k).map(|d| matrix[d * k + d]).sum::<Complex64>() / k as f64;
    if k == 1 {
        return vec![mean];
    }
    let entry = |r: usize, c: usize| matrix[r * k + c] - if r == c { mean } else { Complex64::ZERO };
    let found = if matrix.iter().all(|v| v.im == 0.0) {
        Mat::<f64>::from_fn(k, k, |r, c| entry(r, c).re).eigenvalues()
    } else {
        Mat::<c64>::from_fn(k, k, entry).eigenvalues()
    };
    let mut values = found.unwrap_or_default();
    values.resize(k, Complex64::new(f64::NAN, f64::NAN));
    values.iter_mut().for_each(|v| *v += mean);
    values.sort_by(|a, b| a.re.total_cmp(&b.re).then(b.im.total_cmp(&a.im)));
    values
}
