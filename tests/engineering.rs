//! The example sheets against reference values.
//!
//! `tests/data/engineering.csv` holds closed forms to 20 digits (40-digit evaluation; each solved independently by
//! multiple shooting in double precision; sources: Roark, Timoshenko, Hetenyi, Incropera & DeWitt, Levenspiel and
//! others, remembered, every formula derived anew).

mod common;

use common::sheets;
use spanwise::evidence::nodal::nodal;
use spanwise::sheet;
use std::collections::BTreeMap;

struct Row {
    label: String,
    value: f64,
    place: bool,
    temperature: bool,
}

fn reference() -> BTreeMap<String, Vec<Row>> {
    let mut cases: BTreeMap<String, Vec<Row>> = BTreeMap::new();
    for line in include_str!("data/engineering.csv").lines().skip(1) {
        let (sheet, rest) = line.split_once(",\"").expect("a label in quotes");
        let (label, rest) = rest.split_once("\",").expect("a label in quotes");
        let parts: Vec<&str> = rest.split(',').collect();
        cases.entry(sheet.to_owned()).or_default().push(Row {
            label: label.to_owned(),
            value: parts[0].parse().expect("a number"),
            place: parts[2] == "1",
            temperature: parts[1] == "degC",
        });
    }
    cases
}

fn read(name: &str) -> sheet::Sheet {
    let path = format!("examples/sheets/{name}.toml");
    let text = std::fs::read_to_string(&path).expect("the sheet is there");
    sheets::read(&text)
}

#[test]
fn every_asked_number_is_right_and_within_its_bar() {
    let mut ratios = Vec::new();
    let mut faults = Vec::new();
    for (name, rows) in reference() {
        let sheet = read(&name);
        assert_eq!(sheet.warnings, Vec::<String>::new(), "{name}");
        let solution = sheet.solve(None).unwrap_or_else(|e| panic!("{name}: {e}"));
        let asked = sheet.evaluate(&solution);
        assert_eq!(asked.len(), rows.len(), "{name}");
        // Temperatures are compared against the largest temperature of the case, not against kelvin.
        let temperatures = rows.iter().filter(|r| r.temperature).map(|r| r.value);
        let difference = temperatures.fold(0.0, f64::max);
        for (row, asked) in rows.iter().zip(&asked) {
            assert_eq!(row.label, asked.label);
            let Some(got) = asked.printed() else {
                faults.push(format!("{name}: {}: {:?}", row.label, asked.value));
                continue;
            };
            let error = (got.value - row.value).abs();
            let size = if row.temperature { difference } else { row.value.abs() };
            let limit = if row.place { 1e-8 } else { 1e-10 };
            if error > limit * size || error > got.error {
                faults.push(format!(
                    "{name}: {}: {} for {}, error {error:e}, bar {:e}",
                    row.label, got.value, row.value, got.error
                ));
            }
            ratios.push(got.error / error.max(0.5 * f64::EPSILON * row.value.abs()).max(f64::MIN_POSITIVE));
        }
    }
    assert!(faults.is_empty(), "{}", faults.join("\n"));
    ratios.sort_by(f64::total_cmp);
    let median = ratios[ratios.len() / 2];
    println!("{} numbers, median over-estimate {median:.1}, largest {:.0}", ratios.len(), ratios[ratios.len() - 1]);
    assert!(median < 100.0, "median over-estimate {median}");
}

#[test]
fn second_route_agrees_on_every_linear_sheet() {
    for entry in std::fs::read_dir("examples/sheets").expect("a folder of sheets").flatten() {
        let path = entry.path();
        let name = path.file_stem().and_then(|s| s.to_str()).expect("a name").to_owned();
        let sheet = read(&name);
        if !sheet.statement.linear {
            continue;
        }
        let solution = sheet.solve(None).unwrap_or_else(|e| panic!("{name}: {e}"));
        let field = nodal(&sheet.model(), &solution.base().mesh).unwrap_or_else(|e| panic!("{name}: {e}"));
        for (asked, other) in sheet.evaluate(&solution).iter().zip(sheet.plain_numbers(&field)) {
            let (value, other) = (asked.value.as_ref().expect("a value").value, other.expect("a value"));
            // The differentiation matrices lose digits; places lose twice as many.
            let limit = 1e-7 * asked.scale;
            assert!((value - other).abs() <= limit, "{name}: {}: {value} and {other}", asked.label);
        }
    }
}

/// 1.000000001 - 1 keeps seven digits only: the answer is that uncertain, and the bar must say so, without asking for more
/// than the data deserve.
#[test]
fn data_that_cancel_widen_the_bar() {
    let text = "[given]\nc = \"(1.000000001 - 1)*1e9\"\np = \"(1.0000001 - 1)*1e7\"\n[span]\nx = [\"0\", \"1\"]\n\
                [unknowns]\ny = \"1\"\n[equations]\ne = \"y'' = -c\"\n[conditions]\na = \"y(0) = 0\"\nb = \"y(1) = p\"\n\
                [report]\nm = \"y(0.5)\"\ns = \"y'(1)\"\n";
    let sheet = sheet::read(text).unwrap_or_else(|faults| panic!("{faults:#?}"));
    let solution = sheet.solve(None).expect("regular");
    // By decimals c = 1 and p = 1: y = x/2 - x^2/2 + x.
    for (asked, exact) in sheet.evaluate(&solution).iter().zip([0.625, 0.5]) {
        let got = asked.printed().expect("a value");
        let error = (got.value - exact).abs();
        assert!(error > 1e-12, "the data cancel less than thought: {error:e}");
        assert!(error <= got.error && got.error < 1e-6, "{}: error {error:e}, bar {:e}", asked.label, got.error);
    }
}
