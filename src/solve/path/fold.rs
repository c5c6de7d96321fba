//! Folds of a path as solutions of the extended system.

use super::arc::{Form, Metric};
use crate::error::Result;
use crate::field::Field;
use crate::mesh::Mesh;
use crate::model::{Batch, Condition, ConditionValue, Layout, Linearised, Model, Release};

/// Step of the differences behind the second derivatives, in parts of the sizes of the unknowns.
const STEP: f64 = 1e-3;

/// F(u, p) = 0, F_u phi = 0 and one component of phi given: at a fold the linearised problem with the parameter held has
/// a solution phi, and this larger problem is a regular one (Seydel, Numer. Math. 33, 1979; Moore & Spence, SIAM J.
/// Numer. Anal. 17, 1980).
///
/// Unknown functions are u and phi; constants are those of the model, the parameter last, and then the constants' part of
/// phi. Residuals are exact. Second derivatives of F enter the Jacobian only, as differences of fourth order of the exact
/// first ones along phi: they decide how fast the iteration converges, not what it converges to.
pub(super) struct Extended<'a> {
    model: &'a dyn Model,
    layout: Layout,
    conditions: Vec<Condition>,
    releases: Vec<Release>,
    /// Component of phi that is given, and its value.
    given: (Form, f64),
    /// Share of phi that makes a small step.
    step: f64,
}

impl<'a> Extended<'a> {
    /// The system near a point of the path, and its start.
    pub fn near(model: &'a dyn Model, field: &Field, tangent: &Field, metric: &Metric) -> (Self, Field) {
        let open = model.layout();
        let orders: Vec<usize> = open.orders().iter().chain(open.orders()).copied().collect();
        let layout = Layout::new(&orders, 2 * open.constants() - 1);
        let component = metric.leading(tangent);
        let (j, c) = (open.jets(), open.constants());
        // The component among both ends' jets of the doubled unknowns, or behind the constants of the model.
        let doubled =
            if component < 2 * j { (component / j) * 2 * j + j + component % j } else { 4 * j + c + component - 2 * j };
        let form = Form::one(&layout, model.points().len(), doubled);
        let start = doubled_field(&layout, field, tangent);
        let value = form.on(&start);
        let twice = model.conditions().iter().map(|condition| Condition {
            name: format!("{}, at the fold", condition.name),
            places: condition.places.clone(),
        });
        let size = Condition { name: "size of the free motion".into(), places: super::arc::ends(model.points().len()) };
        let conditions = model.conditions().iter().cloned().chain(twice).chain([size]).collect();
        let more = model.releases().iter().map(|r| Release { unknown: r.unknown + open.unknowns(), ..*r });
        let releases = model.releases().iter().copied().chain(more).collect();
        let step = STEP / metric.length(tangent).max(f64::MIN_POSITIVE);
        (Self { model, layout, conditions, releases, given: (form, value), step }, start)
    }

    /// Derivatives of the equations at u + share * phi.
    fn shifted(&self, batch: &Batch<'_>, share: f64, out: &mut Linearised) -> Result<()> {
        let open = self.model.layout();
        let (half, c) = (open.jets() * batch.x.len(), open.constants());
        let mut jets = batch.jets[..half].to_vec();
        jets.iter_mut().zip(&batch.jets[half..]).for_each(|(u, phi)| *u += share * phi);
        let mut constants = batch.constants[..c].to_vec();
        constants.iter_mut().zip(&batch.constants[c..]).for_each(|(q, psi)| *q += share * psi);
        out.reset(open, batch.x.len());
        self.model.equations(&Batch { jets: &jets, constants: &constants, ..*batch }, out)
    }

    /// The same for a condition; jets \[places\]\[2J\].
    fn shifted_condition(
        &self,
        index: usize,
        jets: &[f64],
        constants: &[f64],
        share: f64,
        out: &mut ConditionValue,
    ) -> Result<()> {
        let open = self.model.layout();
        let (j, c) = (open.jets(), open.constants());
        let own: Vec<f64> = jets
            .chunks_exact(2 * j)
            .flat_map(|place| (0..j).map(|k| place[k] + share * place[j + k]).collect::<Vec<_>>())
            .collect();
        let mut own_constants = constants[..c].to_vec();
        own_constants.iter_mut().zip(&constants[c..]).for_each(|(q, psi)| *q += share * psi);
        out.reset(open, jets.len() / (2 * j));
        self.model.condition(index, &own, &own_constants, out)
    }
}

/// u and phi side by side.
fn doubled_field(layout: &Layout, field: &Field, tangent: &Field) -> Field {
    let d = field.layout.unknowns();
    let series = (0..field.mesh.elements.len()).map(|e| {
        let of = |f: &Field| {
            let jets = (0..d).flat_map(|i| (0..=f.layout.orders()[i]).map(move |k| (i, k)));
            jets.map(|(i, k)| f.series(e, i, k).to_vec()).collect::<Vec<_>>()
        };
        [of(field), of(tangent)].concat()
    });
    let own = tangent.constants.len() - 1;
    let constants = field.constants.iter().chain(&tangent.constants[..own]).copied().collect();
    Field::from_series(field.mesh.clone(), layout, constants, series.collect())
}

/// The first unknowns and constants of a field, as many as `layout` has; further constants are put behind.
pub(super) fn first_part(field: &Field, layout: &Layout, mesh: &Mesh, more: &[f64]) -> Field {
    let series = (0..mesh.elements.len()).map(|e| {
        let jets = (0..layout.unknowns()).flat_map(|i| (0..=layout.orders()[i]).map(move |k| (i, k)));
        jets.map(|(i, k)| field.series(e, i, k).to_vec()).collect()
    });
    let own = layout.constants() - more.len();
    let constants = field.constants.iter().take(own).chain(more).copied().collect();
    Field::from_series(mesh.clone(), layout, constants, series.collect())
}

/// Fourth-order difference from values at -2, -1, 1, 2 steps.
fn difference(step: f64, values: [f64; 4]) -> f64 {
    let [far_left, left, right, far_right] = values;
    // Where the function has no value a step away the iteration has to do without.
    let slope = (8.0 * (right - left) - (far_right - far_left)) / (12.0 * step);
    if slope.is_finite() { slope } else { 0.0 }
}

impl Model for Extended<'_> {
    fn layout(&self) -> &Layout {
        &self.layout
    }

    fn points(&self) -> &[f64] {
        self.model.points()
    }

    fn linear(&self) -> bool {
        false
    }

    fn equations(&self, batch: &Batch<'_>, out: &mut Linearised) -> Result<()> {
        let open = self.model.layout();
        let (d, j, c, n) = (open.unknowns(), open.jets(), open.constants(), batch.x.len());
        let all = self.layout.constants();
        let mut at = Linearised::default();
        self.shifted(batch, 0.0, &mut at)?;
        let mut near: [Linearised; 4] = Default::default();
        for (share, lin) in [-2.0, -1.0, 1.0, 2.0].into_iter().zip(&mut near) {
            self.shifted(batch, share * self.step, lin)?;
        }
        let phi = &batch.jets[j * n..];
        let psi = &batch.constants[c..];
        for e in 0..d {
            for node in 0..n {
                out.residual[e * n + node] = at.residual[e * n + node];
                let mut sum = 0.0;
                for k in 0..j {
                    let from = (e * j + k) * n + node;
                    let a = at.jets[from];
                    out.jets[(e * 2 * j + k) * n + node] = a;
                    out.jets[((d + e) * 2 * j + j + k) * n + node] = a;
                    let second = difference(self.step, [0, 1, 2, 3].map(|s: usize| near[s].jets[from]));
                    out.jets[((d + e) * 2 * j + k) * n + node] = second;
                    if a != 0.0 {
                        sum += a * phi[k * n + node];
                    }
                }
                for q in 0..c {
                    let from = (e * c + q) * n + node;
                    let a = at.constants[from];
                    out.constants[(e * all + q) * n + node] = a;
                    let second = difference(self.step, [0, 1, 2, 3].map(|s: usize| near[s].constants[from]));
                    out.constants[((d + e) * all + q) * n + node] = second;
                    // The parameter, the last, has no part in phi.
                    if let Some(psi) = psi.get(q) {
                        out.constants[((d + e) * all + c + q) * n + node] = a;
                        sum += a * psi;
                    }
                }
                out.residual[(d + e) * n + node] = sum;
            }
        }
        Ok(())
    }

    fn conditions(&self) -> &[Condition] {
        &self.conditions
    }

    fn condition(&self, index: usize, jets: &[f64], constants: &[f64], out: &mut ConditionValue) -> Result<()> {
        let open = self.model.layout();
        let (j, c, count) = (open.jets(), open.constants(), self.model.conditions().len());
        if index == 2 * count {
            let (form, value) = &self.given;
            form.put(*value, jets, constants, out);
            return Ok(());
        }
        let own = index % count;
        let mut at = ConditionValue::default();
        self.shifted_condition(own, jets, constants, 0.0, &mut at)?;
        let places = jets.len() / (2 * j);
        if index < count {
            out.residual = at.residual;
            for place in 0..places {
                out.jets[place * 2 * j..place * 2 * j + j].copy_from_slice(&at.jets[place * j..(place + 1) * j]);
            }
            out.constants[..c].copy_from_slice(&at.constants);
            return Ok(());
        }
        let mut near: [ConditionValue; 4] = Default::default();
        for (share, value) in [-2.0, -1.0, 1.0, 2.0].into_iter().zip(&mut near) {
            self.shifted_condition(own, jets, constants, share * self.step, value)?;
        }
        let mut sum = 0.0;
        for place in 0..places {
            for k in 0..j {
                let from = place * j + k;
                let a = at.jets[from];
                out.jets[place * 2 * j + j + k] = a;
                out.jets[place * 2 * j + k] = difference(self.step, [0, 1, 2, 3].map(|s: usize| near[s].jets[from]));
                if a != 0.0 {
                    sum += a * jets[place * 2 * j + j + k];
                }
            }
        }
        for q in 0..c {
            out.constants[q] = difference(self.step, [0, 1, 2, 3].map(|s: usize| near[s].constants[q]));
            if q + 1 < c {
                out.constants[c + q] = at.constants[q];
                sum += at.constants[q] * constants[c + q];
            }
        }
        out.residual = sum;
        Ok(())
    }

    fn releases(&self) -> &[Release] {
        &self.releases
    }

    fn equation_rounding(&self, batch: &Batch<'_>, out: &mut Linearised) -> bool {
        let open = self.model.layout();
        let (d, j, c, n) = (open.unknowns(), open.jets(), open.constants(), batch.x.len());
        let all = self.layout.constants();
        let mut own = Linearised::default();
        own.reset(open, n);
        let at = Batch { jets: &batch.jets[..j * n], constants: &batch.constants[..c], ..*batch };
        if !self.model.equation_rounding(&at, &mut own) {
            return false;
        }
        for e in 0..d {
            for node in 0..n {
                out.residual[e * n + node] = own.residual[e * n + node];
                let mut sum = 0.0;
                for k in 0..j {
                    let bound = own.jets[(e * j + k) * n + node];
                    out.jets[(e * 2 * j + k) * n + node] = bound;
                    out.jets[((d + e) * 2 * j + j + k) * n + node] = bound;
                    sum += bound * batch.jets[(j + k) * n + node].abs();
                }
                for q in 0..c {
                    let bound = own.constants[(e * c + q) * n + node];
                    out.constants[(e * all + q) * n + node] = bound;
                    if q + 1 < c {
                        out.constants[((d + e) * all + c + q) * n + node] = bound;
                        sum += bound * batch.constants[c + q].abs();
                    }
                }
                out.residual[(d + e) * n + node] = sum;
            }
        }
        true
    }

    fn written_out(&self, equation: usize) -> bool {
        self.model.written_out(equation % self.model.layout().unknowns())
    }

    fn admissible(&self, x: f64, jets: &[f64], constants: &[f64]) -> bool {
        let open = self.model.layout();
        self.model.admissible(x, &jets[..open.jets()], &constants[..open.constants()])
    }

    fn unknown_name(&self, unknown: usize) -> String {
        let d = self.model.layout().unknowns();
        if unknown < d {
            self.model.unknown_name(unknown)
        } else {
            format!("the free motion of {}", self.model.unknown_name(unknown - d))
        }
    }

    fn equation_name(&self, equation: usize) -> String {
        self.model.equation_name(equation % self.model.layout().unknowns())
    }
}
