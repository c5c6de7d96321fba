//! Sheets against closed forms: orders, counts, fluxes, conditions, reports.
//!
//! The closed forms are elementary (statics, conduction, linear equations with constant data) and derived here anew.

mod common;

use spanwise::model::{Batch, ConditionValue, Linearised, Model};
use spanwise::sheet::{self, Sheet};

fn read(text: &str) -> Sheet {
    sheet::read(text).unwrap_or_else(|faults| panic!("{text}\n{faults:#?}"))
}

/// Reads, checks order and carried orders, solves; then every asked number against the value given, in the unit
/// printed: right to 1e-11 of its scale and within its bar.
fn check(text: &str, order: usize, carried: &[usize], expected: &[f64]) {
    let sheet = read(text);
    assert_eq!((sheet.statement.order, sheet.model().layout().orders()), (order, carried), "{text}");
    let solution = sheet.solve(None).unwrap_or_else(|e| panic!("{text}\n{}", sheet.reason(&e)));
    let asked = sheet.evaluate(&solution);
    assert_eq!(asked.len(), expected.len());
    for (asked, value) in asked.iter().zip(expected) {
        let found = asked.printed().unwrap_or_else(|| panic!("{}: {:?}", asked.label, asked.value));
        let error = (found.value - value).abs();
        let scale = asked.unit.difference_from_si(asked.scale).abs();
        assert!(error <= 1e-11 * scale, "{}: {} for {value}, error {error:e}", asked.label, found.value);
        assert!(error <= found.error, "{}: {} for {value}, bar {:e}", asked.label, found.value, found.error);
    }
}

#[test]
fn transport_in_one_flux_has_order_two() {
    // -D*u' + v*u = J on three pieces; u = J/v + c*exp(v*x/D) on each, u continuous.
    let pieces: [(f64, f64, f64); 3] = [(0.4, 2e-3, 3e-3), (0.3, 7e-3, 3e-3), (0.3, 7e-3, 1e-3)];
    let walk = |flux: f64| {
        let mut u = 2.0;
        let mut slopes = Vec::new();
        for (length, d, v) in pieces {
            let end = flux / v + (u - flux / v) * (v * length / d).exp();
            slopes.push(((v * u - flux) / d, (v * end - flux) / d));
            u = end;
        }
        (u, slopes)
    };
    // u(1 m) is linear in J.
    let (a, b) = (walk(0.0).0, walk(1.0).0);
    let flux = (1.0 - a) / (b - a);
    let slopes = walk(flux).1;
    let sheet = r#"
        [given]
        D = { "0 m .. 0.4 m" = "2e-3 m^2/s", else = "7e-3 m^2/s" }
        v = { "0 m .. 0.7 m" = "3e-3 m/s", else = "1e-3 m/s" }
        J = "-D*u' + v*u"
        [span]
        x = ["0 m", "1 m"]
        [unknowns]
        u = "mol/m^3"
        [equations]
        transport = "-(D*u')' + (v*u)' = 0"
        [conditions]
        a = "u(0 m) = 2 mol/m^3"
        b = "u(1 m) = 1 mol/m^3"
        [report]
        flux = "J(0 m)"
        "flux at a step" = "J(0.7 m)"
        before = "u'(0.4 m-)"
        step = "jump(u', 0.4 m)"
    "#;
    check(sheet, 2, &[1, 1], &[flux, flux, slopes[0].1, slopes[1].0 - slopes[0].1]);
}

#[test]
fn advection_has_order_one() {
    // ((a + v)*u)' = 0 on each piece, v*u continuous.
    let sheet = r#"
        [given]
        a = "2 m/s"
        v = { "0 m .. 0.5 m" = "1 m/s", else = "3 m/s" }
        s = "0.7 1/s"
        [span]
        x = ["0 m", "1 m"]
        [unknowns]
        u = "1"
        [equations]
        e = "a*u' + (v*u)' = s"
        [conditions]
        c = "(v(0 m) + a)*u(0 m) = 3 m/s"
        [report]
        start = "u(0 m)"
        left = "u(0.5 m-)"
        right = "u(0.5 m+)"
        end = "u(1 m)"
    "#;
    // All terms under one derivative are one flux, a*u + v*u: it is what passes the step unchanged.
    let left = (3.0 + 0.35) / 3.0;
    let right = 3.0 * left / 5.0;
    check(sheet, 1, &[0, 1], &[1.0, left, right, right + 0.35 / 5.0]);
}

#[test]
fn a_beam_under_axial_force_is_the_same_in_both_spellings() {
    let sheet = |equation: &str, shear: &str| {
        format!(
            r#"
            [given]
            N = {{ "0 m .. 1.1 m" = "7 kN", else = "3 kN" }}
            B = "20 kN m^2"
            q = "1 kN/m"
            Q = "{shear}"
            [span]
            x = ["0 m", "3 m"]
            [unknowns]
            w = "mm"
            [equations]
            e = "{equation}"
            [conditions]
            a = ["w(0 m) = 0", "w'(0 m) = 0"]
            b = ["w(3 m) = 0", "w''(3 m) = 0"]
            [report]
            w = "w(1.5 m)"
            start = "Q(0 m) in kN"
            middle = "Q(1.1 m) in kN"
            end = "Q(3 m) in kN"
            "#
        )
    };
    let uniform = read(&sheet("B*w'''' - (N*w')' = q", "B*w''' - N*w'"));
    let carried = read(&sheet("(B*w'')'' - (N*w')' = q", "(B*w'')' - N*w'"));
    assert_eq!((uniform.statement.order, uniform.model().layout().orders()), (4, &[3, 1][..]));
    assert_eq!((carried.statement.order, carried.model().layout().orders()), (4, &[2, 1, 1][..]));
    let numbers = |sheet: &Sheet| {
        let solution = sheet.solve(None).expect("a solution");
        sheet.evaluate(&solution).iter().map(|a| a.printed().expect("a number")).collect::<Vec<_>>()
    };
    let (first, second) = (numbers(&uniform), numbers(&carried));
    for (a, b) in first.iter().zip(&second) {
        assert!((a.value - b.value).abs() <= a.error + b.error, "{a:?} {b:?}");
    }
    // Equilibrium: the transverse force takes up the load.
    assert!((first[3].value - first[1].value - 3.0).abs() <= first[3].error + first[1].error);
    assert!((first[2].value - first[1].value - 1.1).abs() <= first[2].error + first[1].error);
}

#[test]
fn layers_of_a_pipe() {
    let sheet = r#"
        [given]
        k = { "10 mm .. 20 mm" = "15 W/(m K)", "20 mm .. 50 mm" = "0.04 W/(m K)" }
        q = "-k*T'"
        h = "10 W/(m^2 K)"
        [span]
        r = ["10 mm", "50 mm"]
        [unknowns]
        T = "degC"
        [equations]
        conduction = "(1/r)*(r*k*T')' = 0"
        [conditions]
        inside = "T(10 mm) = 120 degC"
        outside = "q(50 mm) = h*(T(50 mm) - 20 degC)"
        [report]
        loss = "2*pi*50 mm*q(50 mm) in W/m"
        joint = "T(20 mm)"
        surface = "T(50 mm)"
        drop = "T(10 mm) - T(50 mm) in K"
    "#;
    // Resistances in series, per length.
    let turn = 2.0 * std::f64::consts::PI;
    let (a, b, c) = (2f64.ln() / (turn * 15.0), 2.5f64.ln() / (turn * 0.04), 1.0 / (turn * 0.05 * 10.0));
    let loss = 100.0 / (a + b + c);
    check(sheet, 2, &[1, 1], &[loss, 120.0 - loss * a, 20.0 + loss * c, loss * (a + b)]);
    let statement = &read(sheet).statement;
    assert_eq!(statement.carried, ["T", "r*k*T'"]);
    assert_eq!(statement.equations[0].remark, "carries r*k*T'");
}

#[test]
fn an_area_outside_and_inside_the_derivative_may_step() {
    let sheet = r#"
        [given]
        k = "1.5 W/(m K)"
        A = { "0 m .. 1 m" = "10 cm^2", else = "20 cm^2" }
        [span]
        x = ["0 m", "3 m"]
        [unknowns]
        T = "K"
        [equations]
        heat = "(1/A)*(k*A*T')' = -2 W/m^3"
        [conditions]
        a = "T'(0 m) = 0"
        b = "T(3 m) = 0"
        [report]
        middle = "T(1 m)"
        start = "T(0 m)"
    "#;
    // Flow = -2 W/m^3 * volume; T falls by (flow/(k*A)) along each piece.
    let first = 2.0 * 0.5 / 1.5;
    let second = 2.0 * (1.0 * 2.0 * 10.0 / 20.0 + 0.5 * 4.0) / 1.5;
    check(sheet, 2, &[1, 1], &[second, first + second]);
}

#[test]
fn a_beam_with_shear_strain_is_a_system_of_order_four() {
    let sheet = r#"
        [given]
        L = "2 m"
        S = "3 MN"
        B = "400 kN m^2"
        q = "5 kN/m"
        V = "S*(w' - phi)"
        M = "B*phi'"
        [span]
        x = ["0 m", "L"]
        [unknowns]
        w = "mm"
        phi = "mrad"
        [equations]
        shear = "V' = -q"
        bending = "M' + V = 0"
        [conditions]
        base = ["w(0 m) = 0", "phi(0 m) = 0"]
        tip = ["V(L) = 0", "M(L) = 0"]
        [report]
        tip = "w(L)"
        turn = "phi(L)"
        force = "V(0 m) in kN"
        moment = "M(0 m) in kN m"
    "#;
    let (l, s, b, q) = (2.0f64, 3000.0, 400.0, 5.0);
    let tip = 1e3 * (q * l.powi(4) / (8.0 * b) + q * l * l / (2.0 * s));
    check(sheet, 4, &[1, 1, 1, 1], &[tip, 1e3 * q * l.powi(3) / (6.0 * b), q * l, q * l * l / 2.0]);
}

/// A beam from 0 to 4 m with B = 10 kN m^2 and V = M', M = B*y''.
fn beam(conditions: &str, report: &str) -> String {
    format!(
        r#"
        [given]
        B = "10 kN m^2"
        q = "1 kN/m"
        M = "B*y''"
        V = "M'"
        [span]
        x = ["0 m", "4 m"]
        [unknowns]
        y = "mm"
        [equations]
        bending = "V' = q"
        [conditions]
        {conditions}
        [report]
        {report}
        "#
    )
}

#[test]
fn hinge_and_point_load_by_statics() {
    // Clamped at 0, hinge at 1.5 m, roller at 4 m; 2 kN down at 3 m. The hung part of 2.5 m gives the roller
    // R = (2*1.5 + 1*2.5*1.25)/2.5 and the hinge H = 2 + 2.5 - R.
    let roller = (2.0 * 1.5 + 2.5 * 1.25) / 2.5;
    let hinge: f64 = 4.5 - roller;
    // M > 0 where y'' > 0: with y along the load the clamped moment of load q and H at the hinge.
    let base = hinge * 1.5 + 1.5 * 1.5 / 2.0;
    let sag = (hinge * 1.5f64.powi(3) / 3.0 + 1.5f64.powi(4) / 8.0) / 10.0;
    let text = beam(
        r#"base = ["y(0 m) = 0", "y'(0 m) = 0"]
        hinge = ["release(y', 1.5 m)", "M(1.5 m) = 0"]
        roller = ["y(4 m) = 0", "M(4 m) = 0"]
        load = "jump(V, 3 m) = 2 kN""#,
        r#"base = "M(0 m) in kN m"
        hinge = "V(1.5 m) in kN"
        sag = "y(1.5 m)"
        roller = "V(4 m) in kN"
        step = "jump(V, 3 m) in kN"
        "nothing" = "jump(M, 1.5 m)""#,
    );
    check(&text, 4, &[2, 2], &[base, -hinge, 1e3 * sag, roller, 2.0, 0.0]);
    assert_eq!(read(&text).statement.releases, 2);
}

#[test]
fn a_support_between_by_release() {
    // Two equal fields of 2 m, hinged at all three supports: the moment above the middle one is -q*l^2/8 in size, its
    // reaction 5/4*q*l.
    let text = beam(
        r#"ends = ["y(0 m) = 0", "M(0 m) = 0", "y(4 m) = 0", "M(4 m) = 0"]
        support = ["release(V, 2 m)", "y(2 m) = 0"]"#,
        r#"moment = "M(2 m) in kN m"
        reaction = "jump(V, 2 m) in kN"
        left = "V(2 m-) in kN""#,
    );
    check(&text, 4, &[2, 2], &[0.5, -2.5, 1.25]);
}

#[test]
fn an_elastic_support_ties_jump_and_value() {
    // Simply supported, spring of 5 kN/m in the middle: y = (5*q*l^4/384 - R*l^3/48)/B, R = 5*y.
    let (q, l, b) = (1.0f64, 4.0f64, 10.0);
    let free = 5.0 * q * l.powi(4) / 384.0 / b;
    let y = free / (1.0 + 5.0 * l.powi(3) / 48.0 / b);
    let text = beam(
        r#"ends = ["y(0 m) = 0", "M(0 m) = 0", "y(4 m) = 0", "M(4 m) = 0"]
        spring = "jump(V, 2 m) = -5 kN/m*y(2 m)""#,
        r#"middle = "y(2 m)"
        force = "jump(V, 2 m) in kN""#,
    );
    check(&text, 4, &[2, 2], &[1e3 * y, -5.0 * y]);
}

#[test]
fn contact_resistance_by_release() {
    let text = r#"
        [given]
        k = { "0 m .. 0.1 m" = "1 W/(m K)", else = "0.2 W/(m K)" }
        q = "-k*T'"
        R = "0.03 m^2 K/W"
        [span]
        x = ["0 m", "0.3 m"]
        [unknowns]
        T = "degC"
        [equations]
        heat = "q' = 0"
        [conditions]
        warm = "T(0 m) = 20 degC"
        cold = "T(0.3 m) = -5 degC"
        joint = ["release(T, 0.1 m)", "q(0.1 m) = (T(0.1 m-) - T(0.1 m+))/R"]
        [report]
        flow = "q(0 m)"
        left = "T(0.1 m-)"
        right = "T(0.1 m+)"
        gap = "jump(T, 0.1 m) in K"
    "#;
    let flow = 25.0 / (0.1 + 0.03 + 1.0);
    check(text, 2, &[1, 1], &[flow, 20.0 - 0.1 * flow, 20.0 - 0.13 * flow, -0.03 * flow]);
}

#[test]
fn an_unknown_constant_and_an_integral() {
    // T = s*x*(1 - x)/(2*k): the integral is s/(12*k).
    let sheet = |integral: &str| {
        format!(
            r#"
            [given]
            k = "2 W/(m K)"
            [span]
            x = ["0 m", "1 m"]
            [unknowns]
            T = "K"
            s = {{ unit = "W/m^3", constant = true }}
            [equations]
            heat = "(k*T')' = -s"
            [conditions]
            ends = ["T(0 m) = 0", "T(1 m) = 0"]
            mean = "{integral}"
            [report]
            source = "s"
            top = "max(T)"
            place = "argmax(T)"
            norm = "norm(T)"
            "#
        )
    };
    // norm^2 = (s/(2*k))^2/30
    let expected = |s: f64| [s, s / 16.0, 0.5, s / 4.0 / 30f64.sqrt()];
    check(&sheet("integral(T) = 4 K m"), 2, &[1, 1, 1], &expected(96.0));
    check(&sheet("mean(T) = 4 K"), 2, &[1, 1, 1], &expected(96.0));
    // Over half the span it is half as much; from right to left it counts negative.
    check(&sheet("integral(T, 0 m, 0.5 m) = 4 K m"), 2, &[1, 1, 1], &expected(192.0));
    check(&sheet("integral(T, 1 m, 0.5 m) = -4 K m"), 2, &[1, 1, 1], &expected(192.0));
    check(&sheet("mean(T, 1 m, 0.5 m) = 4 K"), 2, &[1, 1, 1], &expected(96.0));
}

#[test]
fn values_inside_values() {
    // y'' = 0: a straight line through the conditions.
    let sheet = |condition: &str| {
        format!(
            r#"
            [given]
            rel = "y - 0.5*y(0 m)"
            half = "y(2 m)/2"
            [span]
            x = ["0 m", "2 m"]
            [unknowns]
            y = "m"
            [equations]
            line = "y'' = 0"
            [conditions]
            a = "y(0 m) = 3 m"
            b = "{condition}"
            [report]
            end = "y(2 m)"
            same = "rel(1 m)"
            half = "half"
            most = "max(rel)"
            "#
        )
    };
    for (condition, end) in [("rel(2 m) = 1 m", 2.5), ("at(y - y(0 m), 2 m) = 1 m", 4.0)] {
        let middle = (3.0 + end) / 2.0;
        check(&sheet(condition), 2, &[2], &[end, middle - 1.5, end / 2.0, f64::max(3.0, end) - 1.5]);
    }
    // y(2)/2 = (3 + y(2))/2 - 1 holds for no straight line.
    let refused = read(&sheet("half = y(1 m) - 1 m")).solve(None).map(|_| ()).expect_err("no solution");
    assert!(refused.to_string().contains("\"b\""), "{refused}");
}

#[test]
fn derivatives_above_the_carried_order_follow_from_the_equations() {
    // A cantilever of two stiffnesses under a tip load P: y''' = P/(E*I) in size on each piece, although the solver
    // carries y only to its second derivative.
    let sheet = |condition: &str| {
        format!(
            r#"
            [given]
            B = {{ "0 m .. 1 m" = "20 kN m^2", else = "5 kN m^2" }}
            [span]
            x = ["0 m", "2 m"]
            [unknowns]
            y = "mm"
            [equations]
            bending = "(B*y'')'' = 0"
            [conditions]
            base = ["y(0 m) = 0", "y'(0 m) = 0"]
            tip = ["y''(2 m) = 0", "{condition}"]
            [report]
            tip = "y(2 m)"
            third = "y'''(0.5 m)"
            fourth = "y''''(0.5 m)"
            beyond = "y'''(1 m+)"
            most = "max(abs(B*y''')) in kN"
            "#
        )
    };
    // Tip: integral of M*m/(E*I) with M = P*(2 - x), m = 2 - x.
    let tip = 1e3 * ((8.0 - 1.0) / (3.0 * 20.0) + 1.0 / (3.0 * 5.0));
    let expected = [tip, -1.0 / 20.0, 0.0, -1.0 / 5.0, 1.0];
    check(&sheet("B(2 m)*y'''(2 m) = -1 kN"), 4, &[2, 2], &expected);
    check(&sheet("y'''(0.3 m) = -0.05 1/m^2"), 4, &[2, 2], &expected);
    check(&sheet("at((B*y'')', 1 m) = -1 kN"), 4, &[2, 2], &expected);
}

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
