//! Every numerical tolerance of the crate, named once, with the reason for its size.

/// Unit roundoff of double precision, 2^-53.
pub const ROUNDOFF: f64 = f64::EPSILON / 2.0;

/// Rounding error of a Clenshaw sum relative to the sum of the sizes of its terms.
pub const EVALUATION: f64 = 2.0 * ROUNDOFF;

/// A pivot below this share of the largest one counts as zero.
pub const PIVOT: f64 = 4.0 * ROUNDOFF;

/// Below this ratio of the pivots of the closing system its singular values are looked at.
pub const SUSPICIOUS: f64 = 1e-8;

/// Closing systems up to this size always have their singular values computed: the condition number
/// costs nothing there.
pub const SMALL_CLOSURE: usize = 40;

/// A singular value of the scaled closing system below this share of the largest one counts as zero: well
/// above the rounding of condensation and chain (1e-14 to 1e-13 was seen on exactly singular problems), well below the
/// most ill-conditioned system whose answer would still carry a few digits.
pub const SINGULAR: f64 = 5e-13;

/// Coefficients below this many times the rounding error expected in them count as noise.
pub const NOISE: f64 = 40.0;

/// Relative change of the coefficients by which the sensitivity to the data is felt: ten thousand roundings, so that the
/// response stands out of the noise, and small enough for it to be linear up to condition numbers of some 1e11.
pub const NUDGE: f64 = 1e-12;

/// Safety factor on the largest difference between the answer and its companions on other meshes: each is one sample
/// of truncation and rounding, of the same size as the error of the answer or larger.
pub const TRUNCATION: f64 = 5.0;

/// How many roundings enter a coefficient: data are products of a few rounded numbers, and each solve adds
/// some.
pub const DATA: f64 = 4.0;

/// Rounding of the number itself and of its conversion to a unit, relative.
pub const LAST_PLACE: f64 = 4.0 * ROUNDOFF;

/// Share of the accuracy asked that the last coefficients may have: error bars compare two meshes, so both
/// must be well below it.
pub const TAIL_SHARE: f64 = 1e-4;

/// Finest tail that is asked for, whatever the accuracy.
pub const FINEST_TAIL: f64 = 2e-15;

/// Lower terms of the equations that add less than this to the highest derivatives over an element are weak.
pub const WEAK: f64 = 1e-2;

/// An element below this share of the span, over which a derivative changes its unknown by less than [`SHORT`], is short.
pub const SHORT_SHARE: f64 = 1e-3;
/// See [`SHORT_SHARE`].
pub const SHORT: f64 = 1e-4;

/// A last coefficient that adds less than a certain share of the possible size of the terms to an equation is dropped
/// as rounding if it stands out: the share is this times the ratio of the element to the shortest one ...
pub const INVISIBLE_GROWTH: f64 = 100.0 * ROUNDOFF;
/// ... but at least this ...
pub const INVISIBLE_LEAST: f64 = 1e-11;
/// ... and at most this.
pub const INVISIBLE_MOST: f64 = 1e-7;
