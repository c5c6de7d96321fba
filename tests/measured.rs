//! Measured data and constants of nature in sheets, against closed forms.

mod common;

use spanwise::formula::table::{Table, Through};
use spanwise::sheet::{self, DataFile, Reading, Sheet};

/// Conductivity of an insulation: invented, steep enough to matter.
const T: [f64; 6] = [20.0, 100.0, 180.0, 300.0, 450.0, 600.0];
const K: [f64; 6] = [0.041, 0.049, 0.062, 0.091, 0.118, 0.12];

fn wall(through: &str, hot: &str) -> String {
    let points: Vec<String> = T.iter().zip(K).map(|(t, k)| format!("[\"{t} degC\", \"{k} W/(m K)\"]")).collect();
    format!(
        r#"
[given]
L = "0.2385 m"
k = {{ against = "T", points = [{}], through = "{through}" }}
q = "-k*T'"
[span]
x = ["0 m", "L"]
[unknowns]
T = {{ unit = "degC", guess = "300 degC" }}
[equations]
conduction = "q' = 0"
[conditions]
hot = "T(0 m) = {hot}"
cold = "T(L) = 20 degC"
[report]
"heat flux" = "q(0 m) in W/m^2"
"conductivity at the hot side" = "k(0 m) in W/(m K)"
"#,
        points.join(", ")
    )
}

fn read(text: &str) -> Sheet {
    sheet::read(text).unwrap_or_else(|faults| panic!("{faults:#?}"))
}

/// Integral of a table: Simpson's rule is exact on cubic pieces.
fn integral(table: &Table, from: f64, to: f64) -> f64 {
    let mut ends: Vec<f64> = table.points().iter().copied().filter(|x| *x > from && *x < to).collect();
    ends.insert(0, from);
    ends.push(to);
    let simpson =
        |a: f64, b: f64| (b - a) / 6.0 * (table.value(0, a) + 4.0 * table.value(0, 0.5 * (a + b)) + table.value(0, b));
    ends.windows(2).map(|p| simpson(p[0], p[1])).sum()
}

#[test]
fn conduction_with_measured_conductivity_meets_kirchhoffs_transform() {
    for (name, through) in [("smooth", Through::Smooth), ("straight", Through::Straight)] {
        let sheet = read(&wall(name, "538.5 degC"));
        assert!(!sheet.statement.linear);
        let solution = sheet.solve(None).unwrap_or_else(|e| panic!("{name}: {}", sheet.reason(&e)));
        let numbers = sheet.evaluate(&solution);
        let table = Table::new(&T, &K, through).expect("ascending");
        let exact = [integral(&table, 20.0, 538.5) / 0.2385, table.value(0, 538.5)];
        for (asked, exact) in numbers.iter().zip(exact) {
            let found = asked.printed().unwrap_or_else(|| panic!("{name}: {asked:?}"));
            let off = (found.value - exact).abs();
            assert!(off <= found.error + 4e-16 * exact, "{name} {}: {} off {off:e}", asked.label, found.error);
            assert!(found.error <= 1e-9 * exact, "{name}: bar {:e}", found.error);
        }
    }
}

#[test]
fn beyond_the_last_point_nothing_is_made_up() {
    let sheet = read(&wall("smooth", "700 degC"));
    let error = sheet.solve(None).expect_err("600 degC is the last point");
    let reason = sheet.reason(&error);
    assert!(
        reason.contains("needs `k` at T = 700 degC") && reason.contains("from 20 degC to 600 degC only"),
        "{reason}"
    );
}

#[test]
fn data_are_needed_only_where_they_are_used() {
    // Of two layers the hot one alone is measured beyond 250 degC.
    let text = |hot: &str, report: &str| {
        format!(
            r#"
[given]
ka = {{ against = "T", points = [["200 degC", "1.2 W/(m K)"], ["600 degC", "1.4 W/(m K)"]] }}
kb = {{ against = "T", points = [["0 degC", "0.1 W/(m K)"], ["{hot}", "0.15 W/(m K)"]] }}
k = {{ "0 m .. 0.1 m" = "ka", else = "kb" }}
q = "-k*T'"
[span]
x = ["0 m", "0.15 m"]
[unknowns]
T = {{ unit = "degC", guess = "300 degC" }}
[equations]
e = "q' = 0"
[conditions]
a = "q(0 m) = 500 W/m^2"
b = "T(0.15 m) = 30 degC"
[report]
"between" = "T(0.1 m) in degC"
"asked" = "{report}"
"#
        )
    };
    let solved = |hot: &str, report: &str| {
        let sheet = read(&text(hot, report));
        sheet
            .solve(None)
            .map(|s| sheet.evaluate(&s)[0].printed().expect("a number").value)
            .map_err(|e| sheet.reason(&e))
    };
    // T between the layers: integral of 0.1 + 0.05 T/250 from 30 to T = 500*0.05.
    let between = solved("250 degC", "ka(0.02 m) in W/(m K)").expect("each is measured where it is used");
    let integral = |t: f64| 0.1 * (t - 30.0) + 1e-4 * (t * t - 900.0);
    assert!((integral(between) - 25.0).abs() < 1e-9, "{between}");
    assert!(between > 200.0 && between < 250.0);
    let reason = solved("190 degC", "ka(0.02 m) in W/(m K)").expect_err("the cold layer gets hotter than that");
    assert!(reason.contains("needs `kb` at T = 2"), "{reason}");
    let reason = solved("250 degC", "max(kb) in W/(m K)").expect_err("asked where it is not measured");
    assert!(reason.contains("needs `kb`"), "{reason}");
    let reason = solved("250 degC", "ka(0.15 m) in W/(m K)").expect_err("asked where it is not measured");
    assert!(reason.contains("needs `ka` at T = 30 degC"), "{reason}");
}

const SOIL: &str = r#"
[given]
L = "4 m"
q = "50 kPa"
E = { against = "z", points = [["0 m", "5 MPa"], ["1.2 m", "8 MPa"], ["2.5 m", "8 MPa"], ["LAST", "14 MPa"]], through = "straight" }
[span]
z = ["0 m", "L"]
[unknowns]
u = "mm"
[equations]
column = "(E*u')' = 0"
[conditions]
top = "E(0 m)*u'(0 m) = -q"
base = "u(L) = 0"
[report]
settlement = "u(0 m) in mm"
"strain above the first bend" = "u'(1.2 m)"
"slope of E above" = "E'(1.2 m-) in MPa/m"
"slope of E below" = "E'(1.2 m+) in MPa/m"
"#;

#[test]
fn along_the_coordinate_the_points_are_breaks() {
    let sheet = read(&SOIL.replace("LAST", "4 m"));
    assert!(sheet.statement.linear);
    let solution = sheet.solve(None).expect("a regular problem");
    // u' = -q/E: settlement = q integral(1/E).
    let piece = |h: f64, a: f64, b: f64| if a == b { h / a } else { h * (b / a).ln() / (b - a) };
    let settlement = 50.0 * (piece(1.2, 5.0, 8.0) + piece(1.3, 8.0, 8.0) + piece(1.5, 8.0, 14.0));
    let exact = [settlement, -0.05 / 8.0, 3.0 / 1.2, 0.0];
    for (asked, exact) in sheet.evaluate(&solution).iter().zip(exact) {
        let found = asked.printed().unwrap_or_else(|| panic!("{asked:?}"));
        assert!((found.value - exact).abs() <= found.error + 2e-16 * exact.abs(), "{}: {found:?} {exact}", asked.label);
        assert!(found.error <= 1e-10 * settlement);
    }
}

#[test]
fn data_that_end_before_the_span_are_refused() {
    let faults = sheet::read(&SOIL.replace("LAST", "3.5 m")).expect_err("no value from 3.5 m to 4 m");
    assert_eq!(faults[0].message, "`E` has no value from 3.5 m to 4 m");
    // Beyond the span they may go on.
    assert!(sheet::read(&SOIL.replace("LAST", "5 m")).is_ok());
}

#[test]
fn a_file_gives_the_same_as_points() {
    let text = SOIL.replace("LAST", "4 m");
    let from = text.find("E = {").expect("there");
    let to = text[from..].find('\n').expect("there") + from;
    let filed =
        format!("{}E = {{ against = \"z\", file = \"e.csv\", through = \"straight\" }}{}", &text[..from], &text[to..]);
    assert_eq!(sheet::files(&filed), ["e.csv"]);
    let content = "z [m],E [MPa]\n0,5\n1.2,8\n2.5,8\n4,14\n".to_owned();
    let files = [DataFile { name: "e.csv".into(), content: Ok(content) }];
    let reading = Reading { files: &files, ..Reading::default() };
    let other = sheet::read_with(&filed, &reading).unwrap_or_else(|faults| panic!("{faults:#?}"));
    let value = |sheet: &Sheet| {
        let solution = sheet.solve(None).expect("a regular problem");
        sheet.evaluate(&solution)[0].printed().expect("a number").value
    };
    assert_eq!(value(&other), value(&read(&text)));
    let missing = sheet::read(&filed).expect_err("no file handed over");
    assert!(missing[0].message.contains("e.csv") && missing[0].code == "data file", "{missing:?}");
    let bad = [DataFile { name: "e.csv".into(), content: Ok("z [m],E [MPa]\n0,5\n1;2,8\n".into()) }];
    let faults = sheet::read_with(&filed, &Reading { files: &bad, ..Reading::default() }).expect_err("a slip");
    assert!(faults[0].message.contains("line 3"), "{faults:?}");
}

#[test]
fn constants_of_nature_by_name_and_a_sheets_own_name_wins() {
    let text = |given: &str| {
        format!(
            r#"
[given]
{given}
[span]
x = ["0 m", "1 m"]
[unknowns]
u = "m"
[equations]
e = "u' = 0"
[conditions]
c = "u(0 m) = 1 m"
[report]
a = "g_n in m/s^2"
b = "sigma_SB*(300 K)^4 in W/m^2"
c = "R_gas*(300 K)/p_atm in L/mol"
"#
        )
    };
    let numbers = |text: &str| -> Vec<f64> {
        let sheet = read(text);
        let solution = sheet.solve(None).expect("a regular problem");
        sheet.evaluate(&solution).iter().map(|a| a.printed().expect("a number").value).collect()
    };
    let own = numbers(&text(""));
    assert_eq!(own[0], 9.80665);
    assert!((own[1] - 459.300_327_953_938_8).abs() < 1e-11, "{own:?}");
    // 8.31446261815324*300/101325 L/mol, by hand with many digits.
    assert!((own[2] - 24.617_209_824_287_9).abs() < 1e-11, "{own:?}");
    assert_eq!(numbers(&text("g_n = \"9.81 m/s^2\""))[0], 9.81);
    let sheet = read(&text(""));
    assert!(sheet.statement.data.iter().any(|d| d.name == "sigma_SB" && d.remark.contains("Stefan-Boltzmann")));
}
