//! Sheets against closed forms: supports, hinges, contacts, integrals, constants.
//!
//! The closed forms are elementary (statics, conduction, linear equations with constant data) and derived here anew.

mod common;

use common::sheets::{beam, check, read};

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
