//! Sheets against closed forms: orders, counts and fluxes.
//!
//! The closed forms are elementary (statics, conduction, linear equations with constant data) and derived here anew.

mod common;

use common::sheets::{check, read};
use spanwise::model::Model;
use spanwise::sheet::Sheet;

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
