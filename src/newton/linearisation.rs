//! A nonlinear model linearised about a field.

use crate::error::Result;
use crate::field::Field;
use crate::model::{Batch, Condition, ConditionValue, Layout, Linearised, Model, Place, Release, Side};
use std::sync::atomic::{AtomicUsize, Ordering};

/// The affine model F(r) + J(j) (u - r): Jacobian J taken at the field j, residual at the field r. For j = r it is
/// the linearisation of Newton's method, else that of the simplified correction.
pub(crate) struct Linearisation<'a> {
    model: &'a dyn Model,
    jacobian: &'a Field,
    residual: &'a Field,
    same: bool,
    /// Where the last batch lay: the next one is likely there or behind.
    hint: AtomicUsize,
}

impl<'a> Linearisation<'a> {
    /// Linearises about `jacobian`, with the residual at `residual`.
    pub fn new(model: &'a dyn Model, jacobian: &'a Field, residual: &'a Field) -> Self {
        let same = std::ptr::eq(jacobian, residual);
        Self { model, jacobian, residual, same, hint: AtomicUsize::new(0) }
    }

    /// Jets of a field at the nodes of a batch, \[J\]\[n\].
    fn jets(&self, field: &Field, batch: &Batch<'_>) -> Vec<f64> {
        let layout = self.model.layout();
        let n = batch.x.len();
        let mut jets = vec![0.0; layout.jets() * n];
        for (node, x) in batch.x.iter().enumerate() {
            // Inside the piece, whatever side of a break the node lies on.
            let element = field.locate_in(*x, batch.piece, self.hint.load(Ordering::Relaxed));
            self.hint.store(element, Ordering::Relaxed);
            let s = field.element(element).reference(*x);
            for (j, value) in field.jets(element, s, layout.orders()).into_iter().enumerate() {
                jets[j * n + node] = value;
            }
        }
        jets
    }

    /// The model itself at the field it is linearised about.
    pub fn equations_at_centre(&self, batch: &Batch<'_>, out: &mut Linearised) -> Result<()> {
        let jets = self.jets(self.residual, batch);
        self.model.equations(&Batch { jets: &jets, constants: &self.residual.constants, ..*batch }, out)
    }

    /// A condition of the model at the field it is linearised about.
    pub fn condition_at_centre(&self, index: usize, out: &mut ConditionValue) -> Result<()> {
        let places = &self.model.conditions()[index].places;
        let own: Vec<f64> = places.iter().flat_map(|p| self.place_jets(self.residual, p)).collect();
        self.model.condition(index, &own, &self.residual.constants, out)
    }

    fn place_jets(&self, field: &Field, place: &Place) -> Vec<f64> {
        let last = self.model.points().len() - 1;
        let x = self.model.points()[place.point];
        let side = match place.point {
            0 => Side::Right,
            p if p == last => Side::Left,
            _ => place.side,
        };
        let element = field.locate(x, side);
        field.jets(element, field.element(element).reference(x), self.model.layout().orders())
    }
}

impl Model for Linearisation<'_> {
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
        let layout = self.model.layout();
        let (d, j, p, n) = (layout.unknowns(), layout.jets(), layout.constants(), batch.x.len());
        let jets = self.jets(self.residual, batch);
        let at = Batch { jets: &jets, constants: &self.residual.constants, ..*batch };
        self.model.equations(&at, out)?;
        if !self.same {
            let residual = std::mem::take(&mut out.residual);
            let other = self.jets(self.jacobian, batch);
            let at = Batch { jets: &other, constants: &self.jacobian.constants, ..*batch };
            out.reset(layout, n);
            self.model.equations(&at, out)?;
            out.residual = residual;
        }
        // What is asked is the residual at the jets of the batch: F(r) + J (u - r).
        for e in 0..d {
            for node in 0..n {
                let mut sum = 0.0;
                for k in 0..j {
                    let du = batch.jets[k * n + node] - jets[k * n + node];
                    let a = out.jets[(e * j + k) * n + node];
                    if a != 0.0 {
                        sum += a * du;
                    }
                }
                for c in 0..p {
                    sum += out.constants[(e * p + c) * n + node] * (batch.constants[c] - self.residual.constants[c]);
                }
                out.residual[e * n + node] += sum;
            }
        }
        Ok(())
    }

    fn conditions(&self) -> &[Condition] {
        self.model.conditions()
    }

    fn condition(&self, index: usize, jets: &[f64], constants: &[f64], out: &mut ConditionValue) -> Result<()> {
        let places = &self.model.conditions()[index].places;
        let gather = |field: &Field| places.iter().flat_map(|p| self.place_jets(field, p)).collect::<Vec<f64>>();
        let own = gather(self.residual);
        self.model.condition(index, &own, &self.residual.constants, out)?;
        if !self.same {
            let residual = out.residual;
            out.reset(self.model.layout(), places.len());
            self.model.condition(index, &gather(self.jacobian), &self.jacobian.constants, out)?;
            out.residual = residual;
        }
        for (a, (u, r)) in out.jets.iter().zip(jets.iter().zip(&own)) {
            out.residual += if *a != 0.0 { a * (u - r) } else { 0.0 };
        }
        for (a, (u, r)) in out.constants.iter().zip(constants.iter().zip(&self.residual.constants)) {
            out.residual += a * (u - r);
        }
        Ok(())
    }

    fn releases(&self) -> &[Release] {
        self.model.releases()
    }

    fn equation_rounding(&self, batch: &Batch<'_>, out: &mut Linearised) -> bool {
        let jets = self.jets(self.residual, batch);
        let at = Batch { jets: &jets, constants: &self.residual.constants, ..*batch };
        self.model.equation_rounding(&at, out)
    }

    fn condition_rounding(&self, index: usize, _jets: &[f64], _constants: &[f64], out: &mut ConditionValue) -> bool {
        let places = &self.model.conditions()[index].places;
        let own: Vec<f64> = places.iter().flat_map(|p| self.place_jets(self.residual, p)).collect();
        self.model.condition_rounding(index, &own, &self.residual.constants, out)
    }

    fn open(&self) -> [bool; 2] {
        self.model.open()
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
