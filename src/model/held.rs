//! Constants with known values.

use super::{Batch, Condition, ConditionValue, Layout, Linearised, Model, Release};
use crate::error::Result;
use std::borrow::Cow;

/// A model whose last constants have known values: F(x, u, p, c) = 0 with c given becomes a problem in u and p.
///
/// The model inside counts c among its unknown constants, so that its derivatives by c are known too; it has as many
/// conditions fewer. Fields of the held problem carry p only, or p and c: both are understood where constants are
/// given to it.
///
/// # Example
/// ```
/// use spanwise::model::{Held, Side};
/// use spanwise::problem::Problem;
/// use spanwise::solve::{Settings, boundary};
///
/// // y' = k y, y(0) = 1, with k left open ...
/// let mut p = Problem::new(0.0, 1.0);
/// let y = p.unknown("y", 1);
/// let k = p.constant("k");
/// p.equation("growth", move |at| at.d(y, 1) - at.d(y, 0) * at.constant(k));
/// p.condition("start", &[(0.0, Side::Right)], move |v| v[0].d(y, 0) - 1.0);
/// let open = p.build()?;
/// // ... and held at 0.7: linear now.
/// let solution = boundary(&Held::new(&open, vec![0.7], true), &Settings::default())?;
/// let end = solution.value(y, 0, 1.0, Side::Left)?;
/// assert!((end.value - 0.7f64.exp()).abs() <= end.error);
/// # Ok::<(), spanwise::error::Error>(())
/// ```
#[derive(Clone)]
pub struct Held<'a> {
    model: &'a dyn Model,
    values: Cow<'a, [f64]>,
    layout: Layout,
    linear: bool,
}

impl std::fmt::Debug for Held<'_> {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.debug_struct("Held").field("values", &self.values).field("layout", &self.layout).finish_non_exhaustive()
    }
}

impl<'a> Held<'a> {
    /// Holds the last `values.len()` constants of a model; `linear` says whether what is left is linear in unknowns and
    /// other constants. Values beyond the number of constants are left aside.
    pub fn new(model: &'a dyn Model, values: impl Into<Cow<'a, [f64]>>, linear: bool) -> Self {
        let (open, mut values) = (model.layout(), values.into());
        if values.len() > open.constants() {
            values.to_mut().truncate(open.constants());
        }
        let layout = Layout::new(open.orders(), open.constants() - values.len());
        Self { model, values, layout, linear }
    }

    /// The values held.
    pub fn values(&self) -> &[f64] {
        &self.values
    }

    /// Constants of the open model.
    fn all(&self, constants: &[f64]) -> Vec<f64> {
        constants.iter().take(self.layout.constants()).chain(self.values.iter()).copied().collect()
    }

    /// Drops the columns of the held constants.
    fn narrow(&self, open: &Linearised, n: usize, out: &mut Linearised) {
        out.residual.copy_from_slice(&open.residual);
        out.jets.copy_from_slice(&open.jets);
        let (few, all) = (self.layout.constants() * n, self.model.layout().constants() * n);
        for e in 0..self.layout.unknowns() {
            out.constants[e * few..(e + 1) * few].copy_from_slice(&open.constants[e * all..e * all + few]);
        }
    }

    fn narrow_condition(&self, open: &ConditionValue, out: &mut ConditionValue) {
        out.residual = open.residual;
        out.jets.copy_from_slice(&open.jets);
        out.constants.copy_from_slice(&open.constants[..self.layout.constants()]);
    }
}

impl Model for Held<'_> {
    fn layout(&self) -> &Layout {
        &self.layout
    }

    fn points(&self) -> &[f64] {
        self.model.points()
    }

    fn linear(&self) -> bool {
        self.linear
    }

    fn equations(&self, batch: &Batch<'_>, out: &mut Linearised) -> Result<()> {
        if self.values.is_empty() {
            return self.model.equations(batch, out);
        }
        let constants = self.all(batch.constants);
        let mut open = Linearised::default();
        open.reset(self.model.layout(), batch.x.len());
        self.model.equations(&Batch { constants: &constants, ..*batch }, &mut open)?;
        self.narrow(&open, batch.x.len(), out);
        Ok(())
    }

    fn conditions(&self) -> &[Condition] {
        self.model.conditions()
    }

    fn condition(&self, index: usize, jets: &[f64], constants: &[f64], out: &mut ConditionValue) -> Result<()> {
        if self.values.is_empty() {
            return self.model.condition(index, jets, constants, out);
        }
        let mut open = ConditionValue::default();
        open.reset(self.model.layout(), self.conditions()[index].places.len());
        self.model.condition(index, jets, &self.all(constants), &mut open)?;
        self.narrow_condition(&open, out);
        Ok(())
    }

    fn releases(&self) -> &[Release] {
        self.model.releases()
    }

    fn equation_rounding(&self, batch: &Batch<'_>, out: &mut Linearised) -> bool {
        if self.values.is_empty() {
            return self.model.equation_rounding(batch, out);
        }
        let constants = self.all(batch.constants);
        let mut open = Linearised::default();
        open.reset(self.model.layout(), batch.x.len());
        let known = self.model.equation_rounding(&Batch { constants: &constants, ..*batch }, &mut open);
        self.narrow(&open, batch.x.len(), out);
        known
    }

    fn condition_rounding(&self, index: usize, jets: &[f64], constants: &[f64], out: &mut ConditionValue) -> bool {
        if self.values.is_empty() {
            return self.model.condition_rounding(index, jets, constants, out);
        }
        let mut open = ConditionValue::default();
        open.reset(self.model.layout(), self.conditions()[index].places.len());
        let known = self.model.condition_rounding(index, jets, &self.all(constants), &mut open);
        self.narrow_condition(&open, out);
        known
    }

    fn open(&self) -> [bool; 2] {
        self.model.open()
    }

    fn written_out(&self, equation: usize) -> bool {
        self.model.written_out(equation)
    }

    fn admissible(&self, x: f64, jets: &[f64], constants: &[f64]) -> bool {
        self.model.admissible(x, jets, &self.all(constants))
    }

    fn guess(&self, x: f64, piece: usize) -> Option<Vec<f64>> {
        self.model.guess(x, piece)
    }

    fn guessed_constants(&self) -> Option<Vec<f64>> {
        let mut constants = self.model.guessed_constants()?;
        constants.truncate(self.layout.constants());
        Some(constants)
    }

    fn unknown_name(&self, unknown: usize) -> String {
        self.model.unknown_name(unknown)
    }

    fn equation_name(&self, equation: usize) -> String {
        self.model.equation_name(equation)
    }
}
