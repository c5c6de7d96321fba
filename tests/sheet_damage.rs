//! Damaged sheets: whatever is typed, reading ends, with faults that have places, and without panic.

use proptest::prelude::*;
use spanwise::sheet;

fn sheets() -> Vec<String> {
    let folder = std::fs::read_dir("examples/sheets").expect("a folder of sheets");
    let mut paths: Vec<_> = folder.flatten().map(|e| e.path()).collect();
    paths.sort();
    paths.iter().map(|p| std::fs::read_to_string(p).expect("a sheet")).collect()
}

fn read(text: &str) {
    match sheet::read(text) {
        Ok(_) => {}
        Err(faults) => {
            assert!(!faults.is_empty(), "refused without a reason: {text}");
            for fault in faults {
                assert!(fault.line >= 1 && fault.column >= 1 && !fault.message.is_empty());
                assert!(fault.span.start <= fault.span.end && fault.span.end <= text.len(), "{fault:?}");
            }
        }
    }
}

/// Pieces of text that sheets are made of, in wrong places.
const SCRAPS: [&str; 24] = [
    "\"", "'", "''", "(", ")", "[", "]", "{", "}", "=", "..", ",", "^", "/", "-", " in ", "m", "degC", "0", "1e999",
    "inf", "x", "if(", "\\u03b1",
];

proptest! {
    #![proptest_config(ProptestConfig { cases: 600, ..ProptestConfig::default() })]

    #[test]
    fn with_scraps_put_in_or_taken_out(which in 0usize..64, edits in prop::collection::vec((0.0f64..1.0, 0usize..24, 0usize..12), 1..6)) {
        let sheets = sheets();
        let mut text = sheets[which % sheets.len()].clone();
        for (place, scrap, cut) in edits {
            let mut at = (place * text.len() as f64) as usize;
            while !text.is_char_boundary(at) {
                at -= 1;
            }
            let mut end = (at + cut).min(text.len());
            while !text.is_char_boundary(end) {
                end -= 1;
            }
            text.replace_range(at..end.max(at), SCRAPS[scrap]);
        }
        read(&text);
    }

    #[test]
    fn with_lines_in_another_order(which in 0usize..64, a in 0.0f64..1.0, b in 0.0f64..1.0) {
        let sheets = sheets();
        let mut lines: Vec<&str> = sheets[which % sheets.len()].lines().collect();
        let place = |t: f64| (t * lines.len() as f64) as usize;
        let (a, b) = (place(a), place(b));
        lines.swap(a, b);
        read(&lines.join("\n"));
    }

    #[test]
    fn any_text(text in "\\PC{0,200}") {
        read(&text);
    }
}
