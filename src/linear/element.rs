//! One element: collocation rows, tall factorisation, condensed rows and response.

use super::tables::Tables;
use crate::error::{Error, Result};
use crate::mesh::Element;
use crate::model::{Layout, Linearised, Model};
use crate::tolerance;
use faer::dyn_stack::{MemBuffer, MemStack};
use faer::linalg::lu::partial_pivoting::factor::{lu_in_place, lu_in_place_scratch};
use faer::linalg::{matmul::matmul, triangular_solve};
use faer::perm::{permute_rows_in_place, permute_rows_in_place_scratch};
use faer::reborrow::{Reborrow, ReborrowMut};
use faer::{Accum, MatMut, Par};

/// An element without its inner unknowns. Columns are `[left state | right state | constants | 1]`, states
/// divided by the common scale of their unknown.
#[derive(Debug, Clone)]
pub(crate) struct Condensed {
    /// M rows, row-major, whose product with the columns' values is zero.
    pub rows: Vec<f64>,
    /// Highest derivatives v * (h/2)^m / size: (d n) rows, column-major.
    pub response: Vec<f64>,
}

/// Sizes of the unknowns: those that all elements share, and those on the element at hand.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Sizes<'a> {
    /// The states on the chain are divided by these.
    pub common: &'a [f64],
    /// Sizes of u_i on this element, as far as an earlier pass tells; rows are balanced by them, so that
    /// relative accuracy is kept where a solution is small.
    pub local: &'a [f64],
}

/// Buffers reused from element to element.
#[derive(Default)]
pub(crate) struct Workspace {
    tall: Vec<f64>,
    right: Vec<f64>,
    permutation: Vec<usize>,
    inverse: Vec<usize>,
    scratch: Option<MemBuffer>,
    scratch_bytes: usize,
}

/// Number of columns `[left | right | constants | 1]`.
pub(crate) fn width(layout: &Layout) -> usize {
    2 * layout.states() + layout.constants() + 1
}

/// Condenses one element.
///
/// `equations` holds residuals and derivatives at the element's nodes for zero jets and constants.
pub(crate) fn condense(
    layout: &Layout,
    element: &Element,
    tables: &Tables,
    equations: &Linearised,
    sizes: Sizes<'_>,
    work: &mut Workspace,
) -> Result<Condensed> {
    let scale = sizes.local;
    let (d, n, states) = (layout.unknowns(), tables.n, layout.states());
    let (inner, width) = (d * n, width(layout));
    let rows = inner + states;
    work.tall.clear();
    work.tall.resize(rows * inner, 0.0);
    work.right.clear();
    work.right.resize(rows * width, 0.0);
    fill_collocation(layout, element, tables, equations, scale, &mut work.tall, &mut work.right);
    fill_ends(layout, tables, inner, &mut work.tall, &mut work.right);
    factor(rows, inner, width, states, work);
    check_pivots(&work.tall, rows, inner, element)?;

    let right = MatMut::from_column_major_slice_mut(&mut work.right, rows, width);
    let (top, _) = right.split_at_row_mut(inner);
    let upper = faer::MatRef::from_column_major_slice(&work.tall, rows, inner).subrows(0, inner);
    let mut condensed = vec![0.0; states * width];
    triangular_solve::solve_upper_triangular_in_place(upper, top, Par::Seq);
    let mut response = Vec::with_capacity(inner * width);
    for (column, values) in work.right.chunks_exact(rows).enumerate() {
        response.extend_from_slice(&values[..inner]);
        for (state, value) in values[inner..].iter().enumerate() {
            condensed[state * width + column] = *value;
        }
    }
    normalise_rows(&mut condensed, width, 2 * states);
    unscale_columns(layout, 0.5 * element.length(), sizes, &mut condensed, &mut response, inner);
    Ok(Condensed { rows: condensed, response })
}

/// Rows F_i' = 0 at the nodes, each divided by its largest entry.
fn fill_collocation(
    layout: &Layout,
    element: &Element,
    tables: &Tables,
    equations: &Linearised,
    scale: &[f64],
    tall: &mut [f64],
    right: &mut [f64],
) {
    let (d, n, states) = (layout.unknowns(), tables.n, layout.states());
    let (inner, width) = (d * n, width(layout));
    let rows = inner + states;
    let half = 0.5 * element.length();
    for equation in 0..d {
        let first = equation * n;
        for (unknown, &m) in layout.orders().iter().enumerate() {
            for k in 0..=m {
                let jet = layout.jet(unknown, k);
                let start = (equation * layout.jets() + jet) * n;
                let a = &equations.jets[start..start + n];
                if a.iter().all(|a| *a == 0.0) {
                    continue;
                }
                let factor = scale[unknown] / half.powi(k as i32);
                // u^(k) = (h/2)^(m-k) Q_(m-k) v + Taylor polynomial of the left state
                for l in 0..n {
                    let column = &mut tall[(unknown * n + l) * rows + first..][..n];
                    if k == m {
                        column[l] += factor * a[l];
                    } else {
                        let q = &tables.integrals[m - k - 1][l * n..(l + 1) * n];
                        for ((c, a), q) in column.iter_mut().zip(a).zip(q) {
                            *c += factor * a * q;
                        }
                    }
                }
                for l in k..m {
                    let column = &mut right[layout.state(unknown, l) * rows + first..][..n];
                    for ((c, a), s) in column.iter_mut().zip(a).zip(&tables.nodes) {
                        *c -= factor * a * taylor(1.0 + s, l - k);
                    }
                }
            }
        }
        for constant in 0..layout.constants() {
            let a = &equations.constants[(equation * layout.constants() + constant) * n..][..n];
            let column = &mut right[(2 * states + constant) * rows + first..][..n];
            column.iter_mut().zip(a).for_each(|(c, a)| *c = -a);
        }
        let residual = &equations.residual[first..first + n];
        let column = &mut right[(width - 1) * rows + first..][..n];
        column.iter_mut().zip(residual).for_each(|(c, f)| *c = -f);
    }
    balance_rows(tall, right, rows, inner, states, layout.constants());
}

/// Divides each collocation row by its largest entry. Column by column, as the matrices lie in memory.
fn balance_rows(tall: &mut [f64], right: &mut [f64], rows: usize, inner: usize, states: usize, constants: usize) {
    let mut sizes = vec![0.0f64; inner];
    for column in tall.chunks_exact(rows).chain(right[..states * rows].chunks_exact(rows)) {
        sizes.iter_mut().zip(column).for_each(|(s, a)| *s = s.max(a.abs()));
    }
    for (row, size) in sizes.iter_mut().enumerate() {
        if *size == 0.0 {
            let constant = |c: usize| right[(2 * states + c) * rows + row].abs();
            *size = (0..constants).map(constant).fold(0.0, f64::max);
        }
        *size = if *size > 0.0 { 1.0 / *size } else { 1.0 };
    }
    for column in tall.chunks_exact_mut(rows).chain(right.chunks_exact_mut(rows)) {
        column.iter_mut().zip(&sizes).for_each(|(a, s)| *a *= s);
    }
}

/// Rows "state at the right end = Taylor polynomial of the left state + integral of v".
fn fill_ends(layout: &Layout, tables: &Tables, inner: usize, tall: &mut [f64], right: &mut [f64]) {
    let (n, states) = (tables.n, layout.states());
    let rows = inner + states;
    for (unknown, &m) in layout.orders().iter().enumerate() {
        for k in 0..m {
            let state = layout.state(unknown, k);
            let row = inner + state;
            for l in 0..n {
                tall[(unknown * n + l) * rows + row] = tables.ends[m - k - 1][l];
            }
            right[(states + state) * rows + row] = 1.0;
            for l in k..m {
                right[layout.state(unknown, l) * rows + row] = -taylor(2.0, l - k);
            }
        }
    }
}

/// t^k / k!
fn taylor(t: f64, k: usize) -> f64 {
    (1..=k).fold(1.0, |value, j| value * t / j as f64)
}

/// P T = L U with partial pivoting; the right-hand block becomes [L1^-1 B1; B2 - L2 L1^-1 B1].
fn factor(rows: usize, inner: usize, width: usize, states: usize, work: &mut Workspace) {
    let need = lu_in_place_scratch::<usize, f64>(rows, inner, Par::Seq, Default::default())
        .or(permute_rows_in_place_scratch::<usize, f64>(rows, width));
    if work.scratch.is_none() || work.scratch_bytes < need.unaligned_bytes_required() {
        work.scratch_bytes = need.unaligned_bytes_required();
        work.scratch = Some(MemBuffer::new(need));
    }
    let Some(scratch) = work.scratch.as_mut() else { return };
    work.permutation.resize(rows, 0);
    work.inverse.resize(rows, 0);
    let (_, permutation) = lu_in_place(
        MatMut::from_column_major_slice_mut(&mut work.tall, rows, inner),
        &mut work.permutation,
        &mut work.inverse,
        Par::Seq,
        MemStack::new(scratch),
        Default::default(),
    );
    let mut right = MatMut::from_column_major_slice_mut(&mut work.right, rows, width);
    permute_rows_in_place(right.rb_mut(), permutation, MemStack::new(scratch));
    let packed = faer::MatRef::from_column_major_slice(&work.tall, rows, inner);
    let (lower, below) = packed.split_at_row(inner);
    let (mut top, bottom) = right.split_at_row_mut(inner);
    triangular_solve::solve_unit_lower_triangular_in_place(lower, top.rb_mut(), Par::Seq);
    if states > 0 {
        matmul(bottom, Accum::Add, below, top.rb(), -1.0, Par::Seq);
    }
}

/// faer reports no singularity: the pivots say it.
fn check_pivots(tall: &[f64], rows: usize, inner: usize, element: &Element) -> Result<()> {
    let pivots = (0..inner).map(|k| tall[k * rows + k].abs());
    let (small, large) = pivots.fold((f64::INFINITY, 0.0f64), |(s, l), p| (s.min(p), l.max(p)));
    let finite = (0..inner).all(|k| tall[k * rows + k].is_finite());
    if finite && small > tolerance::PIVOT * large {
        return Ok(());
    }
    Err(Error::Singular(format!(
        "the equations do not determine the highest derivatives between x = {} and x = {} (SI): \
         an unknown drops out there, or an equation says nothing",
        element.left, element.right
    )))
}

/// Divides each row by its largest entry among the leading columns.
fn normalise_rows(rows: &mut [f64], width: usize, leading: usize) {
    for row in rows.chunks_exact_mut(width) {
        let size = row[..leading].iter().fold(0.0f64, |s, a| s.max(a.abs()));
        if size > 0.0 {
            row.iter_mut().for_each(|a| *a /= size);
        }
    }
}

/// From states scaled by (h/2)^k and local sizes to states that all neighbours share.
fn unscale_columns(layout: &Layout, half: f64, sizes: Sizes<'_>, rows: &mut [f64], response: &mut [f64], inner: usize) {
    let (states, width) = (layout.states(), width(layout));
    for (unknown, &m) in layout.orders().iter().enumerate() {
        for k in 0..m {
            let factor = half.powi(k as i32) * sizes.common[unknown] / sizes.local[unknown];
            for column in [layout.state(unknown, k), states + layout.state(unknown, k)] {
                rows.chunks_exact_mut(width).for_each(|row| row[column] *= factor);
                response[column * inner..(column + 1) * inner].iter_mut().for_each(|a| *a *= factor);
            }
        }
    }
}

/// Refuses residuals and derivatives that are not finite, naming the equation and the place.
pub(super) fn check_finite(model: &dyn Model, x: &[f64], equations: &Linearised) -> Result<()> {
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
