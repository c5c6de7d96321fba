use super::*;
use crate::formula::number::Number;
use crate::formula::random::{LEAVES, Tree, VARIABLES, build, cases, plain, point, trees};
use num_dual::{Dual64, DualNum};
use proptest::prelude::*;
use proptest::test_runner::TestRunner;
use std::cell::Cell;

/// d erf/da = 2/sqrt(pi) exp(-a^2), Abramowitz & Stegun 7.1.1.
fn bell(a: f64) -> f64 {
    2.0 / std::f64::consts::PI.sqrt() * (-a * a).exp()
}

/// Value and derivative by dual numbers: the second opinion.
fn dual(t: &Tree, leaves: &[Dual64; LEAVES]) -> Dual64 {
    match t {
        Tree::Number(v) => (*v).into(),
        Tree::Leaf(i) => leaves[*i],
        Tree::Negate(a) => -dual(a, leaves),
        Tree::Op(o, a, b) => {
            let (a, b) = (dual(a, leaves), dual(b, leaves));
            match o {
                '+' => a + b,
                '-' => a - b,
                '*' => a * b,
                // The crate multiplies by 1/b, and u/u need not be 1 then.
                _ => Dual64::new(a.re / b.re, (a.eps - a.re / b.re * b.eps) / b.re),
            }
        }
        Tree::Power(a, k) => match dual(a, leaves) {
            a if a.re == 0.0 => Dual64::new(a.re.powf(*k), f64::NAN),
            a => a.powf(*k),
        },
        Tree::Unary(f, a) => {
            let a = dual(a, leaves);
            let chain = |value: f64, slope: f64| Dual64::new(value, a.eps * slope);
            match f {
                Unary::Sqrt => a.sqrt(),
                Unary::Exp => a.exp(),
                Unary::Ln => a.ln(),
                Unary::Log10 => a.log10(),
                Unary::Sin => a.sin(),
                Unary::Cos => a.cos(),
                Unary::Tan => a.tan(),
                Unary::Asin => a.asin(),
                Unary::Acos => a.acos(),
                Unary::Atan => a.atan(),
                Unary::Sinh => a.sinh(),
                Unary::Cosh => a.cosh(),
                // That of the crate cancels for large a.
                Unary::Tanh => chain(a.re.tanh(), a.re.cosh().powi(-2)),
                Unary::Asinh => a.asinh(),
                // That of the crate overflows for large a.
                Unary::Acosh => chain(a.re.acosh(), 1.0 / ((a.re - 1.0).sqrt() * (a.re + 1.0).sqrt())),
                Unary::Atanh => a.atanh(),
                Unary::Abs => chain(a.re.abs(), a.re.signum()),
                Unary::Sign if a.re == 0.0 => 0.0.into(),
                Unary::Sign => chain(a.re.signum(), 0.0),
                Unary::Erf => chain(libm::erf(a.re), bell(a.re)),
                Unary::Erfc => chain(libm::erfc(a.re), -bell(a.re)),
            }
        }
        Tree::Binary(f, a, b) => {
            let (a, b) = (dual(a, leaves), dual(b, leaves));
            match f {
                Binary::Atan2 => a.atan2(b),
                Binary::Min if a.re <= b.re => a,
                Binary::Max if a.re >= b.re => a,
                Binary::Min | Binary::Max => b,
                // sign(a) exp(b ln|a|)
                Binary::SignedPower if a.re < 0.0 => -((-a).ln() * b).exp(),
                Binary::SignedPower => (a.ln() * b).exp(),
            }
        }
        Tree::If(strict, parts) => {
            let [l, r, a, b] = parts.each_ref().map(|p| dual(p, leaves));
            if crate::formula::number::holds(l.re - r.re, *strict) { a } else { b }
        }
    }
}

fn evaluate<T: Number>(g: &Graph, id: NodeId, p: &[T; LEAVES]) -> T {
    g.evaluate(
        id,
        &Inputs {
            x: p[0],
            middle: p[0].value(),
            jets: &|_, order| p[1 + usize::from(order)],
            constants: &p[3..4],
            slots: &p[4..5],
        },
    )
}

/// Runs a check on random formulas; it says whether it could compare anything, and most must.
fn check(runs: u32, test: impl Fn(Tree, [f64; LEAVES]) -> Result<bool, TestCaseError>) {
    let compared = Cell::new(0u32);
    let total = Cell::new(0u32);
    TestRunner::new(cases(runs))
        .run(&(trees(), point()), |(t, p)| {
            total.set(total.get() + 1);
            compared.set(compared.get() + u32::from(test(t, p)?));
            Ok(())
        })
        .unwrap_or_else(|e| panic!("{e}"));
    assert!(3 * compared.get() > total.get(), "{compared:?} of {total:?}");
}

/// The form into which sums and products are brought has the same value, within the bounds that both ways of
/// evaluation give for their own rounding: which tests these bounds, too.
#[test]
fn canonical_form_keeps_the_value() {
    check(3000, |t, p| {
        let mut g = Graph::default();
        let id = build(&t, &mut g);
        let p = p.map(Rounded::exact);
        let (graph, plain) = (evaluate(&g, id, &p), plain(&t, &p));
        // The same text twice gives the same node.
        prop_assert_eq!(build(&t, &mut g), id);
        if !(plain.value.is_finite() && plain.error.is_finite() && graph.error.is_finite()) {
            return Ok(false);
        }
        let bound = 1.01 * (graph.error + plain.error);
        prop_assert!((graph.value - plain.value).abs() <= bound, "{graph:?} {plain:?}");
        Ok(true)
    });
}

/// Compares a derivative with that by dual numbers; false where there is none.
fn same_slope(value: f64, ours: Rounded, theirs: Dual64) -> Result<bool, TestCaseError> {
    // Not compared: the angle of a negative zero, and powers of what is not a number.
    let same_value = (theirs.re - value).abs() <= 1e-9 * (1.0 + value.abs());
    if !(same_value && theirs.eps.is_finite() && ours.error.is_finite()) {
        return Ok(false);
    }
    // The dual numbers round too, where u/u is 1 for us.
    let bound = 1e3 * ours.error + 1e-11 * theirs.eps.abs() + 1e-10 * value.abs() + 1e-13;
    prop_assert!((ours.value - theirs.eps).abs() <= bound, "{ours:?} {theirs:?}");
    Ok(true)
}

/// The value, where there is one and rounding decides no test: there either branch would be right.
fn decided(t: &Tree, p: &[f64; LEAVES]) -> Option<f64> {
    let value = plain(t, &p.map(Rounded::exact));
    (value.error <= 1e-9 * (1.0 + value.value.abs())).then_some(value.value)
}

#[test]
fn partial_derivatives_agree_with_dual_numbers() {
    check(3000, |t, p| {
        let Some(value) = decided(&t, &p) else {
            return Ok(false);
        };
        let mut g = Graph::default();
        let id = build(&t, &mut g);
        let mut compared = false;
        for (i, variable) in VARIABLES.into_iter().enumerate() {
            let slope = g.partial(id, variable);
            let mut duals = p.map(Dual64::from);
            duals[i] = duals[i].derivative();
            let ours = evaluate(&g, slope, &p.map(Rounded::exact));
            compared |= same_slope(value, ours, dual(&t, &duals))?;
        }
        Ok(compared)
    });
}

#[test]
fn total_derivatives_agree_with_dual_numbers() {
    check(3000, |t, p| {
        let Some(value) = decided(&t, &p) else {
            return Ok(false);
        };
        let mut g = Graph::default();
        let id = build(&t, &mut g);
        let slope = g.total(id);
        let second = 0.731;
        let mut duals = p.map(Dual64::from);
        for (dual, eps) in duals.iter_mut().zip([1.0, p[2], second, 0.0, 0.0]) {
            dual.eps = eps;
        }
        let p = p.map(Rounded::exact);
        let jets = [p[1], p[2], Rounded::exact(second)];
        let inputs = Inputs {
            x: p[0],
            middle: p[0].value,
            jets: &|_, order| jets[usize::from(order)],
            constants: &p[3..4],
            slots: &p[4..5],
        };
        same_slope(value, g.evaluate(slope, &inputs), dual(&t, &duals))
    });
}
