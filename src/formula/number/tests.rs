use super::*;
use crate::formula::random::{LEAVES, cases, plain, point, trees};
use proptest::prelude::*;
use proptest::test_runner::TestRunner;
use std::cell::Cell;

fn r(value: f64, error: f64) -> Rounded {
    Rounded { value, error }
}

/// Whatever the operands may be within their errors, the result lies within its error.
#[test]
fn bounds_hold_for_perturbed_operands() {
    let (compared, total, tight) = (Cell::new(0u32), Cell::new(0u32), Cell::new(0u32));
    let errors = prop::sample::select(vec![1e-14, 1e-12, 1e-9, 1e-7]);
    let shifts = [-0.9f64..0.9, -0.9f64..0.9, -0.9f64..0.9, -0.9f64..0.9, -0.9f64..0.9];
    TestRunner::new(cases(4000))
        .run(&(trees(), point(), errors, shifts), |(t, p, error, shifts)| {
            total.set(total.get() + 1);
            let bounded = plain(&t, &p.map(|v| r(v, error)));
            let moved: [Rounded; LEAVES] = std::array::from_fn(|i| Rounded::exact(p[i] + error * shifts[i]));
            let moved = plain(&t, &moved);
            if !(bounded.value.is_finite() && bounded.error.is_finite() && moved.error.is_finite()) {
                return Ok(());
            }
            // Of first order: the second is of the size of the errors.
            let bound = 1.01 * bounded.error + moved.error + 4.0 * f64::MIN_POSITIVE;
            let apart = (bounded.value - moved.value).abs();
            compared.set(compared.get() + 1);
            tight.set(tight.get() + u32::from(apart > 0.01 * bounded.error));
            prop_assert!(apart <= bound, "{bounded:?} {moved:?}");
            Ok(())
        })
        .unwrap_or_else(|e| panic!("{e}"));
    // Most formulas could be compared, and the bounds are no mere large numbers.
    assert!(2 * compared.get() > total.get(), "{compared:?} of {total:?}");
    assert!(3 * tight.get() > compared.get(), "{tight:?} of {compared:?}");
}

#[test]
fn exact_arithmetic_has_no_error() {
    let (a, b) = (Rounded::from_decimal(3.0), Rounded::from_decimal(0.5));
    assert_eq!((a.error, b.error), (0.0, 0.0));
    assert_eq!(
        [a.add(b), a.multiply(b), a.divide(b), a.power(b.add(b))].map(|v| v.error),
        [0.0, 0.0, 0.0, HALF_ULP * 3.0]
    );
    // 0.1 is off by 5.55e-18 as a double; the bound is half a unit in the last place.
    let tenth = Rounded::from_decimal(0.1);
    assert!(tenth.error >= 5.55e-18 && tenth.error < 1.2e-17);
    // 1 - 0.9999999999 = 1e-10: the digits lost are seen.
    let difference = Rounded::from_decimal(1.0).add(Rounded::from_decimal(0.9999999999).negate());
    assert!((difference.value - 1e-10).abs() <= difference.error && difference.error < 1.2e-16);
}

/// Ends of ranges, kinks and branch cuts, where derivatives are of no use.
#[test]
fn bounds_hold_where_derivatives_fail() {
    let e = 1e-8;
    for (f, at, moved) in [
        (Unary::Sqrt, 0.0, e),
        (Unary::Sqrt, e / 2.0, 0.0),
        (Unary::Asin, 1.0, 1.0 - e),
        (Unary::Acos, -1.0, -1.0 + e),
        (Unary::Acosh, 1.0, 1.0 + e),
        (Unary::Sign, e / 2.0, -e / 2.0),
        (Unary::Abs, 0.0, e),
        (Unary::Cos, 0.0, e),
        (Unary::Cosh, 0.0, e),
    ] {
        let value = r(at, e).unary(f);
        let apart = (unary(f, moved) - value.value).abs();
        assert!(apart <= value.error && value.error <= 20.0 * apart + 4.0 * f64::EPSILON, "{f:?} {value:?} {apart}");
    }
    assert_eq!(r(e / 2.0, e).unary(Unary::Ln).error, f64::INFINITY);
    assert_eq!(r(1.0, 0.0).divide(r(e / 2.0, e)).error, f64::INFINITY);
    assert!(r(0.0, e).binary(Binary::Atan2, r(-1.0, 0.0)).error >= std::f64::consts::TAU);
    let power = r(0.0, e).power(Rounded::exact(1.5));
    assert!(power.error >= e.powf(1.5) && power.error < 1.1 * e.powf(1.5));
    // A test that rounding decides: both branches lie within.
    let chosen = r(0.0, e).choose(true, r(1.0, 0.0), r(3.0, 0.5));
    assert_eq!(chosen, r(3.0, 2.0));
    assert_eq!(r(-1.0, e).choose(true, r(1.0, 0.0), r(3.0, 0.5)), r(1.0, 0.0));
    assert_eq!(r(f64::NAN, 0.0).choose(true, r(1.0, 0.0), r(3.0, 0.5)).error, f64::INFINITY);
}

#[test]
fn plain_functions() {
    for n in -8..=8 {
        let exact = 1.5f64.powi(n);
        assert!((powi(1.5, n) - exact).abs() <= 4.0 * f64::EPSILON * exact);
    }
    assert_eq!((-2.0).power(3.0), -8.0);
    assert_eq!(0.0.power(0.0), 1.0);
    assert_eq!([Unary::Sign].map(|f| [-3.0, 0.0, -0.0, 2.0].map(|a| unary(f, a))), [[-1.0, 0.0, 0.0, 1.0]]);
    assert!(unary(Unary::Sign, f64::NAN).is_nan());
    assert!(binary(Binary::Min, f64::NAN, 1.0).is_nan() && binary(Binary::Max, 1.0, f64::NAN).is_nan());
    assert_eq!(binary(Binary::SignedPower, -4.0, 0.5), -2.0);
    assert_eq!(binary(Binary::Atan2, -0.0, -1.0), std::f64::consts::PI);
    // Abramowitz & Stegun, table 7.1: erf(0.5) = 0.5204998778, erf(1) = 0.8427007929.
    assert!((unary(Unary::Erf, 0.5) - 0.520_499_877_8).abs() < 5e-11);
    assert!((unary(Unary::Erfc, 1.0) - (1.0 - 0.842_700_792_9)).abs() < 5e-11);
    // asinh(1e-10) = 1e-10 - (1e-10)^3/6: the series, exact here to the last digit.
    assert_eq!(unary(Unary::Asinh, 1e-10), 1e-10);
    assert_eq!(unary(Unary::Atanh, 1e-10), 1e-10);
}
