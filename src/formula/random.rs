//! Random formulas for tests.

use super::graph::{Binary, Graph, NodeId, Unary, Variable};
use super::number::{Number, Rounded};
use proptest::prelude::*;
use proptest::test_runner::RngSeed;

/// Many cases, the same in every run; `PROPTEST_CASES` in the environment asks for another number of them, then
/// with new random numbers.
pub(crate) fn cases(cases: u32) -> ProptestConfig {
    let base = ProptestConfig::default();
    if std::env::var_os("PROPTEST_CASES").is_some() {
        return ProptestConfig { failure_persistence: None, ..base };
    }
    ProptestConfig { cases, rng_seed: RngSeed::Fixed(2_385), failure_persistence: None, ..base }
}

/// A formula as written, evaluated the plain way beside the graph.
#[derive(Debug, Clone)]
pub(super) enum Tree {
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
pub(super) const LEAVES: usize = 5;

pub(super) fn leaf(g: &mut Graph, i: usize) -> NodeId {
    match i {
        0 => g.coordinate(),
        1 => g.jet(0, 0),
        2 => g.jet(0, 1),
        3 => g.constant(0),
        _ => g.slot(0),
    }
}

pub(super) const VARIABLES: [Variable; LEAVES] = [
    Variable::Coordinate,
    Variable::Jet { unknown: 0, order: 0 },
    Variable::Jet { unknown: 0, order: 1 },
    Variable::Constant(0),
    Variable::Slot(0),
];

pub(super) fn build(t: &Tree, g: &mut Graph) -> NodeId {
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

pub(super) fn plain<T: Number>(t: &Tree, leaves: &[T; LEAVES]) -> T {
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

pub(super) fn trees() -> impl Strategy<Value = Tree> {
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
            ("[-+*/]", two()).prop_map(|(o, (a, b))| { Tree::Op(o.chars().next().expect("one sign"), a, b) }),
            ("[-+*/]", two()).prop_map(|(o, (a, b))| { Tree::Op(o.chars().next().expect("one sign"), a, b) }),
            (one(), prop::sample::select(vec![-2.0, -1.0, 0.5, 1.5, 2.0, 3.0, 12.0]))
                .prop_map(|(a, k)| Tree::Power(a, k)),
            (prop::sample::select(UNARY.to_vec()), one()).prop_map(|(f, a)| Tree::Unary(f, a)),
            (prop::sample::select(vec![Binary::Atan2, Binary::Min, Binary::Max, Binary::SignedPower]), two())
                .prop_map(|(f, (a, b))| Tree::Binary(f, a, b)),
            (any::<bool>(), [inner.clone(), inner.clone(), inner.clone(), inner.clone()])
                .prop_map(|(strict, parts)| Tree::If(strict, Box::new(parts))),
        ]
    })
}

pub(super) fn point() -> impl Strategy<Value = [f64; LEAVES]> {
    // Away from zero, where a formula like u/u would be undefined but for its simplification.
    let signed =
        |size: std::ops::Range<f64>| (any::<bool>(), size).prop_map(|(minus, size)| if minus { -size } else { size });
    (0.1f64..2.385, signed(0.07..2.0), signed(0.05..3.0), 0.3f64..1.7, signed(0.02..1.0))
        .prop_map(|(x, u, v, c, s)| [x, u, v, c, s])
}
