use super::*;
use crate::formula::graph::Inputs;
use crate::formula::number::Rounded;
use crate::formula::random::{LEAVES, build, cases, point, trees};
use proptest::prelude::*;

fn inputs<'a, T: Number>(p: &'a [T; LEAVES], jets: &'a dyn Fn(u16, u8) -> T) -> Inputs<'a, T> {
    Inputs { x: p[0], middle: p[0].value(), jets, constants: &p[3..4], slots: &p[4..5] }
}

proptest! {
    #![proptest_config(cases(1000))]

    /// Tape and graph do the same operations in the same order: bit for bit, at every node, whatever the workspace
    /// held before.
    #[test]
    fn tape_equals_evaluation(
        t in prop::collection::vec(trees(), 1..4),
        p in point(),
        n in prop::sample::select(vec![1usize, 3, 127, 128, 129, 300]),
    ) {
        let mut g = Graph::default();
        let outputs: Vec<NodeId> = t.iter().map(|t| build(t, &mut g)).collect();
        let mut tape = Tape::compile(&g, &outputs);
        tape.bind(|_, order| 1 - usize::from(order));
        // All in one piece: the tests are decided at the point itself, x varying only in digits they do not see.
        let x = vec![p[0]; n];
        let u: Vec<f64> = (0..n).map(|i| p[1] + 0.01 * i as f64).collect();
        let v: Vec<f64> = (0..n).map(|i| p[2] - 0.02 * i as f64).collect();
        let jets = [v.clone(), u.clone()].concat();
        let tests = g.decide(tape.tests(), p[0]);
        let mut work = Workspace {
            uniforms: vec![f64::NAN; 7],
            registers: vec![f64::NAN; 1000],
        };
        let mut out = vec![f64::NAN; n * outputs.len()];
        let run = TapeInputs { x: &x, jets: &jets, constants: &p[3..4], slots: &p[4..5], tests: &tests };
        tape.run(&mut work, &run, &mut out);
        for (k, id) in outputs.iter().enumerate() {
            for i in [0, n / 2, n - 1] {
                let here = [p[0], u[i], v[i], p[3], p[4]];
                let jets = |_, order: u8| here[1 + usize::from(order)];
                let expected = g.evaluate(*id, &inputs(&here, &jets));
                let found = out[k * n + i];
                prop_assert!(found == expected || (found.is_nan() && expected.is_nan()), "{found} {expected}");
            }
        }
        // One node with error bounds.
        let here = p.map(|v| Rounded::number(v, 1e-12));
        let jets = |_, order: u8| here[1 + usize::from(order)];
        let rows = [here[2], here[1]];
        let one = ScalarInputs { x: here[0], jets: &rows, constants: &here[3..4], slots: &here[4..5], tests: &tests };
        let mut out = vec![Rounded::exact(0.0); outputs.len()];
        tape.run_scalar(&mut Vec::new(), &one, &mut out);
        for (id, found) in outputs.iter().zip(out) {
            let expected = g.evaluate(*id, &inputs(&here, &jets));
            prop_assert!(found.value == expected.value || found.value.is_nan());
        }
    }
}

#[test]
fn piece_tests_are_decided_by_the_piece() {
    let mut g = Graph::default();
    let (x, h) = (g.coordinate(), g.number(2.6));
    let gap = g.subtract(x, h);
    let (a, b) = (g.number(10.0), g.number(20.0));
    let step = g.choose(gap, true, a, b);
    let tape = Tape::compile(&g, &[step]);
    assert_eq!(tape.tests(), g.piece_tests(&[step]));
    // The same coordinate, the break itself, belongs to the piece on either side.
    for (middle, expected) in [(1.3, 10.0), (2.9, 20.0)] {
        let tests = g.decide(tape.tests(), middle);
        let run = TapeInputs { x: &[2.6, 2.6], jets: &[], constants: &[], slots: &[], tests: &tests };
        let mut out = [0.0; 2];
        tape.run(&mut Workspace::default(), &run, &mut out);
        assert_eq!(out, [expected; 2]);
    }
    // Nothing varies from node to node: all of it is computed once.
    assert!(tape.varying.is_empty());
}

#[test]
fn registers_are_reused() {
    let mut g = Graph::default();
    let mut sum = g.jet(0, 0);
    for _ in 0..100 {
        sum = g.unary(Unary::Sin, sum);
    }
    let tape = Tape::compile(&g, &[sum]);
    assert_eq!((tape.instructions(), tape.registers), (100, 2));
}

#[test]
fn a_second_run_allocates_nothing() {
    let mut g = Graph::default();
    let (x, u, c) = (g.coordinate(), g.jet(0, 0), g.constant(0));
    let sum = g.add(x, u);
    let root = g.unary(Unary::Sqrt, c);
    let product = g.multiply(sum, root);
    let tape = Tape::compile(&g, &[product, root]);
    let mut work = Workspace::default();
    let mut out = vec![0.0; 2 * 200];
    let (x, u) = (vec![1.25; 200], vec![0.5; 200]);
    let mut memory = None;
    for c in [4.0, 9.0] {
        let run = TapeInputs { x: &x, jets: &u, constants: &[c], slots: &[], tests: &[] };
        tape.run(&mut work, &run, &mut out);
        assert_eq!((out[199], out[399]), (1.75 * c.sqrt(), c.sqrt()));
        let now = (work.registers.as_ptr(), work.uniforms.as_ptr());
        assert_eq!(*memory.get_or_insert(now), now);
    }
}
