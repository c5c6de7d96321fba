//! A mode, or a basis U of an invariant subspace, as a boundary-value problem.
//!
//! A_0 U + A_1 U S + A_2 U S^2 = 0 in equations and conditions, with l_a(U_b) = 1 for a = b, else 0, for as many
//! functionals l (see [`super::pins`]) as U has columns; the k x k matrix S is unknown and its eigenvalues are those of
//! the pencil. For k = 1 this is the mode with its eigenvalue as unknown constant; with k > 1 it stays regular where
//! eigenvalues are double or clustered (Kressner, Numer. Math. 114, 2009, on invariant pairs). Complex columns are
//! carried as real and imaginary parts.

use super::pencil::{POWERS, Pencil};
use super::pins::Pin;
use crate::error::Result;
use crate::model::{Batch, Condition, ConditionValue, Layout, Linearised, Model, Place, Release};
use num_complex::Complex64;

/// The boundary-value problem. Unknown functions: for each column of U, real then imaginary part, those of the pencil;
/// unknown constants: likewise those of the pencil, then S by rows (real and imaginary parts side by side).
pub(crate) struct Block<'a> {
    pencil: &'a Pencil<'a>,
    width: usize,
    /// Whether columns and S are complex.
    complex: bool,
    layout: Layout,
    points: Vec<f64>,
    /// Piece of the model that each piece lies in.
    pieces: Vec<usize>,
    conditions: Vec<Condition>,
    releases: Vec<Release>,
    pins: Vec<Pin>,
}

impl<'a> Block<'a> {
    /// The problem of `pins.len()` columns.
    pub fn new(pencil: &'a Pencil<'a>, complex: bool, pins: Vec<Pin>) -> Self {
        let complex = complex || pencil.complex;
        let (width, parts) = (pins.len(), if complex { 2 } else { 1 });
        let copies = parts * width;
        let own = pencil.model.points();
        let mut points = own.to_vec();
        points.extend(pins.iter().map(|p| p.x));
        points.sort_by(f64::total_cmp);
        points.dedup();
        let at = |x: f64| points.partition_point(|p| *p < x);
        let pieces = points[..points.len() - 1].iter().map(|p| own.partition_point(|q| q <= p) - 1).collect();
        let moved = |place: &Place| Place { point: at(own[place.point]), side: place.side };
        let orders: Vec<usize> = (0..copies).flat_map(|_| pencil.layout.orders()).copied().collect();
        let layout = Layout::new(&orders, copies * pencil.layout.constants() + parts * width * width);
        let mut conditions = Vec::new();
        for tied in &pencil.conditions {
            let places: Vec<Place> = tied.places.iter().map(moved).collect();
            conditions.extend((0..copies).map(|_| Condition { name: tied.name.clone(), places: places.clone() }));
        }
        for pin in &pins {
            let place = Place { point: at(pin.x), side: pin.side };
            let name = "scale of the mode".to_owned();
            conditions.extend((0..copies).map(|_| Condition { name: name.clone(), places: vec![place] }));
        }
        let (d, step) = (pencil.layout.unknowns(), if pencil.complex { 2 } else { 1 });
        let real = pencil.model.releases().iter().filter(|r| r.unknown % step == 0);
        let releases = real
            .flat_map(|r| {
                let point = at(own[r.point]);
                (0..copies).map(move |c| Release { point, unknown: c * d + r.unknown / step, order: r.order })
            })
            .collect();
        Self { pencil, width, complex, layout, points, pieces, conditions, releases, pins }
    }

    /// One real column: the model itself does.
    fn simple(&self) -> bool {
        self.width == 1 && !self.complex
    }

    fn parts(&self) -> usize {
        if self.complex { 2 } else { 1 }
    }

    /// First constant of S.
    pub fn first(&self) -> usize {
        self.parts() * self.width * self.pencil.layout.constants()
    }

    /// Number of columns.
    pub fn width(&self) -> usize {
        self.width
    }

    /// Whether columns are complex.
    pub fn complex(&self) -> bool {
        self.complex
    }

    /// Piece of the model that a piece of this problem lies in.
    pub fn piece(&self, piece: usize) -> usize {
        self.pieces[piece]
    }

    /// S, by rows.
    pub fn matrix(&self, constants: &[f64]) -> Vec<Complex64> {
        let own = &constants[self.first()..];
        if self.complex {
            own.chunks_exact(2).map(|c| Complex64::new(c[0], c[1])).collect()
        } else {
            own.iter().map(|c| Complex64::from(*c)).collect()
        }
    }

    /// A column's entry of a flat array with `count` entries a copy.
    fn entry(&self, values: &[f64], count: usize, column: usize, index: usize, n: usize, node: usize) -> Complex64 {
        let at = |part: usize| values[((self.parts() * column + part) * count + index) * n + node];
        Complex64::new(at(0), if self.complex { at(1) } else { 0.0 })
    }

    /// S^0, S, S^2.
    fn powers(&self, s: &[Complex64]) -> [Vec<Complex64>; POWERS] {
        let k = self.width;
        let one = (0..k * k).map(|e| if e / k == e % k { Complex64::ONE } else { Complex64::ZERO }).collect();
        let square = (0..k * k).map(|e| (0..k).map(|c| s[e / k * k + c] * s[c * k + e % k]).sum()).collect();
        [one, s.to_vec(), square]
    }

    /// Residual and derivatives of one row: A_p U S^p summed over the powers, for column j.
    ///
    /// `u(l, c)` is entry c of column l; `a(p, c)` the coefficient of it; what is found is handed over
    /// by `store`.
    fn row(
        &self,
        entries: usize,
        column: usize,
        powers: &[Vec<Complex64>; POWERS],
        u: &dyn Fn(usize, usize) -> Complex64,
        a: &dyn Fn(usize, usize) -> Complex64,
        store: &mut dyn FnMut(Found),
    ) {
        let (k, s) = (self.width, &powers[1]);
        // A_p U_l for each power and column.
        let mut products = vec![Complex64::ZERO; POWERS * k];
        for c in 0..entries {
            let own: [Complex64; POWERS] = std::array::from_fn(|p| a(p, c));
            if own.iter().all(|v| *v == Complex64::ZERO) {
                continue;
            }
            for l in 0..k {
                let value = u(l, c);
                let slope: Complex64 = (0..POWERS).map(|p| own[p] * powers[p][l * k + column]).sum();
                store(Found::ByEntry(l, c, slope));
                (0..POWERS).for_each(|p| products[p * k + l] += own[p] * value);
            }
        }
        let residual: Complex64 = (0..POWERS * k).map(|e| products[e] * powers[e / k][e % k * k + column]).sum();
        store(Found::Residual(residual));
        for r in 0..k {
            for c in 0..k {
                // d(S^2)_lj / dS_rc = [l = r] S_cj + [c = j] S_lr
                let mut slope = products[2 * k + r] * s[c * k + column];
                if c == column {
                    slope += products[k + r];
                    slope += (0..k).map(|l| products[2 * k + l] * s[l * k + r]).sum::<Complex64>();
                }
                store(Found::ByMatrix(r * k + c, slope));
            }
        }
    }

    /// Writes a complex derivative into the real matrix [re -im; im re], or its real part alone.
    fn spread(&self, slope: Complex64, mut write: impl FnMut(usize, usize, f64)) {
        write(0, 0, slope.re);
        if self.complex {
            write(0, 1, -slope.im);
            write(1, 0, slope.im);
            write(1, 1, slope.re);
        }
    }
}

/// A piece of what [`Block::row`] finds.
enum Found {
    Residual(Complex64),
    /// By entry c of column l.
    ByEntry(usize, usize, Complex64),
    /// By an entry of S.
    ByMatrix(usize, Complex64),
}

impl Model for Block<'_> {
    fn layout(&self) -> &Layout {
        &self.layout
    }

    fn points(&self) -> &[f64] {
        &self.points
    }

    fn linear(&self) -> bool {
        false
    }

    fn equations(&self, batch: &Batch<'_>, out: &mut Linearised) -> Result<()> {
        let piece = self.pieces[batch.piece];
        if self.simple() {
            return self.pencil.model.equations(&Batch { piece, ..*batch }, out);
        }
        let coefficients = self.pencil.equations(piece, batch.x)?;
        let powers = self.powers(&self.matrix(batch.constants));
        let own = &self.pencil.layout;
        let (d, jets, constants, n) = (own.unknowns(), own.jets(), own.constants(), batch.x.len());
        let (parts, columns) = (self.parts(), self.pencil.columns());
        let (all_jets, all_constants) = (self.layout.jets(), self.layout.constants());
        for node in 0..n {
            let u = |l: usize, c: usize| {
                if c < jets {
                    self.entry(batch.jets, jets, l, c, n, node)
                } else {
                    self.entry(batch.constants, constants, l, c - jets, 1, 0)
                }
            };
            for (e, j) in (0..d).flat_map(|e| (0..self.width).map(move |j| (e, j))) {
                let a = |p: usize, c: usize| coefficients[p][(e * columns + c) * n + node];
                let row = |part: usize| (parts * j + part) * d + e;
                self.row(columns, j, &powers, &u, &a, &mut |found| match found {
                    Found::Residual(r) => {
                        out.residual[row(0) * n + node] = r.re;
                        if self.complex {
                            out.residual[row(1) * n + node] = r.im;
                        }
                    }
                    Found::ByEntry(l, c, slope) => self.spread(slope, |r, part, value| {
                        let copy = parts * l + part;
                        if c < jets {
                            out.jets[(row(r) * all_jets + copy * jets + c) * n + node] += value;
                        } else {
                            let at = copy * constants + c - jets;
                            out.constants[(row(r) * all_constants + at) * n + node] += value;
                        }
                    }),
                    Found::ByMatrix(entry, slope) => self.spread(slope, |r, part, value| {
                        let at = self.first() + parts * entry + part;
                        out.constants[(row(r) * all_constants + at) * n + node] += value;
                    }),
                });
            }
        }
        Ok(())
    }

    fn conditions(&self) -> &[Condition] {
        &self.conditions
    }

    fn condition(&self, index: usize, jets: &[f64], constants: &[f64], out: &mut ConditionValue) -> Result<()> {
        let (parts, own) = (self.parts(), &self.pencil.layout);
        let copies = parts * self.width;
        let (tied, copy) = (index / copies, index % copies);
        let Some(tied) = self.pencil.conditions.get(tied) else {
            let number = tied - self.pencil.conditions.len();
            let pin = &self.pins[number];
            let jet = copy * own.jets() + own.jet(pin.unknown, pin.order);
            let wanted = if copy == parts * number { 1.0 } else { 0.0 };
            out.residual = pin.weight * jets[jet] - wanted;
            out.jets[jet] = pin.weight;
            return Ok(());
        };
        if self.simple() {
            return self.pencil.model.condition(index, jets, constants, out);
        }
        let (column, part) = (copy / parts, copy % parts);
        let powers = self.powers(&self.matrix(constants));
        let (j, all) = (own.jets(), self.layout.jets());
        let from_jets = tied.places.len() * j;
        let u = |l: usize, c: usize| {
            if c < from_jets {
                self.entry(&jets[c / j * all..][..all], j, l, c % j, 1, 0)
            } else {
                self.entry(constants, own.constants(), l, c - from_jets, 1, 0)
            }
        };
        let a = |p: usize, c: usize| tied.powers[p][c];
        self.row(from_jets + own.constants(), column, &powers, &u, &a, &mut |found| match found {
            Found::Residual(r) => out.residual = if part == 0 { r.re } else { r.im },
            Found::ByEntry(l, c, slope) => self.spread(slope, |row, with, value| {
                if row == part {
                    let copy = parts * l + with;
                    if c < from_jets {
                        out.jets[c / j * all + copy * j + c % j] += value;
                    } else {
                        out.constants[copy * own.constants() + c - from_jets] += value;
                    }
                }
            }),
            Found::ByMatrix(entry, slope) => self.spread(slope, |row, with, value| {
                if row == part {
                    out.constants[self.first() + parts * entry + with] += value;
                }
            }),
        });
        Ok(())
    }

    fn releases(&self) -> &[Release] {
        &self.releases
    }

    fn unknown_name(&self, unknown: usize) -> String {
        let (d, step) = (self.pencil.layout.unknowns(), if self.pencil.complex { 2 } else { 1 });
        self.pencil.model.unknown_name(step * (unknown % d))
    }

    fn equation_name(&self, equation: usize) -> String {
        let (d, step) = (self.pencil.layout.unknowns(), if self.pencil.complex { 2 } else { 1 });
        self.pencil.model.equation_name(step * (equation % d))
    }
}
