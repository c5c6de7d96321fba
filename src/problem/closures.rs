//! What a closure sees, and how its derivatives are gathered.

use super::Number;
use crate::model::{Layout, Profile};
use nalgebra::SVector;
use num_dual::Derivative;

/// Derivatives taken in one sweep of a closure.
pub(super) const WIDTH: usize = 8;

/// Which inputs carry which derivative.
#[derive(Debug, Clone, Copy)]
pub(super) enum Seeds {
    /// Inputs `first .. first + WIDTH` of a numbering in which this station's jets start at `shift`.
    Window {
        /// First input of the window.
        first: usize,
        /// Number of this station's first jet.
        shift: usize,
    },
    /// The derivative along the span, in the first place.
    Along,
    /// No derivative.
    None,
}

/// A point of the span as a closure sees it: coordinate, unknowns with their derivatives, constants.
#[derive(Debug, Clone, Copy)]
pub struct Station<'a> {
    x: f64,
    piece: usize,
    layout: &'a Layout,
    jets: &'a [f64],
    constants: &'a [f64],
    seeds: Seeds,
    constants_at: Option<usize>,
}

impl<'a> Station<'a> {
    pub(super) fn new(
        layout: &'a Layout,
        x: f64,
        piece: usize,
        jets: &'a [f64],
        constants: &'a [f64],
        seeds: Seeds,
    ) -> Self {
        Self { x, piece, layout, jets, constants, seeds, constants_at: None }
    }

    /// Number of the first constant in the numbering of the derivatives; without it they follow the jets.
    pub(super) fn constants_at(self, number: usize) -> Self {
        Self { constants_at: Some(number), ..self }
    }

    /// The coordinate.
    pub fn x(&self) -> f64 {
        self.x
    }

    /// The coordinate as a number of the closure's type.
    pub fn coordinate(&self) -> Number {
        match self.seeds {
            Seeds::Along => with_derivative(self.x, 0, 1.0),
            _ => Number::from_re(self.x),
        }
    }

    /// The piece between two neighbouring breaks, from 0: take data that step from it, not from x.
    pub fn piece(&self) -> usize {
        self.piece
    }

    /// u^(k) of an unknown, k up to its order.
    ///
    /// # Panics
    /// If the unknown or the derivative does not exist.
    pub fn d(&self, unknown: usize, k: usize) -> Number {
        assert!(
            unknown < self.layout.unknowns() && k <= self.layout.orders()[unknown],
            "derivative {k} of unknown {unknown} does not exist in this problem"
        );
        let index = self.layout.jet(unknown, k);
        match self.seeds {
            Seeds::Window { first, shift } => seeded(self.jets[index], shift + index, first),
            Seeds::Along => with_derivative(self.jets[index], 0, self.jets[index + 1]),
            Seeds::None => Number::from_re(self.jets[index]),
        }
    }

    /// An unknown constant.
    ///
    /// # Panics
    /// If the constant does not exist.
    pub fn constant(&self, index: usize) -> Number {
        let value = self.constants[index];
        match self.seeds {
            Seeds::Window { first, shift } => {
                seeded(value, self.constants_at.unwrap_or(shift + self.layout.jets()) + index, first)
            }
            _ => Number::from_re(value),
        }
    }
}

fn with_derivative(value: f64, slot: usize, derivative: f64) -> Number {
    let mut eps = SVector::<f64, WIDTH>::zeros();
    eps[slot] = derivative;
    Number::new(value, Derivative::some(eps))
}

fn seeded(value: f64, number: usize, first: usize) -> Number {
    if (first..first + WIDTH).contains(&number) {
        with_derivative(value, number - first, 1.0)
    } else {
        Number::from_re(value)
    }
}

/// Sweeps over all windows of inputs; `store` receives each derivative. Returns the value.
pub(super) fn sweep(total: usize, evaluate: impl Fn(usize) -> Number, mut store: impl FnMut(usize, f64)) -> f64 {
    let mut value = None;
    for first in (0..total.max(1)).step_by(WIDTH) {
        let number = evaluate(first);
        value.get_or_insert(number.re);
        if let Some(eps) = number.eps.0 {
            (first..total.min(first + WIDTH)).for_each(|index| store(index, eps[index - first]));
        }
    }
    value.unwrap_or(f64::NAN)
}

/// An expression along the span, for extremes, integrals and the like.
///
/// # Example
/// ```
/// use spanwise::problem::{Expression, Problem};
/// use spanwise::model::Side;
///
/// let mut wall = Problem::new(0.0, 0.3);
/// let t = wall.unknown("T", 2);
/// wall.equation("conduction", move |at| at.d(t, 2));
/// wall.condition("left", &[(0.0, Side::Right)], move |v| v[0].d(t, 0) - 350.0);
/// wall.condition("right", &[(0.3, Side::Left)], move |v| v[0].d(t, 0) - 290.0);
/// let solution = wall.solve(&Default::default())?;
/// let mean = Expression::new(&[2], move |at| at.d(t, 0) / 0.3);
/// let mean = solution.integral(&mean, 0.0, 0.3)?;
/// assert!((mean.value - 320.0).abs() <= mean.error);
/// # Ok::<(), spanwise::error::Error>(())
/// ```
pub struct Expression {
    tops: Vec<usize>,
    layout: Layout,
    beyond: Layout,
    f: Box<dyn Fn(&Station<'_>) -> Number + Send + Sync>,
}

impl Expression {
    /// An expression of a problem whose unknowns have the given orders.
    pub fn new(orders: &[usize], f: impl Fn(&Station<'_>) -> Number + Send + Sync + 'static) -> Self {
        let more: Vec<usize> = orders.iter().map(|m| m + 1).collect();
        Self { tops: orders.to_vec(), layout: Layout::new(orders, 0), beyond: Layout::new(&more, 0), f: Box::new(f) }
    }
}

impl Profile for Expression {
    fn tops(&self) -> &[usize] {
        &self.tops
    }

    fn value(&self, x: f64, piece: usize, jets: &[f64], constants: &[f64]) -> f64 {
        (self.f)(&Station::new(&self.layout, x, piece, jets, constants, Seeds::None)).re
    }

    fn slope(&self, x: f64, piece: usize, jets: &[f64], constants: &[f64]) -> f64 {
        let number = (self.f)(&Station::new(&self.beyond, x, piece, jets, constants, Seeds::Along));
        number.eps.0.map_or(0.0, |eps| eps[0])
    }
}
