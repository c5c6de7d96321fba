use super::*;
use crate::formula::number::Number;
use num_dual::{Dual64, DualNum};
use proptest::prelude::*;

/// A formula as written, evaluated the plain way beside the graph.
#[derive(Debug, Clone)]
enum Tree {
    Number(f64),
    Leaf(usize),
    Negate(Box<Tree>),
    Op(char, Box<Tree>, Box<Tree>),
    Power(Box<Tree>, f64),
    Unary(Unary, Box<Tree>),
    Binary(Binary, Box<Tree>, Box<Tree>),
    If(bool, Box<[Tree; 4]>),
}

/// x, u, u', a constant and a slot.
const LEAVES: usize = 5;

fn leaf(g: &mut Graph, i: usize) -> NodeId {
    match i {
        0 => g.coordinate(),
        1 => g.jet(0, 0),
        2 => g.jet(0, 1),
        3 => g.constant(0),
        _ => g.slot(0),
    }
}

const VARIABLES: [Variable; LEAVES] = [
    Variable::Coordinate,
    Variable::Jet {
        unknown: 0,
        order: 0,
    },
    Variable::Jet {
        unknown: 0,
        order: 1,
    },
    Variable::Constant(0),
    Variable::Slot(0),
];

fn build(t: &Tree, g: &mut Graph) -> NodeId {
    match t {
        Tree::Number(v) => g.number(*v),
        Tree::Leaf(i) => leaf(g, *i),
        Tree::Negate(a) => {
            let a = build(a, g);
            g.negate(a)
        }
        Tree::Op(o, a, b) => {
            let (a, b) = (build(a, g), build(b, g));
            match o {
                '+' => g.add(a, b),
                '-' => g.subtract(a, b),
                '*' => g.multiply(a, b),
                _ => g.divide(a, b),
            }
        }
        Tree::Power(a, k) => {
            let (a, k) = (build(a, g), g.number(*k));
            g.power(a, k)
        }
        Tree::Unary(f, a) => {
            let a = build(a, g);
            g.unary(*f, a)
        }
        Tree::Binary(f, a, b) => {
            let (a, b) = (build(a, g), build(b, g));
            g.binary(*f, a, b)
        }
        Tree::If(strict, parts) => {
            let [l, r, a, b] = parts.each_ref().map(|p| build(p, g));
            let gap = g.subtract(l, r);
            g.choose(gap, *strict, a, b)
        }
    }
}

fn plain<T: Number>(t: &Tree, leaves: &[T; LEAVES]) -> T {
    match t {
        Tree::Number(v) => {
            let r = Rounded::from_decimal(*v);
            T::number(r.value, r.error)
        }
        Tree::Leaf(i) => leaves[*i],
        Tree::Negate(a) => plain(a, leaves).negate(),
        Tree::Op(o, a, b) => {
            let (a, b) = (plain(a, leaves), plain(b, leaves));
            match o {
                '+' => a.add(b),
                '-' => a.add(b.negate()),
                '*' => a.multiply(b),
                _ => a.divide(b),
            }
        }
        Tree::Power(a, k) => plain(a, leaves).power(T::number(*k, 0.0)),
        Tree::Unary(f, a) => plain(a, leaves).unary(*f),
        Tree::Binary(f, a, b) => plain(a, leaves).binary(*f, plain(b, leaves)),
        Tree::If(strict, parts) => {
            let [l, r, a, b] = parts.each_ref().map(|p| plain(p, leaves));
            l.add(r.negate()).choose(*strict, a, b)
        }
    }
}

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
                _ => a / b,
            }
        }
        Tree::Power(a, k) => dual(a, leaves).powf(*k),
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
                Unary::Tanh => a.tanh(),
                Unary::Asinh => a.asinh(),
                Unary::Acosh => a.acosh(),
                Unary::Atanh => a.atanh(),
                Unary::Abs => chain(a.re.abs(), a.re.signum()),
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
            if crate::formula::number::holds(l.re - r.re, *strict) {
                a
            } else {
                b
            }
        }
    }
}

const UNARY: [Unary; 20] = [
    Unary::Sqrt,
    Unary::Exp,
    Unary::Ln,
    Unary::Log10,
    Unary::Sin,
    Unary::Cos,
    Unary::Tan,
    Unary::Asin,
    Unary::Acos,
    Unary::Atan,
    Unary::Sinh,
    Unary::Cosh,
    Unary::Tanh,
    Unary::Asinh,
    Unary::Acosh,
    Unary::Atanh,
    Unary::Abs,
    Unary::Sign,
    Unary::Erf,
    Unary::Erfc,
];

fn trees() -> impl Strategy<Value = Tree> {
    let leaf = prop_oneof![
        (-30i32..30).prop_map(|v| Tree::Number(f64::from(v) / 10.0)),
        (0..LEAVES).prop_map(Tree::Leaf),
        (0..LEAVES).prop_map(Tree::Leaf),
    ];
    leaf.prop_recursive(5, 40, 4, |inner| {
        let one = || inner.clone().prop_map(Box::new);
        let two = || (one(), one());
        prop_oneof![
            one().prop_map(Tree::Negate),
            ("[-+*/]", two())
                .prop_map(|(o, (a, b))| { Tree::Op(o.chars().next().expect("one sign"), a, b) }),
            ("[-+*/]", two())
                .prop_map(|(o, (a, b))| { Tree::Op(o.chars().next().expect("one sign"), a, b) }),
            (
                one(),
                prop::sample::select(vec![-2.0, -1.0, 0.5, 1.5, 2.0, 3.0, 12.0])
            )
                .prop_map(|(a, k)| Tree::Power(a, k)),
            (prop::sample::select(UNARY.to_vec()), one()).prop_map(|(f, a)| Tree::Unary(f, a)),
            (
                prop::sample::select(vec![
                    Binary::Atan2,
                    Binary::Min,
                    Binary::Max,
                    Binary::SignedPower
                ]),
                two()
            )
                .prop_map(|(f, (a, b))| Tree::Binary(f, a, b)),
            (
                any::<bool>(),
                [inner.clone(), inner.clone(), inner.clone(), inner.clone()]
            )
                .prop_map(|(strict, parts)| Tree::If(strict, Box::new(parts))),
        ]
    })
}

fn point() -> impl Strategy<Value = [f64; LEAVES]> {
    [
        0.1f64..2.385,
        -2.0f64..2.0,
        -3.0f64..3.0,
        0.3f64..1.7,
        -1.0f64..1.0,
    ]
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

proptest! {
    #![proptest_config(ProptestConfig::with_cases(3000))]

    /// The form into which sums and products are brought has the same value, within the bounds that both ways of
    /// evaluation give for their own rounding: which tests these bounds, too.
    #[test]
    fn canonical_form_keeps_the_value(t in trees(), p in point()) {
        let mut g = Graph::default();
        let id = build(&t, &mut g);
        let p = p.map(Rounded::exact);
        let (graph, plain) = (evaluate(&g, id, &p), plain(&t, &p));
        if plain.value.is_finite() && plain.error.is_finite() && graph.error.is_finite() {
            let bound = 1.01 * (graph.error + plain.error);
            prop_assert!((graph.value - plain.value).abs() <= bound, "{graph:?} {plain:?}");
        }
        // The same text twice gives the same node.
        prop_assert_eq!(build(&t, &mut g), id);
    }

    #[test]
    fn partial_derivatives_agree_with_dual_numbers(t in trees(), p in point()) {
        let mut g = Graph::default();
        let id = build(&t, &mut g);
        let inputs = p.map(Rounded::exact);
        for (i, variable) in VARIABLES.into_iter().enumerate() {
            let slope = g.partial(id, variable);
            let mut duals = p.map(Dual64::from);
            duals[i] = duals[i].derivative();
            let (ours, theirs) = (evaluate(&g, slope, &inputs), dual(&t, &duals));
            if !(theirs.eps.is_finite() && ours.error.is_finite()) {
                continue;
            }
            // The dual numbers round too; about as much as we do.
            let bound = 1e3 * ours.error + 1e-11 * theirs.eps.abs() + 1e-13;
            prop_assert!(
                (ours.value - theirs.eps).abs() <= bound,
                "{variable:?}: {ours:?} {theirs:?}"
            );
        }
    }
}
