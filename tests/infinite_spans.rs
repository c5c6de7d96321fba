//! Infinite spans: cut further and further out until no number moves; the cut is part of the bar.

use spanwise::sheet;

/// Values and bars of all asked numbers.
fn numbers(text: &str) -> Vec<(f64, f64)> {
    let sheet = sheet::read(text).unwrap_or_else(|faults| panic!("{faults:?}\n{text}"));
    let solution = sheet.solve(None).unwrap_or_else(|e| panic!("{e}\n{text}"));
    let found = sheet.evaluate(&solution);
    found.iter().map(|a| a.value.as_ref().map(|v| (v.value, v.error)).expect("a value")).collect()
}

/// Every number within its bar (and the digits to which it is known), the bar at most `limit` of it.
fn check(text: &str, expected: &[f64], known: f64, limit: f64) {
    let found = numbers(text);
    assert_eq!(found.len(), expected.len());
    for ((value, error), exact) in found.iter().zip(expected) {
        assert!((value - exact).abs() <= error + known * exact.abs(), "{value} +- {error:e} against {exact}");
        assert!(*error <= limit * exact.abs(), "bar {error:e} of {value}");
    }
}

/// Blasius' boundary layer, f''(0) = 0.332057336215196 (published to 15 digits by many; from memory), and heat transfer at
/// Prandtl number 1, where the temperature is 1 - f' (Reynolds analogy).
#[test]
fn boundary_layer_on_a_plate() {
    let text = r#"
        [given]
        Pr = 1
        [span]
        eta = ["0", "inf"]
        [unknowns]
        f = "1"
        th = "1"
        [equations]
        flow = "2*f''' + f*f'' = 0"
        heat = "th'' + Pr/2*f*th' = 0"
        [conditions]
        wall = ["f(0) = 0", "f'(0) = 0", "th(0) = 1"]
        stream = ["f'(inf) = 1", "th(inf) = 0"]
        [report]
        shear = "f''(0)"
        heat = "-th'(0)"
        same = "1 - f'(2.385) - th(2.385) + 1"
    "#;
    check(text, &[0.332057336215196, 0.332057336215196, 1.0], 2e-15, 1e-12);
}

/// Stagnation flow (Hiemenz 1911; Falkner & Skan 1931 with beta = 1): f''(0) = 1.232587656820 (from memory).
#[test]
fn stagnation_flow() {
    let text = r#"
        [span]
        eta = ["0", "inf"]
        [unknowns]
        f = "1"
        [equations]
        flow = "f''' + f*f'' + 1 - f'^2 = 0"
        [conditions]
        wall = ["f(0) = 0", "f'(0) = 0"]
        stream = "f'(inf) = 1"
        [report]
        shear = "f''(0)"
    "#;
    check(text, &[1.232587656820], 5e-13, 1e-11);
}

/// Thomas & Fermi's atom, y'(0) = -1.588071022611375 (Boyd 2013, to many digits; from memory): half-integer powers at the
/// nucleus, algebraic decay at infinity.
#[test]
fn thomas_fermi() {
    let text = r#"
        [span]
        x = ["0", "inf"]
        [unknowns]
        y = { unit = "1", above = "0" }
        [equations]
        atom = "y'' = y^1.5/sqrt(x)"
        [conditions]
        ends = ["y(0) = 1", "y(inf) = 0"]
        [report]
        slope = "y'(0)"
    "#;
    check(text, &[-1.588071022611375], 1e-15, 1e-8);
}

/// Linear decay with units and a break far beyond the first cut; integrals reach to infinity; and both ends infinite,
/// u'' = u - exp(-|x|) with u = (1 + |x|) exp(-|x|)/2.
#[test]
fn linear_decay() {
    let text = r#"
        [given]
        k = "2.385e4 1/m"
        Q = { "0 mm .. 7 m" = "0 K/m^2", else = "0 K/m^2" }
        [span]
        x = ["0 mm", "inf"]
        [unknowns]
        T = "K"
        [equations]
        decay = "T'' = k^2*T + Q"
        [conditions]
        ends = ["T(0 mm) = 300 K", "T(inf) = 0"]
        [report]
        slope = "T'(0 mm) in K/m"
        content = "integral(T) in K*m"
        "at 1 mm" = "T(1 mm) in K"
    "#;
    let k = 2.385e4;
    check(text, &[-300.0 * k, 300.0 / k, 300.0 * (-23.85f64).exp()], 1e-15, 1e-9);
    let text = r#"
        [span]
        x = ["-inf", "inf"]
        [unknowns]
        u = "1"
        [equations]
        line = "u'' = u - exp(-abs(x))"
        [conditions]
        ends = ["u(-inf) = 0", "u(inf) = 0"]
        [report]
        middle = "u(0)"
        aside = "u(-1.385)"
        all = "integral(u)"
    "#;
    check(text, &[0.5, 0.5 * 2.385 * (-1.385f64).exp(), 2.0], 1e-15, 1e-10);
}

#[test]
fn infinity_stands_for_an_end_only() {
    let text = "[span]\nx = [\"0\", \"1\"]\n[unknowns]\nu = \"1\"\n[equations]\ne = \"u'' = 0\"\n\
                [conditions]\nc = [\"u(0) = 0\", \"u(inf) = 1\"]\n[report]\nr = \"u(0)\"\n";
    let faults = sheet::read(text).expect_err("refused");
    assert_eq!(faults[0].message, "`inf` stands for an infinite end, and this span has none");
}
