//! Sheets against closed forms: breaks, units, reports, exact derivatives.
//!
//! The closed forms are elementary (statics, conduction, linear equations with constant data) and derived here anew.

mod common;

use common::sheets::{beam, check, read};
use spanwise::model::{Batch, ConditionValue, Linearised, Model};
use spanwise::sheet::{self, Reading, Sheet, read_with};

#[test]
fn kinks_of_data_are_breaks() {
    let text = r#"
        [given]
        q = "abs(sin(7 1/m*x))*1 kN/m + max(x*1 kN/m^2, 0.35 kN/m) + if(0.2 m < x < 0.6 m or x > 1.9 m, 2 kN/m, 0)"
        [span]
        x = ["0 m", "2 m"]
        breaks = ["1 m", "1.9 m"]
        [unknowns]
        V = "kN"
        [equations]
        e = "V' = q"
        [conditions]
        c = "V(0 m) = 0"
        [report]
        V = "V(2 m)"
        load = "integral(q) in kN"
    "#;
    let pi = std::f64::consts::PI;
    // Four full half waves within 14, then a part of the fifth.
    let waves = (4.0 * 2.0 + 1.0 - (14.0 - 4.0 * pi).cos()) / 7.0;
    let ramp = 0.35 * 0.35 + (4.0 - 0.35 * 0.35) / 2.0;
    let total = waves + ramp + 2.0 * 0.5;
    check(text, 1, &[1], &[total, total]);
    let points = read(text).model().points().to_vec();
    let expected = [0.0, 0.2, 0.35, pi / 7.0, 0.6, 2.0 * pi / 7.0, 1.0, 3.0 * pi / 7.0, 4.0 * pi / 7.0, 1.9, 2.0];
    assert_eq!(points.len(), expected.len(), "{points:?}");
    points.iter().zip(expected).for_each(|(p, e)| assert!((p - e).abs() < 1e-15 * 4.0, "{p} {e}"));
}

#[test]
fn pieces_without_else_and_nested_names() {
    let text = r#"
        [given]
        "α" = { "0 m .. a" = "2 1/m", "a .. 2*a" = "twice", "2*a .. 3 m" = "6 1/m" }
        twice = "2*2 1/m"
        a = "1 m"
        L = "3*a"
        [span]
        x = ["0 m", "L"]
        [unknowns]
        "θ" = "1"
        [equations]
        e = "θ' = α*θ"
        [conditions]
        c = "θ(0 m) = 1"
        [report]
        growth = "ln(θ(L))"
        datum = "twice in 1/cm"
        highest = "max(α)"
        place = "argmax(α) in cm"
    "#;
    check(text, 1, &[1], &[12.0, 0.04, 6.0, 200.0]);
}

#[test]
fn initial_values_and_roots() {
    let text = r#"
        [span]
        t = ["0 s", "3 s"]
        [unknowns]
        u = "m"
        [equations]
        swing = "u'' + 4 1/s^2*u = 0"
        [conditions]
        start = ["u(0 s) = 1 m", "u'(0 s) = 0"]
        [report]
        end = "u(3 s)"
        first = "root(u, 1)"
        second = "root(u, 2)"
        between = "at(u', root(u, 1))"
        later = "root(u, 1, 1 s, 3 s)"
    "#;
    let quarter = std::f64::consts::FRAC_PI_4;
    check(text, 2, &[2], &[6f64.cos(), quarter, 3.0 * quarter, -2.0, 3.0 * quarter]);
    let text = text.replace("root(u, 2)", "root(u, 3)");
    let sheet = read(&text);
    let solution = sheet.solve(None).expect("a solution");
    let asked = sheet.evaluate(&solution);
    assert_eq!(asked[2].value.as_ref().err().map(String::as_str), Some("`u` changes sign only 2 times there"));
}

#[test]
fn algebraic_unknowns() {
    let text = r#"
        [span]
        x = ["0", "1"]
        [unknowns]
        T = "1"
        s = "1"
        [equations]
        balance = "T'' = s"
        law = "s = 4*T + 1"
        [conditions]
        ends = ["T(0) = 0", "s'(1) = 0"]
        [report]
        s = "s(0.5)"
        slope = "s'(0)"
    "#;
    // T = (cosh(2*(1 - x))/cosh(2) - 1)/4
    let (c, s) = (1f64.cosh() / 2f64.cosh(), -2.0 * 2f64.tanh());
    check(text, 2, &[2, 0], &[c, s]);
}

#[test]
fn linear_though_not_by_pattern() {
    let text = r#"
        [span]
        x = [0, 1]
        [unknowns]
        v = "1"
        [equations]
        e = "v'' = (v + 1)^2 - v*v - 1"
        [conditions]
        ends = ["v(0) = 0", "exp(ln(2)*2)*v(1) = 4"]
        [report]
        middle = "v(0.5)"
    "#;
    assert!(read(text).statement.linear);
    let k = 2f64.sqrt();
    check(text, 2, &[2], &[(0.5 * k).sinh() / k.sinh()]);
}

#[test]
fn temperatures_and_differences() {
    let text = r#"
        [given]
        Ta = "20 degC"
        dT = "5 K"
        [span]
        x = ["0 m", "2 m"]
        [unknowns]
        T = "degC"
        [equations]
        heat = "T'' = 0"
        [conditions]
        a = "T(0 m) = Ta + dT"
        b = "T(0 m) - T(2 m) = 5 K"
        [report]
        middle = "T(1 m)"
        excess = "T(1 m) - Ta in K"
        mean = "(T(0 m) + T(2 m))/2 in degC"
        fahrenheit = "T(1 m) in degF"
        kelvin = "T(1 m) in K"
        all = "mean(T) in degC"
    "#;
    check(text, 2, &[2], &[22.5, 2.5, 22.5, 72.5, 295.65, 22.5]);
}

#[test]
fn reports_of_results_and_data() {
    let text = r#"
        [given]
        L = "3 m"
        P = "2 kN"
        B = "10 kN m^2"
        ratio = "y(L)/L"
        peak = "max(y)"
        twice = "2*peak"
        [span]
        x = ["0 m", "L"]
        [unknowns]
        y = "mm"
        [equations]
        bending = "(B*y'')'' = 0"
        [conditions]
        base = ["y(0 m) = 0", "y'(0 m) = 0"]
        tip = ["y''(L) = 0", "B*y'''(L) = -P"]
        [report]
        ratio = "ratio in %"
        twice = "twice in mm"
        length = "L in cm"
        force = "P*L in kN m"
        number = "2 + 1"
        place = "y(argmax(y))"
        between = "y(L/2)"
        work = "integral((B*y'')^2/(2*B)) in J"
    "#;
    let tip = 2.0 * 27.0 / 30.0;
    let between = 2.0 * (1.5 * 1.5 * (9.0 - 1.5)) / 60.0;
    check(
        text,
        4,
        &[2, 2],
        &[100.0 * tip / 3.0, 2e3 * tip, 300.0, 6.0, 3.0, 1e3 * tip, 1e3 * between, 1e3 * 2.0 * tip / 2.0],
    );
}

#[test]
fn derivatives_of_every_linear_sheet_are_exact() {
    // F is affine: F(z) - F(0) is the derivative times z, in equations and in conditions.
    for entry in std::fs::read_dir("examples/sheets").expect("a folder of sheets").flatten() {
        let text = std::fs::read_to_string(entry.path()).expect("a sheet");
        let sheet = read(&text);
        if !sheet.statement.linear {
            continue;
        }
        let (model, name) = (sheet.model(), entry.path());
        let layout = model.layout();
        let state = |k: usize| ((k as f64 + 0.385) * 2.39).sin();
        let constants: Vec<f64> = (0..layout.constants()).map(|k| state(k + 7)).collect();
        for piece in 0..model.points().len() - 1 {
            let (a, b) = (model.points()[piece], model.points()[piece + 1]);
            let x = [a + 0.385 * (b - a)];
            let jets: Vec<f64> = (0..layout.jets()).map(state).collect();
            let (mut at, mut zero) = (Linearised::default(), Linearised::default());
            at.reset(layout, 1);
            zero.reset(layout, 1);
            let none = vec![0.0; layout.constants()];
            model.equations(&Batch { piece, x: &x, jets: &jets, constants: &constants }, &mut at).expect("values");
            let nothing = vec![0.0; layout.jets()];
            model.equations(&Batch { piece, x: &x, jets: &nothing, constants: &none }, &mut zero).expect("values");
            for e in 0..layout.unknowns() {
                let own = (0..layout.jets()).map(|j| at.jets[e * layout.jets() + j] * jets[j]);
                let more = (0..layout.constants()).map(|c| at.constants[e * layout.constants() + c] * constants[c]);
                let parts: Vec<f64> = own.chain(more).collect();
                let (sum, size) = (parts.iter().sum::<f64>(), parts.iter().fold(0.0f64, |m, p| m.max(p.abs())));
                let gap = at.residual[e] - zero.residual[e] - sum;
                let size = size.max(zero.residual[e].abs());
                assert!(gap.abs() <= 1e-13 * size, "{name:?} equation {e} piece {piece}: {gap:e} of {size:e}");
            }
        }
        for (index, condition) in model.conditions().iter().enumerate() {
            let n = condition.places.len() * layout.jets();
            let jets: Vec<f64> = (0..n).map(state).collect();
            let (mut at, mut zero) = (ConditionValue::default(), ConditionValue::default());
            at.reset(layout, condition.places.len());
            zero.reset(layout, condition.places.len());
            model.condition(index, &jets, &constants, &mut at).expect("values");
            model.condition(index, &vec![0.0; n], &vec![0.0; constants.len()], &mut zero).expect("values");
            let parts = at.jets.iter().zip(&jets).chain(at.constants.iter().zip(&constants)).map(|(a, b)| a * b);
            let parts: Vec<f64> = parts.collect();
            let (sum, size) = (parts.iter().sum::<f64>(), parts.iter().fold(0.0f64, |m, p| m.max(p.abs())));
            let gap = at.residual - zero.residual - sum;
            let size = size.max(zero.residual.abs());
            assert!(gap.abs() <= 1e-13 * size, "{name:?} {}: {gap:e} of {size:e}", condition.name);
        }
    }
}

#[test]
fn balances_close_and_are_wide_awake() {
    let text = beam(
        r#"base = ["y(0 m) = 0", "y'(0 m) = 0"]
        tip = ["M(4 m) = 0", "V(4 m) = -3 kN"]
        load = "jump(V, 3 m) = 2 kN""#,
        r#"y = "y(4 m)""#,
    );
    let sheet = read(&text);
    let solution = sheet.solve(None).expect("a solution");
    let closures = sheet.balances(&solution);
    assert_eq!(closures.len(), 1);
    // The load of 4 kN against the difference of the shear forces without the prescribed jump.
    assert!((closures[0].sources.value - 4e3).abs() <= closures[0].sources.error);
    assert!((closures[0].flows.value - 4e3).abs() <= closures[0].flows.error);
}

#[test]
fn what_is_drawn() {
    let text = beam(
        r#"base = ["y(0 m) = 0", "y'(0 m) = 0"]
        tip = ["M(4 m) = 0", "V(4 m) = -3 kN"]"#,
        r#"y = "max(M^2) in kN^2 m^2"
        v = "V(1 m) in kN""#,
    );
    let sheet = read(&text);
    let curves: Vec<String> = sheet.curves().map(|(name, unit, _)| format!("{name} [{}]", unit.text)).collect();
    assert_eq!(curves, ["y [mm]", "M [N m]", "V [kN]", "M^2 [kN^2 m^2]"]);
    assert_eq!(sheet.statement.carried, ["y", "M"]);
}

#[test]
fn a_datum_that_only_bends_has_one_value_at_its_kink() {
    let text = r#"
        [given]
        h = "0.7 m"
        p = "if(x < h, 2 Pa/m*(h - x), 0) + 3 Pa"
        [span]
        x = ["0 m", "1 m"]
        [unknowns]
        u = "Pa"
        [equations]
        e = "u' = p/(1 m)"
        [conditions]
        c = "u(h) = 2*p(h)"
        [report]
        start = "u(0 m)"
        end = "u(1 m)"
    "#;
    check(text, 1, &[1], &[6.0 - 3.0 * 0.7 - 0.49, 6.0 + 3.0 * 0.3]);
    let stepping = text.replace("2 Pa/m*(h - x)", "2 Pa");
    let faults = sheet::read(&stepping).expect_err("two values");
    assert_eq!(faults[0].message, "`p` has two values at this point");
}

#[test]
fn an_equation_may_be_turned_around_and_scaled() {
    // What is carried and asked must not hang on how an equation is written.
    for entry in std::fs::read_dir("examples/sheets").expect("a folder of sheets").flatten() {
        let (path, text) = (entry.path(), std::fs::read_to_string(entry.path()).expect("a sheet"));
        let plain = read(&text);
        if !plain.statement.linear {
            continue;
        }
        let numbers = |sheet: &Sheet| {
            let solution = sheet.solve(None).unwrap_or_else(|e| panic!("{path:?}: {}", sheet.reason(&e)));
            let values = sheet.evaluate(&solution).into_iter().map(|a| a.printed().expect("a number"));
            values.collect::<Vec<_>>()
        };
        let expected = numbers(&plain);
        let ways: [fn(&str, &str) -> String; 3] = [
            |left, right| format!("-2.385*({left}) = -2.385*({right})"),
            |left, right| format!("0 = ({right}) - ({left})"),
            |left, right| format!("({left} + {right})/2 = {right}"),
        ];
        for way in ways {
            let mut altered = text.clone();
            for equation in &plain.statement.equations {
                let (left, right) = equation.text.split_once('=').expect("an equation");
                let written = format!("\"{}\"", equation.text);
                assert_eq!(altered.matches(&written).count(), 1, "{path:?} {written}");
                altered = altered.replace(&written, &format!("\"{}\"", way(left.trim(), right.trim())));
            }
            let sheet = read(&altered);
            assert_eq!(sheet.statement.order, plain.statement.order, "{altered}");
            for (a, b) in numbers(&sheet).iter().zip(&expected) {
                assert!((a.value - b.value).abs() <= a.error + b.error, "{a:?} {b:?}\n{altered}");
            }
        }
    }
}

/// Data that are held: other values without reading again, exact derivatives by them, and what they decide is known.
#[test]
fn held_data_are_constants_behind_the_unknown_ones() {
    let text = r#"
[given]
L = "2 m"
d = "30 mm"
E = "70 GPa"
I = "pi*d^4/64"
q = "1.7 kN/m"
[span]
x = ["0 m", "L"]
[unknowns]
y = "mm"
[equations]
bending = "(E*I*y'')'' = q"
[conditions]
clamped = ["y(0 m) = 0", "y'(0 m) = 0"]
free = ["y''(L) = 0", "y'''(L) = 0"]
[report]
tip = "y(L) in mm"
stiffness = "E*I in N*m^2"
"#;
    let sheet = read_with(text, &Reading { held: &["d", "q"], ..Default::default() }).expect("sound");
    assert!(!sheet.moves_points());
    assert_eq!(
        sheet.held().iter().map(|h| (h.name.as_str(), h.value)).collect::<Vec<_>>(),
        [("d", 0.03), ("q", 1700.0)]
    );
    assert_eq!((sheet.open_model().layout().constants(), sheet.model().layout().constants()), (2, 0));
    // Deflection of a uniform cantilever, q L^4/(8 E I) (any handbook of strength of materials).
    for (d, q) in [(0.03, 1700.0), (0.05, 423.0)] {
        let solution = sheet.solve_held(&[d, q], None).expect("regular");
        let exact = q * 16.0 / (8.0 * 70e9 * std::f64::consts::PI * d.powi(4) / 64.0);
        let found: Vec<_> = sheet.evaluate(&solution).iter().map(|a| a.value.clone().expect("a value")).collect();
        assert!((found[0].value - exact).abs() <= found[0].error && found[0].error < 1e-11 * exact, "{:?}", found[0]);
        assert!((found[1].value * 8.0 * exact / 16.0 - q).abs() < 1e-12 * q, "{:?}", found[1]);
    }
    // dF/dq = -1 where F = M'' - q, and dF/dd of the definition of M is 4/d E I y''.
    let model = sheet.open_model();
    let layout = model.layout();
    let mut out = Linearised::default();
    out.reset(layout, 1);
    let jets = vec![2.0; layout.jets()];
    let batch = Batch { piece: 0, x: &[0.7], jets: &jets, constants: &[0.03, 1700.0] };
    model.equations(&batch, &mut out).expect("finite");
    assert_eq!(out.constants[1], -1.0);
    let by_diameter = 70e9 * std::f64::consts::PI * 0.03f64.powi(3) / 16.0 * 2.0;
    assert!((out.constants[2].abs() / by_diameter - 1.0).abs() < 1e-14, "{:?}", out.constants);
    // The length decides where the span ends.
    assert!(read_with(text, &Reading { held: &["L"], ..Default::default() }).expect("sound").moves_points());
    let other = read_with(text, &Reading { replaced: &[("L", "3 m")], ..Default::default() }).expect("sound");
    assert_eq!(other.model().points(), [0.0, 3.0]);
    for reading in [
        Reading { held: &["nothing"], ..Default::default() },
        Reading { held: &["y"], ..Default::default() },
        Reading { replaced: &[("q", "1.7 kN")], ..Default::default() },
        Reading { replaced: &[("z", "1")], ..Default::default() },
    ] {
        assert_eq!(read_with(text, &reading).expect_err("refused").len(), 1, "{reading:?}");
    }
}
