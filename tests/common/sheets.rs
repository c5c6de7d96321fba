//! Sheets read and checked against numbers.
#![allow(dead_code)]

use spanwise::model::Model;
use spanwise::sheet::{self, DataFile, Reading, Sheet};

/// Reads a sheet; data files lie beside the examples.
pub fn read(text: &str) -> Sheet {
    let content = |name: &String| std::fs::read_to_string(std::path::Path::new("examples/sheets").join(name));
    let file = |name: String| DataFile { content: content(&name).map_err(|e| e.to_string()), name };
    let files: Vec<DataFile> = sheet::files(text).into_iter().map(file).collect();
    sheet::read_with(text, &Reading { files: &files, ..Reading::default() })
        .unwrap_or_else(|faults| panic!("{text}\n{faults:#?}"))
}

/// Reads, checks order and carried orders, solves; then every asked number against the value given, in the unit
/// printed: right to 1e-11 of its scale and within its bar.
pub fn check(text: &str, order: usize, carried: &[usize], expected: &[f64]) {
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

/// A beam from 0 to 4 m with B = 10 kN m^2 and V = M', M = B*y''.
pub fn beam(conditions: &str, report: &str) -> String {
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
