//! Unknown constants, integral conditions and conditions at several points in nonlinear problems, against closed forms.

use spanwise::sheet;

/// Asked numbers of a sheet with their bars, in the units printed.
fn numbers(text: &str) -> Vec<(f64, f64)> {
    let sheet = sheet::read(text).unwrap_or_else(|faults| panic!("{faults:?}"));
    let solution = sheet.solve(None).unwrap_or_else(|e| panic!("{}", sheet.reason(&e)));
    let found = sheet.evaluate(&solution);
    found.iter().map(|a| a.printed().map(|v| (v.value, v.error)).expect("a value")).collect()
}

/// Every value within its bar of the closed form (itself good to a few roundings), no bar above 1e-10 relative.
fn check(found: &[(f64, f64)], expected: &[f64]) {
    assert_eq!(found.len(), expected.len());
    for ((value, error), exact) in found.iter().zip(expected) {
        assert!((value - exact).abs() <= error + 4e-15 * exact.abs(), "{value} +- {error:e} against {exact}");
        assert!(*error <= 1e-10 * exact.abs(), "bar {error:e} of {value}");
    }
}

/// The zero of a function that changes sign between two places, by bisection.
fn zero(f: impl Fn(f64) -> f64, mut a: f64, mut b: f64) -> f64 {
    assert!(f(a) * f(b) < 0.0);
    for _ in 0..200 {
        let middle = 0.5 * (a + b);
        if f(a) * f(middle) <= 0.0 { b = middle } else { a = middle }
    }
    0.5 * (a + b)
}

/// Inverse design: how thick a coating keeps the outer face of a wall at 60 degC. The conductivity of the wall grows with
/// the temperature; by Kirchhoff's transformation q L/k = (T0 - TL) + b (T0^2 - TL^2)/2 in degrees Celsius.
#[test]
fn thickness_of_a_coating() {
    let found = numbers(
        r#"
        [given]
        L = "83 mm"
        k = "0.79 W/(m K)*(1 + 0.0015 1/K*(T - 0 degC))"
        coat = "0.041 W/(m K)"
        film = "12.3 W/(m^2 K)"
        q = "-k*T'"
        [span]
        x = ["0 m", "L"]
        [unknowns]
        T = "degC"
        d = { unit = "mm", constant = true }
        [equations]
        conduction = "(k*T')' = 0"
        [conditions]
        coating = "q(0 m)*d = coat*(140 degC - T(0 m))"
        air = "q(L) = film*(T(L) - 20 degC)"
        wanted = "T(L) = 60 degC"
        [report]
        thickness = "d in mm"
        under = "T(0 m) in degC"
    "#,
    );
    let (b, flux) = (0.0015f64, 12.3 * 40.0);
    let right = flux * 0.083 / 0.79 + 60.0 + 0.5 * b * 3600.0;
    let under = 2.0 * right / (1.0 + (1.0 + 2.0 * b * right).sqrt());
    check(&found, &[1e3 * 0.041 * (140.0 - under) / flux, under]);
}

/// Self-heating layer beyond its fold: y'' + p exp(y) = 0 with the middle at 2 (the fold is at 1.1868). Closed form:
/// y = -2 ln(cosh((x - 1/2) c/2)/cosh(c/4)), p = (c/cosh(c/4))^2/2, slope at the start sqrt(2 p (exp(2) - 1)).
#[test]
fn a_state_beyond_the_fold_by_its_height() {
    let found = numbers(
        r#"
        [span]
        x = ["0", "1"]
        [unknowns]
        y = "1"
        p = { unit = "1", constant = true }
        [equations]
        heating = "y'' + p*exp(y) = 0"
        [conditions]
        faces = ["y(0) = 0", "y(1) = 0"]
        height = "y(0.5) = 2"
        [report]
        p = "p"
        slope = "y'(0)"
        heat = "p*integral(exp(y))"
    "#,
    );
    let c = 4.0 * 1f64.exp().acosh();
    let p = 0.5 * (c / 1f64.exp()).powi(2);
    let slope = (2.0 * p * (2f64.exp() - 1.0)).sqrt();
    check(&found, &[p, slope, 2.0 * slope]);
}

/// A hanging chain of given length: y'' = p sqrt(1 + y'^2), its length an integral condition; 2 sinh(p/2)/p = length.
#[test]
fn a_chain_of_given_length() {
    let found = numbers(
        r#"
        [span]
        x = ["0", "1"]
        [unknowns]
        y = { unit = "1", guess = "-x*(1 - x)" }
        p = { unit = "1", constant = true, guess = "1", above = "0" }
        [equations]
        chain = "y'' = p*sqrt(1 + y'^2)"
        [conditions]
        ends = ["y(0) = 0", "y(1) = 0"]
        length = "integral(sqrt(1 + y'^2)) = 1.385"
        [report]
        p = "p"
        sag = "-y(0.5)"
    "#,
    );
    let p = zero(|p| 2.0 * (0.5 * p).sinh() / p - 1.385, 0.5, 6.0);
    check(&found, &[p, ((0.5 * p).cosh() - 1.0) / p]);
}

/// Logistic growth with both of its constants unknown: y = K/(1 + (K/y0 - 1) exp(-r t)); three conditions, one of them a
/// product of values at two points, one a difference.
#[test]
fn growth_from_three_points() {
    let (r, k, y0) = (1.3f64, 2.385f64, 0.11f64);
    let y = |t: f64| k / (1.0 + (k / y0 - 1.0) * (-r * t).exp());
    let found = numbers(&format!(
        r#"
        [span]
        t = ["0", "4"]
        [unknowns]
        y = {{ unit = "1", guess = "0.1 + t/2" }}
        r = {{ unit = "1", constant = true, guess = "1" }}
        K = {{ unit = "1", constant = true, guess = "2" }}
        [equations]
        growth = "y' = r*y*(1 - y/K)"
        [conditions]
        start = "y(0) = 0.11"
        product = "y(1)*y(2) = {:.17e}"
        difference = "y(4) - y(1) = {:.17e}"
        [report]
        r = "r"
        K = "K"
        between = "y(2.5)"
    "#,
        y(1.0) * y(2.0),
        y(4.0) - y(1.0)
    ));
    check(&found, &[r, k, y(2.5)]);
}

/// Two constants that enter by their sum only: no number may come out, and the verdict says that the solution is not unique.
#[test]
fn constants_that_nothing_determines() {
    let sheet = sheet::read(
        r#"
        [span]
        x = ["0", "1"]
        [unknowns]
        y = "1"
        p = { unit = "1", constant = true }
        r = { unit = "1", constant = true }
        [equations]
        heating = "y'' + (p + r)*exp(y) = 0"
        [conditions]
        faces = ["y(0) = 0", "y(1) = 0"]
        height = "y(0.5) = 0.5"
        slope = "y'(0) + y'(1) = 0"
        [report]
        p = "p"
    "#,
    )
    .expect("read");
    let error = sheet.solve(None).expect_err("nothing determines p and r apart");
    let message = sheet.reason(&error);
    assert!(message.contains("no unique solution"), "{message}");
}

/// One constant without a condition of its own is refused by the count.
#[test]
fn a_constant_without_a_condition() {
    let faults = sheet::read(
        r#"
        [span]
        x = ["0", "1"]
        [unknowns]
        y = "1"
        p = { unit = "1", constant = true }
        [equations]
        heating = "y'' + p*exp(y) = 0"
        [conditions]
        faces = ["y(0) = 0", "y(1) = 0"]
        [report]
        p = "p"
    "#,
    )
    .expect_err("refused");
    let text: Vec<&str> = faults.iter().map(|f| f.message.as_str()).collect();
    assert!(
        text.iter().any(|t| t.contains("3 conditions are needed (order 2, 1 unknown constant), 2 given")),
        "{text:?}"
    );
}
