//! Models that a path is followed with: the problem with one linear condition more, and its tangent.

use crate::error::Result;
use crate::field::Field;
use crate::model::{Batch, Condition, ConditionValue, Layout, Linearised, Model, Place, Release, Side};

/// A linear form of the states at both ends of the span and of the constants.
///
/// The state at one end determines the solution of a regular problem, so these numbers measure how far two solutions lie
/// apart, without an integral over the span.
#[derive(Debug, Clone)]
pub(super) struct Form {
    places: Vec<Place>,
    /// Weight of each jet at each place, \[2\]\[J\].
    jets: Vec<f64>,
    constants: Vec<f64>,
}

/// Both ends of a model with `points` points.
pub(super) fn ends(points: usize) -> Vec<Place> {
    vec![Place { point: 0, side: Side::Right }, Place { point: points - 1, side: Side::Left }]
}

/// Jets at both ends, \[2\]\[J\].
pub(super) fn end_jets(field: &Field) -> Vec<f64> {
    let last = field.mesh.elements.len() - 1;
    let mut jets = field.jets(0, -1.0, field.layout.orders());
    jets.extend(field.jets(last, 1.0, field.layout.orders()));
    jets
}

impl Form {
    /// The form that picks one component of the states at the ends (below `2 * layout.jets()`) or one constant (behind).
    pub fn one(layout: &Layout, points: usize, component: usize) -> Self {
        let mut form =
            Self { places: ends(points), jets: vec![0.0; 2 * layout.jets()], constants: vec![0.0; layout.constants()] };
        let count = form.jets.len();
        if component < count {
            form.jets[component] = 1.0;
        } else {
            form.constants[component - count] = 1.0;
        }
        form
    }

    /// Value on a field.
    pub fn on(&self, field: &Field) -> f64 {
        self.of(&end_jets(field), &field.constants)
    }

    /// As the condition form = value.
    pub fn put(&self, value: f64, jets: &[f64], constants: &[f64], out: &mut ConditionValue) {
        out.residual = self.of(jets, constants) - value;
        out.jets.copy_from_slice(&self.jets);
        out.constants.copy_from_slice(&self.constants);
    }

    fn of(&self, jets: &[f64], constants: &[f64]) -> f64 {
        let dot = |a: &[f64], b: &[f64]| a.iter().zip(b).filter(|(a, _)| **a != 0.0).map(|(a, b)| a * b).sum::<f64>();
        dot(&self.jets, jets) + dot(&self.constants, constants)
    }
}

/// The measure of distances: each number at the ends relative to its size, all together as one.
#[derive(Debug, Clone)]
pub(super) struct Metric {
    /// Size of each jet; 0 for the highest derivatives, which do not count.
    jets: Vec<f64>,
    constants: Vec<f64>,
}

impl Metric {
    /// Nothing has a size but the parameter, the last constant.
    pub fn new(layout: &Layout, parameter: f64) -> Self {
        let mut constants = vec![0.0; layout.constants()];
        constants[layout.constants() - 1] = parameter;
        Self { jets: vec![0.0; layout.jets()], constants }
    }

    /// Takes in the sizes of a field times `factor`. What is far smaller than the rest of its unknown or, measured by
    /// `scale`, than the other unknowns may be nothing but rounding, and must not count as if it were not.
    pub fn grow(&mut self, field: &Field, factor: f64, scale: &[f64]) {
        let layout = &field.layout;
        let length = field.mesh.length();
        let whole = |i: usize, m: usize| (0..m).map(|k| field.size(i, k) * length.powi(k as i32)).fold(0.0, f64::max);
        let wholes: Vec<f64> = layout.orders().iter().enumerate().map(|(i, &m)| whole(i, m)).collect();
        let largest = wholes.iter().zip(scale).map(|(w, s)| w / s).fold(0.0, f64::max);
        for (i, &m) in layout.orders().iter().enumerate() {
            let least = (1e-3 * wholes[i]).max(1e-6 * largest * scale[i]);
            for k in 0..m {
                let size = &mut self.jets[layout.jet(i, k)];
                *size = size.max(factor * field.size(i, k).max(least / length.powi(k as i32)));
            }
        }
        let own = self.constants.len() - 1;
        for (size, c) in self.constants[..own].iter_mut().zip(&field.constants) {
            *size = size.max(factor * c.abs());
        }
    }

    /// The form v -> <t, v>.
    pub fn along(&self, tangent: &Field, points: usize) -> Form {
        let square = |size: f64| if size > 0.0 { 1.0 / (size * size) } else { 0.0 };
        let counted = self.jets.iter().filter(|s| **s > 0.0).count().max(1) as f64;
        let jets = end_jets(tangent).into_iter().enumerate().map(|(k, t)| {
            let weight = square(self.jets[k % self.jets.len()]);
            if weight > 0.0 { t * weight / (2.0 * counted) } else { 0.0 }
        });
        Form {
            places: ends(points),
            jets: jets.collect(),
            constants: tangent.constants.iter().zip(&self.constants).map(|(t, s)| t * square(*s)).collect(),
        }
    }

    /// <a, b>.
    pub fn product(&self, a: &Field, b: &Field) -> f64 {
        self.along(a, 2).on(b)
    }

    /// Length of a field.
    pub fn length(&self, field: &Field) -> f64 {
        self.product(field, field).max(0.0).sqrt()
    }

    /// Distance of two fields, on whatever meshes.
    pub fn distance(&self, a: &Field, b: &Field) -> f64 {
        let counted = self.jets.iter().filter(|s| **s > 0.0).count().max(1) as f64;
        let square = |d: f64, size: f64| if size > 0.0 { (d / size).powi(2) } else { 0.0 };
        let jets = end_jets(a).into_iter().zip(end_jets(b)).enumerate();
        let states: f64 = jets.map(|(k, (a, b))| square(a - b, self.jets[k % self.jets.len()])).sum();
        let constants = a.constants.iter().zip(&b.constants).zip(&self.constants);
        (states / (2.0 * counted) + constants.map(|((a, b), size)| square(a - b, *size)).sum::<f64>()).sqrt()
    }

    /// Component (numbered as in [`Form::one`]) of a tangent that is largest against its size, the parameter left out.
    pub fn leading(&self, tangent: &Field) -> usize {
        let jets = end_jets(tangent);
        let own = self.jets.len();
        let sizes = (0..jets.len()).map(|k| self.jets[k % own]).chain(self.constants.iter().copied());
        let mut best = (0, 0.0);
        let count = jets.len() + self.constants.len() - 1;
        for (k, (t, size)) in jets.iter().chain(&tangent.constants).zip(sizes).enumerate().take(count) {
            if size > 0.0 && (t / size).abs() > best.1 {
                best = (k, (t / size).abs());
            }
        }
        best.0
    }
}

/// Conditions of a model and one more.
fn with_one_more(model: &dyn Model, name: &str, form: &Form) -> Vec<Condition> {
    let more = Condition { name: name.into(), places: form.places.clone() };
    model.conditions().iter().cloned().chain([more]).collect()
}

/// A model with one condition fewer than needed, closed by `form = value`.
pub(super) struct Closed<'a> {
    model: &'a dyn Model,
    form: Form,
    value: f64,
    conditions: Vec<Condition>,
}

impl<'a> Closed<'a> {
    pub fn new(model: &'a dyn Model, form: Form, value: f64) -> Self {
        let conditions = with_one_more(model, "the next point of the path", &form);
        Self { model, form, value, conditions }
    }
}

impl Model for Closed<'_> {
    fn layout(&self) -> &Layout {
        self.model.layout()
    }

    fn points(&self) -> &[f64] {
        self.model.points()
    }

    fn linear(&self) -> bool {
        self.model.linear()
    }

    fn equations(&self, batch: &Batch<'_>, out: &mut Linearised) -> Result<()> {
        self.model.equations(batch, out)
    }

    fn conditions(&self) -> &[Condition] {
        &self.conditions
    }

    fn condition(&self, index: usize, jets: &[f64], constants: &[f64], out: &mut ConditionValue) -> Result<()> {
        if index + 1 < self.conditions.len() {
            return self.model.condition(index, jets, constants, out);
        }
        self.form.put(self.value, jets, constants, out);
        Ok(())
    }

    fn releases(&self) -> &[Release] {
        self.model.releases()
    }

    fn equation_rounding(&self, batch: &Batch<'_>, out: &mut Linearised) -> bool {
        self.model.equation_rounding(batch, out)
    }

    fn written_out(&self, equation: usize) -> bool {
        self.model.written_out(equation)
    }

    fn admissible(&self, x: f64, jets: &[f64], constants: &[f64]) -> bool {
        self.model.admissible(x, jets, constants)
    }

    fn unknown_name(&self, unknown: usize) -> String {
        self.model.unknown_name(unknown)
    }

    fn equation_name(&self, equation: usize) -> String {
        self.model.equation_name(equation)
    }
}

/// F_u v + F_c w = 0 about a field: the directions in which its solutions go on.
pub(super) struct Homogeneous<'a> {
    model: &'a dyn Model,
    about: &'a Field,
}

impl<'a> Homogeneous<'a> {
    pub fn new(model: &'a dyn Model, about: &'a Field) -> Self {
        Self { model, about }
    }
}

impl Model for Homogeneous<'_> {
    fn layout(&self) -> &Layout {
        self.model.layout()
    }

    fn points(&self) -> &[f64] {
        self.model.points()
    }

    fn linear(&self) -> bool {
        true
    }

    fn equations(&self, batch: &Batch<'_>, out: &mut Linearised) -> Result<()> {
        let layout = self.layout();
        let (j, n) = (layout.jets(), batch.x.len());
        let mut jets = vec![0.0; j * n];
        let mut hint = 0;
        for (node, x) in batch.x.iter().enumerate() {
            hint = self.about.locate_in(*x, batch.piece, hint);
            let s = self.about.element(hint).reference(*x);
            let own = self.about.jets(hint, s, layout.orders());
            own.into_iter().enumerate().for_each(|(k, value)| jets[k * n + node] = value);
        }
        self.model.equations(&Batch { jets: &jets, constants: &self.about.constants, ..*batch }, out)?;
        let p = layout.constants();
        for e in 0..layout.unknowns() {
            for node in 0..n {
                let own = (0..j).map(|k| (out.jets[(e * j + k) * n + node], batch.jets[k * n + node]));
                let constants = (0..p).map(|c| (out.constants[(e * p + c) * n + node], batch.constants[c]));
                out.residual[e * n + node] =
                    own.chain(constants).filter(|(a, _)| *a != 0.0).map(|(a, v)| a * v).sum::<f64>();
            }
        }
        Ok(())
    }

    fn conditions(&self) -> &[Condition] {
        self.model.conditions()
    }

    fn condition(&self, index: usize, jets: &[f64], constants: &[f64], out: &mut ConditionValue) -> Result<()> {
        let last = self.points().len() - 1;
        let at = |place: &Place| {
            let side = match place.point {
                0 => Side::Right,
                p if p == last => Side::Left,
                _ => place.side,
            };
            let x = self.points()[place.point];
            let element = self.about.locate(x, side);
            self.about.jets(element, self.about.element(element).reference(x), self.layout().orders())
        };
        let own: Vec<f64> = self.conditions()[index].places.iter().flat_map(at).collect();
        self.model.condition(index, &own, &self.about.constants, out)?;
        let pairs = out.jets.iter().zip(jets).chain(out.constants.iter().zip(constants));
        out.residual = pairs.filter(|(a, _)| **a != 0.0).map(|(a, v)| a * v).sum();
        Ok(())
    }

    fn releases(&self) -> &[Release] {
        self.model.releases()
    }

    fn written_out(&self, equation: usize) -> bool {
        self.model.written_out(equation)
    }

    fn unknown_name(&self, unknown: usize) -> String {
        self.model.unknown_name(unknown)
    }

    fn equation_name(&self, equation: usize) -> String {
        self.model.equation_name(equation)
    }
}
