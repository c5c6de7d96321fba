//! Eigenproblems as sheets, against closed forms and published values.

mod common;

use common::sheets::read;
use spanwise::record::{build::Origin, json, modes};
use spanwise::sheet::{self, Sheet};
use spanwise::solve::Spectrum;

/// Solves an eigen sheet and compares its eigenvalues (SI) with the true ones.
fn holds(text: &str, expected: &[f64]) -> (Sheet, Spectrum) {
    let sheet = read(text);
    let spectrum = sheet.solve_modes(None).unwrap_or_else(|e| panic!("{e}"));
    assert_eq!(spectrum.modes.len(), expected.len());
    for (mode, exact) in spectrum.modes.iter().zip(expected) {
        let off = (mode.value.re - exact).abs();
        // Expected values are given to sixteen digits at most.
        assert!(off <= mode.error + 2.0 * f64::EPSILON * exact.abs(), "{} for {exact}, bar {}", mode.value, mode.error);
        assert!(mode.error <= 1e-10 * exact.abs(), "bar {} of {exact}", mode.error);
    }
    (sheet, spectrum)
}

fn sheet(span: &str, unknown: &str, equation: &str, conditions: &str, eigen: &str) -> String {
    format!(
        "[span]\nx = {span}\n[unknowns]\n{unknown}\n[equations]\ne = \"{equation}\"\n[conditions]\nc = {conditions}\n[eigen]\nparameter = \"k\"\n{eigen}\n"
    )
}

#[test]
fn unit_of_the_parameter_follows_from_the_equations() {
    // omega^2 = (n pi c/L)^2 in 1/s^2 of a string; Euler's load n^2 pi^2 EI/L^2 in N.
    let string = sheet(
        "[\"0 m\", \"2 m\"]",
        "w = \"mm\"",
        "(35 m/s)^2*w'' + k*w = 0",
        "[\"w(0 m) = 0\", \"w(2 m) = 0\"]",
        "lowest = 3",
    );
    let pi = std::f64::consts::PI;
    let (string, _) = holds(&string, &[1.0, 2.0, 3.0].map(|n: f64| (n * pi * 17.5).powi(2)));
    let unit = &string.eigen().expect("an eigenproblem").unit;
    assert_eq!(unit.dimension, spanwise::unit::Unit::parse("1/s^2", true).expect("a unit").dimension);
    let column = sheet(
        "[\"0 m\", \"3 m\"]",
        "w = \"mm\"",
        "(7 kN*m^2*w'')'' + k*w'' = 0",
        "[\"w(0 m) = 0\", \"w''(0 m) = 0\", \"w(3 m) = 0\", \"w''(3 m) = 0\"]",
        "lowest = 2",
    )
    .replace("7 kN*m^2*", "7000 [N*m^2]*");
    holds(&column, &[1.0, 2.0].map(|n: f64| 7000.0 * (n * pi / 3.0).powi(2)));
}

#[test]
fn cantilever_report_normalise_and_nodes() {
    // Wave numbers of a cantilever: roots of cosh(b) cos(b) = -1 (Blevins, Formulas for Natural Frequency, table 8-1,
    // and refined here by Newton's method).
    let root = |mut b: f64| {
        for _ in 0..20 {
            b -= (b.cosh() * b.cos() + 1.0) / (b.sinh() * b.cos() - b.cosh() * b.sin());
        }
        b
    };
    let exact = [1.875, 4.694, 7.855].map(|b| root(b).powi(4));
    let text = sheet(
        "[\"0\", \"1\"]",
        "w = \"1\"",
        "(2*w'')'' = 2*k*w",
        "[\"w(0) = 0\", \"w'(0) = 0\", \"w''(1) = 0\", \"(2*w'')'(1) = 0\"]",
        "lowest = 3\nnormalise = \"integral(w^2) = 1\"\n[report]\ntip = \"abs(w(1))\"\nwave = \"k^(1/4)\"",
    )
    .replace("(2*w'')'(1) = 0", "w'''(1) = 0");
    let (sheet, spectrum) = holds(&text, &exact);
    for (mode, exact) in spectrum.modes.iter().zip(exact) {
        let asked = sheet.evaluate(&mode.solution);
        let [tip, wave] = [0, 1].map(|k| asked[k].printed().expect("a value"));
        // With integral(w^2) = 1 the free end of every mode deflects by 2.
        assert!((tip.value - 2.0).abs() <= tip.error && tip.error < 1e-9, "{tip:?}");
        assert!((wave.value - exact.powf(0.25)).abs() <= wave.error + 1e-15 * wave.value, "{wave:?}");
    }
    // Node of the second mode at 0.7834 (Blevins, same table).
    let [nodes, _] = sheet.nodes_and_antinodes(&spectrum.modes[1]);
    assert!(nodes.len() == 1 && (nodes[0] - 0.7834).abs() < 1e-4, "{nodes:?}");
    let outcome = modes::solved(
        &sheet,
        sheet.eigen().expect("an eigenproblem"),
        &spectrum,
        Origin { source: "cantilever", text: &text },
    );
    let document: serde_json::Value = serde_json::from_str(&json::document(&outcome, "", "0", false)).expect("JSON");
    assert_eq!(document["status"], "solved");
    assert_eq!(document["count_checked"], true);
    let second = &document["modes"][1];
    assert_eq!((&second["index"], &second["mode"]), (&1.into(), &2.into()));
    assert!((second["parameter"]["value"].as_f64().expect("a number") - exact[1]).abs() < 1e-8);
    assert_eq!(second["parameter"]["imaginary"], 0.0);
    assert_eq!(second["quantities"][0]["name"], "tip");
}

#[test]
fn no_false_modes_at_singular_ends() {
    // Sphere: u = sin(n pi r)/r. Cone beam, tip free: Kirchhoff 1879, first value 76.03 (5.315^2 omega units), here with
    // the digits of the expanded form solved apart: see the ratio test below.
    let pi = std::f64::consts::PI;
    let sphere =
        sheet("[\"0\", \"1\"]", "u = \"1\"", "(x^2*u')' + k*x^2*u = 0", "[\"u'(0) = 0\", \"u(1) = 0\"]", "lowest = 4");
    holds(&sphere, &[1.0, 2.0, 3.0, 4.0].map(|n: f64| (n * pi).powi(2)));
    let cone = |equation: &str, tip: &str| {
        let conditions = format!("[{tip}, \"w(1) = 0\", \"w'(1) = 0\"]");
        let text = sheet("[\"0\", \"1\"]", "w = \"1\"", equation, &conditions, "lowest = 2");
        let sheet = read(&text);
        sheet
            .solve_modes(None)
            .unwrap_or_else(|e| panic!("{e}"))
            .modes
            .iter()
            .map(|m| (m.value.re, m.error))
            .collect::<Vec<_>>()
    };
    let flux = cone("(x^4*w'')'' = k*x^2*w", "\"regular(w, 0)\"");
    // 76.03 is (8.7195)^2: Kirchhoff's cone, omega = 8.7195 sqrt(E I/(rho A L^4)) at the base.
    assert!((flux[0].0.sqrt() - 8.719).abs() < 1e-3, "{flux:?}");
    let expanded = cone("x^2*w'''' + 8*x*w''' + 12*w'' = k*w", "\"regular(w, 0)\"");
    for (a, b) in flux.iter().zip(&expanded) {
        assert!((a.0 - b.0).abs() <= a.1 + b.1, "{flux:?} {expanded:?}");
    }
}

#[test]
fn complex_eigenvalues_and_formulas_of_them() {
    // String with a damper at its end: tanh(s) = -1/c, s = -artanh(1/c) + i n pi for c > 1.
    let text = sheet(
        "[\"0\", \"1\"]",
        "w = \"1\"",
        "w'' = k^2*w",
        "[\"w(0) = 0\", \"w'(1) + 3.2*k*w(1) = 0\"]",
        "pairs = 3\n[report]\ndecay = \"-re(k)\"\nfrequency = \"im(k)/(2*pi)\"",
    );
    let sheet = read(&text);
    let spectrum = sheet.solve_modes(None).unwrap_or_else(|e| panic!("{e}"));
    let decay = (1.0f64 / 3.2).atanh();
    for mode in &spectrum.modes {
        let n = (mode.value.im / std::f64::consts::PI).round();
        let off = (mode.value.re + decay).hypot(mode.value.im - n * std::f64::consts::PI);
        assert!(off <= mode.error && mode.error < 1e-9, "{mode:?}");
        if mode.complex {
            let numbers = sheet.complex_numbers(mode);
            let (value, bar) = numbers[1].expect("a formula of the eigenvalue");
            assert!((value.re - n / 2.0).abs() <= bar && value.im == 0.0, "{value} {bar}");
        }
    }
}

#[test]
fn faults_are_named_with_their_place() {
    let faults = |text: &str| sheet::read(text).err().unwrap_or_default();
    let base = sheet("[\"0\", \"1\"]", "u = \"1\"", "u'' + k*u = 0", "[\"u(0) = 0\", \"u(1) = 0\"]", "lowest = 2");
    assert!(faults(&base).is_empty());
    let cases = [
        ("u'' + k*u = 0", "u'' + u = 0", "stands in no equation and no condition", 10),
        ("u(1) = 0", "u(1) = 0.3", "a term without any unknown", 8),
        ("u'' + k*u = 0", "u'' + k*u = 2*x", "a term without any unknown", 6),
        ("lowest = 2", "lowest = 2\nnear = 9.4\ncount = 2", "both `lowest` and `near`", 12),
        ("lowest = 2", "lowst = 2", "`lowst` is not an option of [eigen]", 11),
        ("lowest = 2", "", "does not say which eigenvalues are wanted", 9),
        ("[\"0\", \"1\"]", "[\"0\", \"inf\"]", "on an infinite span", 10),
        ("lowest = 2", "near = 9.4", "how many eigenvalues", 9),
        ("\"u(1) = 0\"", "\"u(1) = 0\", \"u'(1) = 0\"", "2 conditions are needed", 7),
    ];
    for (from, to, message, line) in cases {
        assert!(base.contains(from), "{from}");
        let found = faults(&base.replace(from, to));
        let hit = found.iter().find(|f| f.message.contains(message));
        let hit = hit.unwrap_or_else(|| panic!("{message}: {found:?}"));
        assert!(hit.line.abs_diff(line) <= 1, "{hit:?}");
    }
}

#[test]
fn pump_shaft_example() {
    let text = include_str!("../examples/sheets/pump-shaft-modes.toml");
    let sheet = read(text);
    let spectrum = sheet.solve_modes(None).unwrap_or_else(|e| panic!("{e}"));
    assert_eq!(spectrum.modes.len(), 3);
    assert_eq!(spectrum.count.checked, Some(true));
    // Rayleigh's quotient of each mode: potential against kinetic energy, impeller included.
    let energy = text.replace(
        "[report]",
        "[report]\nquotient = \"integral(M^2/(E*I))/(integral(rho*A*y^2) + m_i*y(L)^2 + J*y'(L)^2)/lambda\"",
    );
    let sheet = read(&energy);
    for mode in &sheet.solve_modes(None).unwrap_or_else(|e| panic!("{e}")).modes {
        let one = sheet.evaluate(&mode.solution)[0].printed().expect("a value");
        assert!((one.value - 1.0).abs() <= one.error && one.error < 1e-8, "{one:?}");
        let tip = mode.solution.value(0, 0, 1.85, spanwise::model::Side::Left).expect("a value");
        assert!((tip.value.abs() - 1e-3).abs() <= tip.error + 1e-18, "{tip:?}");
    }
}
