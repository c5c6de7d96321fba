//! Load cases and envelopes.

use spanwise::record::build::{self, Origin};
use spanwise::record::outcome::{Outcome, Status};
use spanwise::record::{cases, envelope, json, text};
use spanwise::sheet;

const BEAM: &str = include_str!("../examples/sheets/pump-gallery-beam.toml");

fn solved(text: &str) -> Outcome {
    let sheet = sheet::read(text).unwrap_or_else(|faults| panic!("{faults:#?}"));
    let origin = Origin { source: "beam.toml", text };
    let base = sheet.solve(None).expect("a regular problem");
    let answers: Vec<cases::Answer<'_>> = sheet.cases().iter().map(|case| (case, case.sheet.solve(None))).collect();
    let mut outcome = build::solved(&sheet, &base, origin, false);
    cases::join(&mut outcome, &sheet, Some(&base), &answers, origin);
    outcome
}

/// Moment over the middle support by the theorem of three moments (Clapeyron), in kN m: uniform loads a and b on spans of
/// 4.2 m and 3.4 m, P at the middle of the first.
fn over_the_support(a: f64, b: f64, p: f64) -> f64 {
    let (l, r) = (4.2f64, 3.4f64);
    -(a * l.powi(3) / 4.0 + b * r.powi(3) / 4.0 + 3.0 * p * l * l / 8.0) / (2.0 * (l + r))
}

#[test]
fn each_case_is_the_sheet_with_its_data() {
    let outcome = solved(BEAM);
    let exact = [
        over_the_support(1.9, 1.9, 0.0),
        over_the_support(6.9, 1.9, 0.0),
        over_the_support(1.9, 6.9, 0.0),
        over_the_support(6.9, 6.9, 0.0),
        over_the_support(1.9, 6.9, 12.0),
    ];
    let names: Vec<&str> = outcome.cases.iter().map(|c| c.name.as_str()).collect();
    assert_eq!(names, ["left", "right", "both", "pump"]);
    let all = std::iter::once(&outcome.quantities).chain(outcome.cases.iter().map(|c| &c.quantities));
    for (quantities, exact) in all.zip(exact) {
        let moment = &quantities[0];
        let off = (moment.value.expect("a number") - exact).abs();
        assert!(off <= moment.error && moment.error <= 1e-10 * exact.abs(), "{moment:?} {exact}");
    }
    let shown = text::results(&outcome);
    assert!(shown.contains("case pump: P = 12 kN, p2 = 5 kN/m"), "{shown}");
}

#[test]
fn the_envelope_holds_every_case_and_names_the_governing_one() {
    let outcome = solved(BEAM);
    let m = outcome.envelopes.iter().find(|e| e.name == "M").expect("M is drawn");
    let (low, high) = (m.low.as_ref().expect("a smallest"), m.high.as_ref().expect("a largest"));
    // The smallest moment stands over the support under full traffic.
    assert_eq!((low.case.as_str(), low.x), ("both", 4.2));
    assert!((low.value - over_the_support(6.9, 6.9, 0.0)).abs() <= low.error);
    let most = |q: &spanwise::record::outcome::Quantity| q.value.expect("a number");
    let largest = outcome.cases.iter().map(|c| most(&c.quantities[1])).fold(most(&outcome.quantities[1]), f64::max);
    assert!((high.value - largest).abs() <= high.error, "{high:?} {largest}");
    assert!(m.rows.iter().all(|r| r.low.0 <= r.high.0));
    assert!(m.rows.iter().any(|r| (r.high.0 - high.value).abs() <= 1e-12 && m.cases[r.high.1] == high.case));
    // By hand at a quarter of the left span: M = R x - g x^2/2 in each case.
    let at = 1.05;
    let by_hand = |a: f64, b: f64, p: f64| {
        let support = over_the_support(a, b, p);
        (a * 4.2 / 2.0 + p / 2.0 + support / 4.2) * at - a * at * at / 2.0
    };
    let cases = [(1.9, 1.9, 0.0), (6.9, 1.9, 0.0), (1.9, 6.9, 0.0), (6.9, 6.9, 0.0), (1.9, 6.9, 12.0)];
    let values = cases.map(|(a, b, p)| by_hand(a, b, p));
    let row = m.rows.iter().min_by(|p, q| (p.x - at).abs().total_cmp(&(q.x - at).abs())).expect("rows");
    let near = |found: f64, exact: f64| (found - exact).abs() < 0.2;
    assert!(near(row.low.0, values.iter().copied().fold(f64::INFINITY, f64::min)), "{row:?} {values:?}");
    assert!(near(row.high.0, values.iter().copied().fold(f64::NEG_INFINITY, f64::max)), "{row:?} {values:?}");
    let table = envelope::table(&outcome);
    assert!(table.starts_with("curve,unit,x [m],smallest,smallest in case,largest,largest in case\nw,mm,"));
    assert!(table.lines().all(|l| l.split(',').count() == 7));
}

#[test]
fn the_json_holds_cases_and_envelopes() {
    let outcome = solved(BEAM);
    let document: serde_json::Value = serde_json::from_str(&json::document(&outcome, "", "", true)).expect("JSON");
    assert_eq!(document["status"], "solved");
    assert_eq!(document["cases"][3]["name"], "pump");
    assert_eq!(document["cases"][3]["changed"][0]["name"], "P");
    assert!(document["cases"][3]["quantities"][0]["value"].as_f64().expect("a number") < -11.0);
    assert_eq!(document["envelopes"][1]["smallest"]["case"], "both");
    let files = spanwise::record::files(&outcome, "", "");
    for name in ["envelope.csv", "plots/envelope-02-M.svg"] {
        assert!(files.iter().any(|(file, content)| file == name && !content.is_empty()), "{name}");
    }
}

#[test]
fn a_case_that_cannot_be_solved_spoils_the_status_but_not_the_others() {
    let text = r#"
[given]
k = "0 1/m^2"
[span]
x = ["0 m", "1 m"]
[unknowns]
u = "m"
[equations]
e = "u'' + k*u = 0"
[conditions]
a = ["u(0 m) = 0", "u(1 m) = 1 m"]
[report]
middle = "u(0.5 m)"
[cases.resonant]
k = "pi^2/(1 m^2)"
[cases.longer]
k = "1 1/m^2"
"#;
    let outcome = solved(text);
    assert_eq!(outcome.status, Status::Inaccurate);
    assert_eq!((outcome.cases[0].status, outcome.cases[1].status), (Status::Failed, Status::Solved));
    let value = outcome.cases[1].quantities[0].value.expect("a number");
    assert!((value - 0.5f64.sin() / 1f64.sin()).abs() <= outcome.cases[1].quantities[0].error);
    assert!(outcome.warnings.iter().any(|w| w.contains("`resonant` is not solved")), "{:?}", outcome.warnings);
    assert_eq!(outcome.envelopes[0].cases, ["base", "longer"]);
}

#[test]
fn faults_of_cases_are_named() {
    let with = |section: &str| {
        let text = format!("{BEAM}\n{section}");
        let faults = sheet::read(&text).expect_err(section);
        (faults[0].message.clone(), faults[0].hint.clone().unwrap_or_default())
    };
    let (message, hint) = with("[cases.wind]\nP3 = '2 kN'");
    assert_eq!(message, "`P3` is not among the data of this sheet");
    assert!(hint.contains("did you mean"), "{hint}");
    assert!(with("[cases.wind]\nP = '2 kN/m'").0.starts_with("case `wind`: "));
    assert!(with("[cases.base]\nP = '2 kN'").0.contains("`base` is the sheet as it stands"));
    assert!(with("[cases.wind]").0.contains("changes nothing"));
    assert!(with("[cases.wind]\nP = 'Q'").0.contains("`Q` is not defined"));
}
