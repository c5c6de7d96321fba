//! Every numerical tolerance of the crate, named once, with the reason for its size.

/// Unit roundoff of double precision, 2^-53.
pub const ROUNDOFF: f64 = f64::EPSILON / 2.0;

/// Rounding error of a Clenshaw sum relative to the sum of the sizes of its terms.
pub const EVALUATION: f64 = 2.0 * ROUNDOFF;
