//! Error bars from companion solutions.
//!
//! A number is made from several solutions: the answer (n + 4 nodes an element), companions with fewer nodes
//! (n and n + 2, and n with other scalings of the rows), and some whose coefficients were changed by a
//! relative [`tolerance::NUDGE`]. The largest difference to the companions is the truncation part of the bar
//! and samples the rounding of the solve; the response to the changed coefficients, scaled down to the unit roundoff,
//! is the part that the rounding of data and coefficients can make.

use crate::error::{Error, Result};
use crate::field::Field;
use crate::quantity::Estimate;
use crate::tolerance;

/// The answer and its companions.
#[derive(Debug, Clone)]
pub(crate) struct Companions {
    /// Fewer nodes; the first is the one that the changed ones are compared with.
    pub coarser: Vec<Field>,
    /// Changed coefficients.
    pub nudged: Vec<Field>,
}

/// The bar of `number` on `answer`.
pub(crate) fn estimate(
    answer: &Field,
    companions: &Companions,
    number: &dyn Fn(&Field) -> Result<Estimate>,
) -> Result<Estimate> {
    let own = number(answer)?;
    let mut base = own;
    let mut spread = 0.0f64;
    for (k, field) in companions.coarser.iter().enumerate() {
        let other = number(field)?;
        spread = spread.max((own.value - other.value).abs());
        if k == 0 {
            base = other;
        }
    }
    let mut error = own.error + tolerance::TRUNCATION * spread;
    let mut response = 0.0;
    for nudged in &companions.nudged {
        response += (number(nudged)?.value - base.value).abs() / tolerance::NUDGE;
    }
    error += tolerance::DATA * tolerance::ROUNDOFF * response + tolerance::LAST_PLACE * own.value.abs();
    if own.value.is_finite() && error.is_finite() {
        Ok(Estimate { value: own.value, error })
    } else {
        Err(Error::NotFinite { what: "the number asked".into(), x: f64::NAN })
    }
}
