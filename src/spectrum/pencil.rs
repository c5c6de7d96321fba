//! The coefficients of an eigenproblem: (A_0 + lambda A_1 + lambda^2 A_2)(u, p) = 0 in equations and conditions.

use crate::error::{Eigen, Error, Result};
use crate::model::{Batch, Condition, ConditionValue, Layout, Linearised, Model, Place};
use num_complex::Complex64;

/// Powers of the eigenparameter, 0 to 2.
pub(crate) const POWERS: usize = 3;

/// Relative disagreement with a polynomial of degree two that rounding can make.
const ROUNDING: f64 = 1e-9;

/// Coefficients of one array of columns for each power.
pub(crate) type Powers = [Vec<Complex64>; POWERS];

/// A model whose last unknown constant is the eigenparameter.
///
/// A complex pencil is a doubled real model: unknown functions 2i and 2i + 1 are real and imaginary part of the i-th,
/// likewise equations, conditions, constants before the last; the parameter itself is one real constant.
pub(crate) struct Pencil<'a> {
    /// The model.
    pub model: &'a dyn Model,
    /// Whether the model is the doubled form of a complex one.
    pub complex: bool,
    /// Unknowns, and constants but for the parameter, of the (complex) problem itself.
    pub layout: Layout,
    /// A size of the parameter at which all its terms matter.
    pub size: f64,
    /// Highest power that is there.
    pub degree: usize,
    /// Conditions with their coefficients.
    pub conditions: Vec<Tied>,
}

/// A condition of the pencil.
#[derive(Debug, Clone)]
pub(crate) struct Tied {
    /// Name.
    pub name: String,
    /// Places.
    pub places: Vec<Place>,
    /// \[places * J + P\] for each power.
    pub powers: Powers,
}

impl<'a> Pencil<'a> {
    /// Reads a model as an eigenproblem.
    ///
    /// # Errors
    /// [`Error::Eigen`] where it is none.
    pub fn new(model: &'a dyn Model, complex: bool) -> Result<Self> {
        let open = model.layout();
        let (step, states) = (if complex { 2 } else { 1 }, open.states());
        if open.constants() == 0 {
            return Err(Eigen::Absent.into());
        }
        if states == 0 {
            return Err(Eigen::NoFunction.into());
        }
        let needed = states + open.constants() - 1 + model.releases().len();
        if model.conditions().len() != needed {
            return Err(Error::ConditionCount { found: model.conditions().len(), needed });
        }
        let orders: Vec<usize> = open.orders().iter().copied().step_by(step).collect();
        let layout = Layout::new(&orders, (open.constants() - 1) / step);
        let mut pencil = Self { model, complex, layout, size: 1.0, degree: 0, conditions: Vec::new() };
        pencil.size = pencil.estimated_size()?;
        pencil.check()?;
        Ok(pencil)
    }

    /// Real and imaginary copies: 2 for a complex pencil, else 1.
    fn step(&self) -> usize {
        if self.complex { 2 } else { 1 }
    }

    /// Columns of an equation: jets, then constants.
    pub fn columns(&self) -> usize {
        self.layout.jets() + self.layout.constants()
    }

    /// Jet of the doubled layout that holds the real part of a jet.
    fn open_jet(&self, unknown: usize, k: usize) -> usize {
        self.model.layout().jet(self.step() * unknown, k)
    }

    /// All jets (unknown, derivative) in the order of the layout.
    fn jets(&self) -> impl Iterator<Item = (usize, usize)> + '_ {
        self.layout.orders().iter().enumerate().flat_map(|(i, &m)| (0..=m).map(move |k| (i, k)))
    }

    /// Coefficients at nodes inside one piece: for each power \[d\]\[J + P\]\[n\].
    ///
    /// A_0 is the Jacobian at parameter zero. A_1 and A_2 come from the exact derivative by the parameter, asked at
    /// unit jets: no difference of large numbers is taken.
    pub fn equations(&self, piece: usize, x: &[f64]) -> Result<Powers> {
        let (d, columns, n) = (self.layout.unknowns(), self.columns(), x.len());
        let mut powers: Powers = std::array::from_fn(|_| vec![Complex64::ZERO; d * columns * n]);
        let at_zero = self.linearise(piece, x, &[], 0.0)?;
        self.take(&at_zero, n, &mut powers[0]);
        let first = self.by_parameter(piece, x, 0.0)?;
        let second = self.by_parameter(piece, x, self.size)?;
        for (k, (a, b)) in first.iter().zip(&second).enumerate() {
            powers[1][k] = *a;
            let bend = b - a;
            // A derivative that does not depend on the parameter may still be rounded differently.
            if bend.norm() > 1e-12 * (a.norm() + b.norm()) {
                powers[2][k] = bend / (2.0 * self.size);
            }
        }
        Ok(powers)
    }

    /// Equations and derivatives at given jets (none: zero) and parameter.
    fn linearise(&self, piece: usize, x: &[f64], jets: &[f64], parameter: f64) -> Result<Linearised> {
        let open = self.model.layout();
        let zeros;
        let jets = if jets.is_empty() {
            zeros = vec![0.0; open.jets() * x.len()];
            &zeros
        } else {
            jets
        };
        let mut constants = vec![0.0; open.constants()];
        constants[open.constants() - 1] = parameter;
        let mut out = Linearised::default();
        out.reset(open, x.len());
        self.model.equations(&Batch { piece, x, jets, constants: &constants }, &mut out)?;
        let values = out.residual.iter().chain(&out.jets).chain(&out.constants);
        if let Some(at) = values.enumerate().find(|(_, v)| !v.is_finite()).map(|(k, _)| k % x.len()) {
            let bad = |e: &usize| {
                let width = |array: &[f64], per: usize| array[e * per * x.len()..(e + 1) * per * x.len()].to_vec();
                let all =
                    [width(&out.residual, 1), width(&out.jets, open.jets()), width(&out.constants, open.constants())];
                all.iter().flatten().any(|v| !v.is_finite())
            };
            let equation = (0..open.unknowns()).find(bad).unwrap_or(0);
            return Err(Error::NotFinite { what: self.model.equation_name(equation), x: x[at] });
        }
        Ok(out)
    }

    /// The Jacobian by jets and constants, without the parameter, as complex coefficients.
    fn take(&self, from: &Linearised, n: usize, to: &mut [Complex64]) {
        let open = self.model.layout();
        let (step, columns) = (self.step(), self.columns());
        for e in 0..self.layout.unknowns() {
            let mut store = |column: usize, pick: &dyn Fn(usize, usize) -> f64| {
                for node in 0..n {
                    let imaginary = if self.complex { pick(step * e + 1, node) } else { 0.0 };
                    to[(e * columns + column) * n + node] = Complex64::new(pick(step * e, node), imaginary);
                }
            };
            for (column, (i, k)) in self.jets().enumerate() {
                let jet = self.open_jet(i, k);
                store(column, &|row, node| from.jets[(row * open.jets() + jet) * n + node]);
            }
            for p in 0..self.layout.constants() {
                store(self.layout.jets() + p, &|row, node| {
                    from.constants[(row * open.constants() + step * p) * n + node]
                });
            }
        }
    }

    /// Derivative by the parameter of each coefficient, \[d\]\[J + P\]\[n\].
    fn by_parameter(&self, piece: usize, x: &[f64], parameter: f64) -> Result<Vec<Complex64>> {
        let open = self.model.layout();
        let (d, j, n, columns) = (self.layout.unknowns(), self.layout.jets(), x.len(), self.columns());
        let (step, all) = (self.step(), n * j);
        let mut result = vec![Complex64::ZERO; d * columns * n];
        let last = open.constants() - 1;
        // All unit jets at all nodes in one batch.
        let many: Vec<f64> = (0..j).flat_map(|_| x.iter().copied()).collect();
        let mut jets = vec![0.0; open.jets() * all];
        for (column, (i, k)) in self.jets().enumerate() {
            let jet = self.open_jet(i, k);
            jets[jet * all + column * n..][..n].fill(1.0);
        }
        let out = self.linearise(piece, &many, &jets, parameter)?;
        for e in 0..d {
            let at = |row: usize, k: usize| out.constants[(row * open.constants() + last) * all + k];
            for k in 0..all {
                let imaginary = if self.complex { at(step * e + 1, k) } else { 0.0 };
                result[e * columns * n + k] = Complex64::new(at(step * e, k), imaginary);
            }
        }
        for p in 0..self.layout.constants() {
            let mut constants = vec![0.0; open.constants()];
            (constants[step * p], constants[last]) = (1.0, parameter);
            let zeros = vec![0.0; open.jets() * n];
            let mut out = Linearised::default();
            out.reset(open, n);
            self.model.equations(&Batch { piece, x, jets: &zeros, constants: &constants }, &mut out)?;
            for e in 0..d {
                let at = |row: usize, k: usize| out.constants[(row * open.constants() + last) * n + k];
                for node in 0..n {
                    let imaginary = if self.complex { at(step * e + 1, node) } else { 0.0 };
                    result[(e * columns + j + p) * n + node] = Complex64::new(at(step * e, node), imaginary);
                }
            }
        }
        Ok(result)
    }

    /// A condition (of the doubled model) at given jets, constants and parameter.
    fn condition_at(&self, index: usize, jets: &[f64], constants: &[f64], parameter: f64) -> Result<ConditionValue> {
        let open = self.model.layout();
        let condition = &self.model.conditions()[index];
        let mut all = constants.to_vec();
        all.push(parameter);
        let mut value = ConditionValue::default();
        value.reset(open, condition.places.len());
        self.model.condition(index, jets, &all, &mut value)?;
        let entries = value.jets.iter().chain(&value.constants).chain([&value.residual]);
        if entries.into_iter().all(|v| v.is_finite()) {
            return Ok(value);
        }
        let x = condition.places.first().map_or(0.0, |p| self.model.points()[p.point]);
        Err(Error::NotFinite { what: format!("condition {}", condition.name), x })
    }

    fn condition_powers(&self, index: usize) -> Result<Tied> {
        let open = self.model.layout();
        let Condition { name, places } = &self.model.conditions()[self.step() * index];
        let (step, j, p) = (self.step(), self.layout.jets(), self.layout.constants());
        let mut powers: Powers = std::array::from_fn(|_| vec![Complex64::ZERO; places.len() * j + p]);
        let parts = if self.complex { 2 } else { 1 };
        for part in 0..parts {
            let row = step * index + part;
            let unit = if part == 0 { Complex64::ONE } else { Complex64::I };
            let (zeros, none) = (vec![0.0; places.len() * open.jets()], vec![0.0; open.constants() - 1]);
            let base = self.condition_at(row, &zeros, &none, 0.0)?;
            let mut add =
                |column: usize, coefficient: f64, place: Option<(usize, usize)>, constant: usize| -> Result<()> {
                    let (mut jets, mut constants) = (zeros.clone(), none.clone());
                    match place {
                        Some((place, jet)) => jets[place * open.jets() + jet] = 1.0,
                        None => constants[constant] = 1.0,
                    }
                    let slope = |parameter: f64| -> Result<f64> {
                        Ok(self.condition_at(row, &jets, &constants, parameter)?.constants[open.constants() - 1])
                    };
                    let (a, b) = (slope(0.0)?, slope(self.size)?);
                    let bend = if (b - a).abs() > 1e-12 * (a.abs() + b.abs()) { b - a } else { 0.0 };
                    powers[0][column] += unit * coefficient;
                    powers[1][column] += unit * a;
                    powers[2][column] += unit * (bend / (2.0 * self.size));
                    Ok(())
                };
            for place in 0..places.len() {
                for (column, (i, k)) in self.jets().enumerate() {
                    let jet = self.open_jet(i, k);
                    add(place * j + column, base.jets[place * open.jets() + jet], Some((place, jet)), 0)?;
                }
            }
            for constant in 0..p {
                add(places.len() * j + constant, base.constants[step * constant], None, step * constant)?;
            }
        }
        Ok(Tied { name: name.clone(), places: places.clone(), powers })
    }

    /// Places where coefficients are looked at: piece and coordinate.
    pub fn samples(&self) -> Vec<(usize, f64)> {
        let points = self.model.points();
        let pieces = points.len() - 1;
        let every = pieces.div_ceil(60).max(1);
        let inside = |p: usize| [0.137, 0.613].map(|t| (p, points[p] + t * (points[p + 1] - points[p])));
        (0..pieces).step_by(every).flat_map(inside).collect()
    }

    /// Length of the span.
    pub fn length(&self) -> f64 {
        let points = self.model.points();
        points[points.len() - 1] - points[0]
    }

    /// Largest ratio of the terms without the parameter to those with it, over samples; conditions count where no equation
    /// holds the parameter.
    fn estimated_size(&mut self) -> Result<f64> {
        let (length, columns) = (self.length(), self.columns());
        let weights: Vec<f64> = self.jets().map(|(_, k)| length.powi(-(k as i32))).collect();
        let weight = |column: usize| weights.get(column).copied().unwrap_or(1.0);
        let largest = |values: &[Complex64], weight: &dyn Fn(usize) -> f64| {
            values.iter().enumerate().map(|(c, v)| v.norm() * weight(c)).fold(0.0, f64::max)
        };
        let mut ratios: Vec<f64> = Vec::new();
        for (piece, x) in self.samples() {
            let at = self.equations(piece, &[x])?;
            for e in 0..self.layout.unknowns() {
                let row = e * columns..(e + 1) * columns;
                ratios.extend(ratio(&at, |p| largest(&at[p][row.clone()], &weight)));
            }
        }
        if ratios.is_empty() {
            let jets = self.layout.jets();
            for index in 0..self.model.conditions().len() / self.step() {
                let tied = self.condition_powers(index)?;
                let weight =
                    |column: usize| if column < tied.places.len() * jets { weight(column % jets) } else { 1.0 };
                ratios.extend(ratio(&tied.powers, |p| largest(&tied.powers[p], &weight)));
            }
        }
        ratios.sort_by(f64::total_cmp);
        Ok(ratios.get(ratios.len() / 2).copied().unwrap_or(1.0))
    }

    /// Homogeneous, linear, of degree two at most, and with the parameter in it; gathers conditions and degree.
    fn check(&mut self) -> Result<()> {
        let open = self.model.layout();
        let (mut degree, probe) = (0, [0.0, self.size, -0.7 * self.size]);
        let state = |k: usize, count: usize| -> Vec<f64> {
            (0..count).map(|j| ((j * 7 + k * 13) as f64).sin() * 2.385).collect()
        };
        let row_fault = |row: usize| self.model.equation_name(row);
        for (piece, x) in self.samples() {
            let powers = self.equations(piece, &[x])?;
            degree = degree.max(degree_of(&powers));
            for parameter in probe.iter().map(|p| 1.37 * p) {
                let zero = self.linearise(piece, &[x], &[], parameter)?;
                let other = self.linearise(piece, &[x], &state(1, open.jets()), parameter)?;
                for row in 0..open.unknowns() {
                    let at = row * open.jets()..(row + 1) * open.jets();
                    let size = zero.jets[at.clone()].iter().fold(0.0f64, |s, a| s.max(a.abs()));
                    if zero.residual[row].abs() > ROUNDING * size {
                        return Err(Eigen::Inhomogeneous { what: row_fault(row) }.into());
                    }
                    if !close(&zero.jets[at.clone()], &other.jets[at], size) {
                        return Err(Eigen::Nonlinear { what: row_fault(row) }.into());
                    }
                }
                let mut taken = vec![Complex64::ZERO; powers[0].len()];
                self.take(&zero, 1, &mut taken);
                if let Some(row) = misfit(&taken, &powers, parameter, self.columns()) {
                    return Err(Eigen::Degree { what: row_fault(self.step() * row) }.into());
                }
            }
        }
        for index in 0..self.model.conditions().len() / self.step() {
            let tied = self.condition_powers(index)?;
            degree = degree.max(degree_of(&tied.powers));
            let what = format!("condition {}", tied.name);
            for parameter in probe.iter().map(|p| 1.37 * p) {
                let row = self.step() * index;
                let (zeros, none) = (vec![0.0; tied.places.len() * open.jets()], vec![0.0; open.constants() - 1]);
                let zero = self.condition_at(row, &zeros, &none, parameter)?;
                let other = self.condition_at(row, &state(1, zeros.len()), &state(2, none.len()), parameter)?;
                let size = zero.jets.iter().chain(&zero.constants).fold(0.0f64, |s, a| s.max(a.abs()));
                if zero.residual.abs() > ROUNDING * size {
                    return Err(Eigen::Inhomogeneous { what }.into());
                }
                if !close(&zero.jets, &other.jets, size) {
                    return Err(Eigen::Nonlinear { what }.into());
                }
                let real = |p: usize, column: usize| tied.powers[p][column].re;
                for (column, (i, k)) in self.jets().enumerate() {
                    for place in 0..tied.places.len() {
                        let own = place * self.layout.jets() + column;
                        let value = (0..POWERS).map(|p| real(p, own) * parameter.powi(p as i32)).sum::<f64>();
                        let found = zero.jets[place * open.jets() + self.open_jet(i, k)];
                        if (value - found).abs() > ROUNDING * size {
                            return Err(Eigen::Degree { what }.into());
                        }
                    }
                }
            }
            self.conditions.push(tied);
        }
        self.degree = degree;
        if degree == 0 { Err(Eigen::Absent.into()) } else { Ok(()) }
    }
}

/// lambda at which terms with and without it are equal.
fn ratio(powers: &Powers, size: impl Fn(usize) -> f64) -> Option<f64> {
    debug_assert_eq!(powers.len(), POWERS);
    let (a, b, c) = (size(0), size(1), size(2));
    match (a > 0.0, b > 0.0, c > 0.0) {
        (true, true, _) => Some(a / b),
        (true, false, true) => Some((a / c).sqrt()),
        (false, true, true) => Some(b / c),
        _ => None,
    }
}

fn degree_of(powers: &Powers) -> usize {
    (1..POWERS).rev().find(|p| powers[*p].iter().any(|v| *v != Complex64::ZERO)).unwrap_or(0)
}

fn close(a: &[f64], b: &[f64], size: f64) -> bool {
    a.iter().zip(b).all(|(a, b)| (a - b).abs() <= ROUNDING * size)
}

/// Row in which the polynomial does not give the coefficients found at a parameter.
fn misfit(found: &[Complex64], powers: &Powers, parameter: f64, columns: usize) -> Option<usize> {
    let size: Vec<f64> =
        found.chunks_exact(columns).map(|row| row.iter().map(|v| v.norm()).fold(0.0, f64::max)).collect();
    let bad = |k: &usize| {
        let value: Complex64 = (0..POWERS).map(|p| powers[p][*k] * parameter.powi(p as i32)).sum();
        (value - found[*k]).norm() > ROUNDING * size[k / columns]
    };
    (0..found.len()).find(bad).map(|k| k / columns)
}
