//! A way to solutions with thin layers: the highest derivatives are given more weight at first, and less and less.

use crate::adapt::exponents::sample;
use crate::error::Result;
use crate::field::Field;
use crate::model::{Batch, Condition, ConditionValue, Layout, Linearised, Model, Release};
use crate::newton::Linearisation;

/// F_e + share * weight_e * u_i^(m_i), i being the unknown whose highest derivative leads equation e.
pub(super) struct Viscous<'a> {
    model: &'a dyn Model,
    /// For each equation the leading unknown and the weight; none where nothing is to be added.
    leading: Vec<Option<(usize, f64)>>,
    /// From 1 down to 0.
    pub share: f64,
}

impl<'a> Viscous<'a> {
    /// Weights as large as the other terms can be over the span, with the sign of the term that is there.
    pub fn new(model: &'a dyn Model, about: &Field) -> Result<Self> {
        let layout = model.layout();
        let (d, j) = (layout.unknowns(), layout.jets());
        let points = model.points();
        let length = points[points.len() - 1] - points[0];
        let linear = Linearisation::new(model, about, about);
        let mut own = vec![vec![0.0f64; d]; d];
        let mut others = vec![0.0f64; d];
        for t in [0.07, 0.31, 0.5, 0.72, 0.93] {
            let x = points[0] + t * length;
            let piece = points.windows(2).position(|p| x <= p[1]).unwrap_or(0);
            let equations = sample(&linear, piece, x)?;
            for e in 0..d {
                for (i, &m) in layout.orders().iter().enumerate() {
                    let a = |k: usize| equations.jets[e * j + layout.jet(i, k)];
                    if a(m).abs() > own[e][i].abs() {
                        own[e][i] = a(m);
                    }
                    others[e] = (0..m).map(|k| a(k).abs() * length.powi((m - k) as i32)).fold(others[e], f64::max);
                }
            }
        }
        let leading = (0..d).map(|e| {
            let i = (0..d).max_by(|a, b| own[e][*a].abs().total_cmp(&own[e][*b].abs()))?;
            let thin = own[e][i] != 0.0 && layout.orders()[i] > 0 && own[e][i].abs() < 0.5 * others[e];
            thin.then(|| (i, others[e] * own[e][i].signum()))
        });
        let leading = leading.collect();
        Ok(Self { model, leading, share: 1.0 })
    }

    /// Whether anything is thin at all.
    pub fn useful(&self) -> bool {
        self.leading.iter().any(Option::is_some)
    }
}

impl Model for Viscous<'_> {
    fn layout(&self) -> &Layout {
        self.model.layout()
    }

    fn points(&self) -> &[f64] {
        self.model.points()
    }

    fn linear(&self) -> bool {
        false
    }

    fn equations(&self, batch: &Batch<'_>, out: &mut Linearised) -> Result<()> {
        self.model.equations(batch, out)?;
        let (layout, n) = (self.model.layout(), batch.x.len());
        for (e, leading) in self.leading.iter().enumerate() {
            let Some((i, weight)) = *leading else { continue };
            let jet = layout.jet(i, layout.orders()[i]);
            let added = self.share * weight;
            for node in 0..n {
                out.residual[e * n + node] += added * batch.jets[jet * n + node];
                out.jets[(e * layout.jets() + jet) * n + node] += added;
            }
        }
        Ok(())
    }

    fn conditions(&self) -> &[Condition] {
        self.model.conditions()
    }

    fn condition(&self, index: usize, jets: &[f64], constants: &[f64], out: &mut ConditionValue) -> Result<()> {
        self.model.condition(index, jets, constants, out)
    }

    fn releases(&self) -> &[Release] {
        self.model.releases()
    }

    fn open(&self) -> [bool; 2] {
        self.model.open()
    }

    fn admissible(&self, x: f64, jets: &[f64], constants: &[f64]) -> bool {
        self.model.admissible(x, jets, constants)
    }
}
