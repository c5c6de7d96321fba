//! Equations that are singular at an end of the span, as users write them: fluxes through the centre of a disc, rod or
//! sphere, linear and not, with data that step, and what regularity demands there.

use spanwise::sheet::{self, Sheet};

fn read(text: &str) -> Sheet {
    sheet::read(text).unwrap_or_else(|faults| panic!("{faults:?}\n{text}"))
}

/// Every asked number within its bar of what is expected, and the bar at most `limit` of it.
fn check(text: &str, expected: &[f64], limit: f64) {
    let sheet = read(text);
    let solution = sheet.solve(None).unwrap_or_else(|e| panic!("{e}\n{text}"));
    let found = sheet.evaluate(&solution);
    assert_eq!(found.len(), expected.len());
    for (asked, exact) in found.iter().zip(expected) {
        let value = asked.value.as_ref().unwrap_or_else(|e| panic!("{}: {e}", asked.label));
        let known = 4.0 * f64::EPSILON * exact.abs();
        assert!((value.value - exact).abs() <= value.error + known, "{}: {value:?} against {exact}", asked.label);
        assert!(value.error <= limit * exact.abs(), "{}: {value:?}", asked.label);
    }
}

/// A heated rod, T = Ts + Q (R^2 - r^2)/(4 k), in every spelling of equation and regularity.
#[test]
fn every_spelling_of_a_heated_rod() {
    let equations =
        ["(r*k*T')' = -r*Q", "(1/r)*(r*k*T')' = -Q", "q' = r*Q", "k*(T'' + T'/r) = -Q", "k*r*T'' + k*T' = -r*Q"];
    let conditions = ["T'(0 mm) = 0", "q(0 mm) = 0", "regular(T, 0 mm)"];
    for equation in equations {
        for condition in conditions {
            let text = format!(
                r#"
                [given]
                R = "23.85 mm"
                k = "2.1 W/(m K)"
                Q = "1.3e6 W/m^3"
                q = "-r*k*T'"
                [span]
                r = ["0 mm", "R"]
                [unknowns]
                T = "degC"
                [equations]
                heat = "{equation}"
                [conditions]
                centre = "{condition}"
                skin = "T(R) = 41 degC"
                [report]
                centre = "T(0 mm) in K"
                middle = "T(R/3) in K"
                "loss per length" = "2*pi*q(R) in W/m"
            "#
            );
            let (radius, k, heat) = (0.02385f64, 2.1, 1.3e6);
            let at = |r: f64| 314.15 + heat * (radius * radius - r * r) / (4.0 * k);
            check(&text, &[at(0.0), at(radius / 3.0), std::f64::consts::PI * radius * radius * heat], 1e-12);
        }
    }
}

/// A fuel-like sphere of two materials: the flux is continuous where the conductivity steps, though it is not carried.
#[test]
fn data_that_step_in_a_sphere() {
    let text = |jump: &str| {
        format!(
            r#"
        [given]
        a = "8 mm"
        R = "20 mm"
        k = {{ "0 mm .. a" = "0.5 W/(m K)", else = "3.7 W/(m K)" }}
        Q = {{ "0 mm .. a" = "2e6 W/m^3", else = "0" }}
        q = "-r^2*k*T'"
        [span]
        r = ["0 mm", "R"]
        [unknowns]
        T = "degC"
        [equations]
        heat = "q' = r^2*Q"
        [conditions]
        centre = "q(0 mm) = 0"
        skin = "T(R) = 20 degC"
        {jump}
        [report]
        centre = "T(0 mm) in K"
        interface = "T(a) in K"
        flow = "4*pi*q(R) in W"
    "#
        )
    };
    let (a, radius, heat) = (0.008f64, 0.02f64, 2e6);
    let power = heat * a.powi(3) / 3.0;
    let interface = 293.15 + power / 3.7 * (1.0 / a - 1.0 / radius);
    let centre = interface + heat * a * a / (6.0 * 0.5);
    check(&text(""), &[centre, interface, 4.0 * std::f64::consts::PI * power], 1e-11);
    // A heated film at the interface adds what it gives.
    let film = 1.7e-3;
    let interface = 293.15 + (power + film) / 3.7 * (1.0 / a - 1.0 / radius);
    let flow = 4.0 * std::f64::consts::PI * (power + film);
    let jump = text("film = \"jump(q, a) = 1.7 mW\"");
    check(&jump, &[interface + heat * a * a / 3.0, interface, flow], 1e-11);
}

/// First-order reaction in a sphere (Thiele modulus phi): c = R sinh(phi r/R)/(r sinh phi); and Lane-Emden's equation of
/// index 5, y = 1/sqrt(1 + x^2/3) (Chandrasekhar, An Introduction to the Study of Stellar Structure, 1939, ch. IV).
#[test]
fn reaction_in_a_sphere_and_lane_emden() {
    let sphere = r#"
        [given]
        phi = "4.385"
        [span]
        r = ["0", "1"]
        [unknowns]
        c = "1"
        [equations]
        balance = "(r^2*c')' = phi^2*r^2*c"
        [conditions]
        centre = "regular(c, 0)"
        surface = "c(1) = 1"
        [report]
        centre = "c(0)"
        effectiveness = "3*c'(1)/phi^2"
    "#;
    let phi = 4.385f64;
    check(sphere, &[phi / phi.sinh(), 3.0 / phi * (1.0 / phi.tanh() - 1.0 / phi)], 1e-12);
    let star = r#"
        [span]
        x = ["0", "3"]
        [unknowns]
        y = "1"
        [equations]
        star = "(x^2*y')' = -x^2*y^5"
        [conditions]
        centre = "CENTRE"
        edge = "EDGE"
        [report]
        one = "y(1)"
        end = "y(3)"
    "#;
    let exact = [1.0 / (4.0f64 / 3.0).sqrt(), 0.5];
    // As a boundary problem, and as an initial-value problem from the singular centre.
    check(&star.replace("CENTRE", "y'(0) = 0").replace("EDGE", "y'(3) = -0.125"), &exact, 1e-11);
    check(&star.replace("CENTRE", "regular(y, 0)").replace("EDGE", "y(0) = 1"), &exact, 1e-11);
}

/// Both ends singular: ((1 - x^2) u')' - 6 u = -6 x^4 + ... with the solution u = x^2 (1 - x^2)... made by substitution.
#[test]
fn both_ends_singular() {
    // u = x^4: ((1 - x^2) 4 x^3)' = 12 x^2 - 20 x^4.
    let text = r#"
        [span]
        x = ["-1", "1"]
        [unknowns]
        u = "1"
        [equations]
        legendre = "((1 - x^2)*u')' - 6*u = 12*x^2 - 26*x^4"
        [conditions]
        left = "regular(u, -1)"
        right = "regular(u, 1)"
        [report]
        left = "u(-1)"
        inside = "u(0.385)"
        right = "u'(1)"
    "#;
    check(text, &[1.0, 0.385f64.powi(4), 4.0], 1e-11);
}

/// A circular plate under uniform load, clamped: w = q (R^2 - r^2)^2/(64 D) (Timoshenko & Woinowsky-Krieger, Theory of
/// Plates and Shells, eq. 62; verified by substitution). Two relations at the centre.
#[test]
fn a_clamped_plate() {
    let text = r#"
        [given]
        R = "0.7 m"
        D = "19 kN m"
        p = "5 kPa"
        lap = "(r*w')'/r"
        [span]
        r = ["0 m", "R"]
        [unknowns]
        w = "mm"
        [equations]
        plate = "D*(r*lap')'/r = p"
        [conditions]
        centre = "regular(w, 0 m)"
        edge = ["w(R) = 0", "w'(R) = 0"]
        [report]
        centre = "w(0 m) in m"
        half = "w(R/2) in m"
    "#;
    let (r, d, p) = (0.7f64, 19e3, 5e3);
    check(text, &[p * r.powi(4) / (64.0 * d), p * (0.75 * r * r).powi(2) / (64.0 * d)], 1e-11);
}
