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

/// E I y'' and its like, in any order of writing.
#[test]
fn products_and_sums_have_one_form() {
    let mut g = Graph::default();
    let (x, u, v, c) = (g.coordinate(), g.jet(0, 0), g.jet(0, 2), g.constant(0));
    let stiffness = g.number(2.385e6);

    // (E u) v x = x (v (u E)) = E u / (1/x) v
    let a = g.multiply(stiffness, u);
    let a = g.multiply(a, v);
    let a = g.multiply(a, x);
    let b = g.multiply(u, stiffness);
    let b = g.multiply(v, b);
    let b = g.multiply(x, b);
    assert_eq!(a, b);
    let one = g.number(1.0);
    let inverse = g.divide(one, x);
    let d = g.multiply(stiffness, u);
    let d = g.divide(d, inverse);
    let d = g.multiply(d, v);
    assert_eq!(a, d);
    assert_eq!(g.factors(a), (2.385e6, vec![(x, 1), (u, 1), (v, 1)]));

    // -(x u - v) + c = v + c - u x, and minus itself it is 0
    let product = g.multiply(x, u);
    let left = g.subtract(product, v);
    let left = g.negate(left);
    let left = g.add(left, c);
    let right = g.add(v, c);
    let product = g.multiply(u, x);
    let right = g.subtract(right, product);
    assert_eq!(left, right);
    assert_eq!(g.subtract(left, right), ZERO);
    let terms = g.terms(left);
    assert_eq!(terms.len(), 3);
    assert!(terms.contains(&(-1.0, product)) && terms.contains(&(1.0, v)) && terms.contains(&(1.0, c)));

    // Powers: x x^2/x^5 = 1/x^2, (x^2)^3 = x^6, (-x)^3 = -(x^3), x^0 = 1
    let two = g.number(2.0);
    let square = g.power(x, two);
    let cube = g.multiply(square, x);
    let five = g.number(5.0);
    let fifth = g.power(x, five);
    let quotient = g.divide(cube, fifth);
    let minus_two = g.number(-2.0);
    assert_eq!(quotient, g.power(x, minus_two));
    assert_eq!(g.factors(quotient), (1.0, vec![(x, -2)]));
    let three = g.number(3.0);
    let sixth = g.power(square, three);
    assert_eq!(g.factors(sixth), (1.0, vec![(x, 6)]));
    let minus = g.negate(x);
    let odd = g.power(minus, three);
    assert_eq!(odd, g.negate(cube));
    assert_eq!(g.power(minus, two), square);
    let zero = g.number(0.0);
    assert_eq!((g.power(x, zero), g.power(x, one), g.multiply(x, zero)), (ONE, x, ZERO));
    // A half power and its like are not merged: sqrt(x) sqrt(x) is not x for negative x.
    let half = g.number(0.5);
    let root = g.power(x, half);
    assert_eq!(root, g.unary(Unary::Sqrt, x));
    assert_ne!(g.multiply(root, root), x);
}

#[test]
fn divisions_stay_exact() {
    let mut g = Graph::default();
    let (x, length) = (g.coordinate(), g.number(0.7));
    let ratio = g.divide(x, length);
    assert_eq!(g.evaluate(ratio, &Inputs::at(0.7)), 1.0);
    let k = g.number(3.0);
    let (over, under) = (g.multiply(k, x), g.multiply(k, length));
    let same = g.divide(over, under);
    assert_eq!(g.evaluate(same, &Inputs::at(0.7)), 1.0);
    // 6x/3 = 2x
    let (six, two) = (g.number(6.0), g.number(2.0));
    let sixfold = g.multiply(six, x);
    assert_eq!(g.divide(sixfold, k), g.multiply(two, x));
    // Nothing is divided by zero behind one's back: the node says so.
    let zero = g.number(0.0);
    let wrong = g.divide(x, zero);
    assert!(g.evaluate(wrong, &Inputs::at(1.0)).is_infinite());
    let wrong = g.divide(zero, zero);
    assert!(g.as_number(wrong).is_some_and(f64::is_nan));
}

/// A condition may write the factors of a flux in another order or multiply it: numbers then differ in the last place.
#[test]
fn a_multiple_of_a_flux_is_recognised() {
    let mut g = Graph::default();
    let (e, i, rho) = (g.number(2.1e11), g.number(4.18e-5), g.number(7850.3));
    let (u, v) = (g.jet(0, 0), g.jet(0, 2));
    let flux = |g: &mut Graph, order: [NodeId; 3]| {
        let ab = g.multiply(order[0], order[1]);
        let abc = g.multiply(ab, order[2]);
        let first = g.multiply(abc, v);
        let second = g.multiply(rho, u);
        g.subtract(first, second)
    };
    let a = flux(&mut g, [e, i, rho]);
    let b = flux(&mut g, [i, rho, e]);
    assert!((g.ratio(a, b).expect("the same flux") - 1.0).abs() < 1e-15);
    let factor = g.number(-2.385);
    let c = g.multiply(b, factor);
    assert!((g.ratio(c, a).expect("a multiple") + 2.385).abs() < 1e-14);
    let three = g.number(3.0);
    let (p, q) = (g.multiply(three, v), g.divide(v, three));
    assert!((g.ratio(p, q).expect("a multiple") - 9.0).abs() < 1e-14);
    assert_eq!(g.terms(c).len(), 2);
    assert_eq!((g.ratio(u, v), g.ratio(p, u), g.ratio(a, p)), (None, None, None));
    assert_eq!((g.ratio(a, ZERO), g.ratio(ZERO, a)), (None, None));
}

#[test]
fn derivatives_are_left_to_be_carried_or_expanded() {
    let mut g = Graph::default();
    let (x, u) = (g.coordinate(), g.jet(0, 0));
    // Of data and of bare unknowns it is taken at once.
    let square = g.multiply(x, x);
    let two = g.number(2.0);
    assert_eq!(g.derivative(square), g.multiply(two, x));
    let du = g.derivative(u);
    assert_eq!(g.node(du), Node::Jet { unknown: 0, order: 1 });
    let c = g.constant(0);
    assert_eq!(g.derivative(c), ZERO);
    // (x u')' stays, and so does its derivative.
    let flux = g.multiply(x, du);
    let once = g.derivative(flux);
    assert_eq!(g.node(once), Node::Derivative(flux));
    let twice = g.derivative(once);
    assert_eq!(g.node(twice), Node::Derivative(once));
    assert_eq!(g.total(once), twice);
    assert!(g.has_derivative(twice) && !g.has_derivative(flux));
    // Expanded: 2 u'' + x u'''
    let (d2, d3) = (g.jet(0, 2), g.jet(0, 3));
    let expected = g.multiply(x, d3);
    let double = g.multiply(two, d2);
    let expected = g.add(expected, double);
    assert_eq!(g.expand(twice), expected);
    let sum = g.add(twice, x);
    assert_eq!(g.expand(sum), g.add(expected, x));
    assert_eq!(g.partial(twice, Variable::Jet { unknown: 0, order: 3 }), x);
    assert_eq!(g.jets_of(expected), BTreeSet::from([(0, 2), (0, 3)]));
    // What is not expanded has no value, and what cannot be differentiated further neither.
    assert!(g.evaluate(once, &Inputs::at(1.0)).is_nan());
    let last = g.jet(0, 255);
    assert_eq!(g.total(last), NOT_A_NUMBER);
    // A carried flux is put in its place by substitution; outermost matches win.
    let carried = g.jet(1, 0);
    let rate = g.jet(1, 1);
    let map = HashMap::from([(once, rate), (flux, carried)]);
    let both = g.add(once, flux);
    assert_eq!(g.substitute(both, &map), g.add(rate, carried));
}

#[test]
fn dependence_kinks_and_linearity() {
    let mut g = Graph::default();
    let (x, u, c, s) = (g.coordinate(), g.jet(0, 1), g.constant(2), g.slot(5));
    let xu = g.multiply(x, u);
    let cs = g.multiply(c, s);
    let all = g.add(xu, cs);
    let d = g.depends_on(all);
    assert!(d.coordinate && d.jets && d.constants && d.slots && d.unknowns() && d.varies());
    assert_eq!((g.constants_of(all), g.slots_of(all)), (BTreeSet::from([2]), BTreeSet::from([5])));
    assert!(g.depends_on(x).only_coordinate() && !g.depends_on(xu).only_coordinate());

    let uu = g.multiply(u, u);
    let sine = g.unary(Unary::Sin, x);
    let linear = g.multiply(sine, u);
    let linear = g.add(linear, c);
    let (sign, size) = (g.unary(Unary::Sign, u), g.unary(Unary::Abs, u));
    let two = g.number(2.0);
    let step = g.choose(u, true, ONE, two);
    let table = [(x, true), (linear, true), (all, false), (uu, false), (sign, false), (size, false), (step, false)];
    for (id, expected) in table {
        assert_eq!(g.is_linear(id), expected, "{:?}", g.node(id));
    }
    // The derivative of sign(u) is 0 all over: only the kink tells.
    assert_eq!(g.partial(sign, Variable::Jet { unknown: 0, order: 1 }), ZERO);
    assert!(g.has_kink_in_unknowns(sign) && g.has_kink_in_unknowns(step) && !g.has_kink_in_unknowns(linear));
    // (u' x)' is linear although it is not expanded yet; (u'^2)' is not.
    let flux = g.multiply(x, u);
    let flux = g.derivative(flux);
    assert!(g.is_linear(flux));
    let flux = g.derivative(uu);
    assert!(!g.is_linear(flux));
}

/// Kinks of data are tests of their own, decided piece by piece.
#[test]
fn kinks_of_data_are_piece_tests() {
    let mut g = Graph::default();
    let (x, h) = (g.coordinate(), g.number(2.6));
    let gap = g.subtract(x, h);
    let (size, sign) = (g.unary(Unary::Abs, gap), g.unary(Unary::Sign, gap));
    let least = g.binary(Binary::Min, x, h);
    let most = g.binary(Binary::Max, x, h);
    let power = g.number(1.5);
    let signed = g.binary(Binary::SignedPower, gap, power);
    for (id, left, right) in [
        (size, 1.1, 0.4),
        (sign, -1.0, 1.0),
        (least, 1.5, 2.6),
        (most, 2.6, 3.0),
        (signed, -(1.1f64.powf(1.5)), 0.4f64.powf(1.5)),
    ] {
        assert!(!g.piece_tests(&[id]).is_empty() && !g.has_kink_in_unknowns(id));
        for (at, expected) in [(1.5, left), (3.0, right)] {
            let value: f64 = g.evaluate(id, &Inputs::at(at));
            assert!((value - expected).abs() < 1e-15, "{value} {expected}");
            let here = g.in_piece(id, at);
            assert!(g.piece_tests(&[here]).is_empty());
            assert_eq!(g.evaluate(here, &Inputs::at(at)), value);
        }
        // At the break itself the piece decides, for derivatives too.
        let slope = g.total(id);
        for middle in [1.5, 3.0] {
            let decided = g.in_piece(slope, middle);
            let at_break = Inputs { middle, ..Inputs::at(2.6) };
            assert_eq!(g.evaluate(slope, &at_break), g.evaluate(decided, &Inputs::at(2.6)));
        }
    }
    // A datum by pieces is a number in each.
    let (a, b) = (g.number(4.18e-5), g.number(2.14e-5));
    let step = g.choose(gap, true, a, b);
    let moment = g.jet(0, 2);
    let moment = g.multiply(step, moment);
    let left = g.in_piece(moment, 1.0);
    assert_eq!(g.factors(left).0, 4.18e-5);
    // Tests on what only the solution knows are none.
    let u = g.jet(0, 0);
    let pointwise = g.choose(u, true, a, b);
    assert!(g.piece_tests(&[pointwise]).is_empty());
}

/// Long and deep graphs neither overflow the stack nor take long.
#[test]
fn deep_graphs_are_walked_without_recursion() {
    let mut g = Graph::default();
    let (x, u) = (g.coordinate(), g.jet(0, 0));
    let mut deep = g.multiply(x, u);
    for _ in 0..20_000 {
        deep = g.unary(Unary::Sin, deep);
    }
    let slope = g.partial(deep, Variable::Coordinate);
    assert!(g.len() < 150_000, "{}", g.len());
    let inputs = Inputs { jets: &|_, _| 0.5, ..Inputs::at(1.3) };
    assert!(g.evaluate::<f64>(slope, &inputs).is_finite());
    assert!(g.total(deep) != NOT_A_NUMBER && g.substitute(deep, &HashMap::from([(x, u)])) != deep);

    // A sum of more terms than are sorted.
    let mut sum = ZERO;
    let mut expected = 0.0;
    for k in 0..3000 {
        let shift = f64::from(k) / 7.0;
        let value = (1.3 + shift).cos();
        let shift = g.number(shift);
        let shifted = g.add(x, shift);
        let term = g.unary(Unary::Cos, shifted);
        sum = if k % 3 == 0 { g.subtract(sum, term) } else { g.add(sum, term) };
        expected += if k % 3 == 0 { -value } else { value };
    }
    let value: f64 = g.evaluate(sum, &Inputs::at(1.3));
    assert!((value - expected).abs() < 1e-11, "{value} {expected}");
}

#[test]
fn a_graph_does_not_grow_without_end() {
    let mut g = Graph { limit: 20_000, ..Graph::default() };
    let (x, u) = (g.coordinate(), g.jet(0, 0));
    // Each derivative of a tower of exponentials is larger than the last.
    let mut id = g.multiply(x, u);
    for _ in 0..12 {
        id = g.unary(Unary::Exp, id);
    }
    for _ in 0..60 {
        id = g.total(id);
        if g.is_full() {
            break;
        }
    }
    assert!(g.is_full() && g.len() == 20_000);
    // Full, it still answers.
    let wrong = g.unary(Unary::Sin, id);
    assert!(g.evaluate::<f64>(wrong, &Inputs::at(1.0)).is_nan());
}
