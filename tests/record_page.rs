//! The page and the pictures of a record: real sheets, and outcomes made to break them.

use spanwise::record::build::{self, Origin};
use spanwise::record::outcome::{Check, Curve, Entry, Feature, FeatureKind, Mark, MeshRow, Outcome, Quantity, Status};
use spanwise::record::{page, plot};
use spanwise::sheet;

const DIGEST: &str = "0123456789abcdef";
/// Size of a picture in its own units: ten to a pixel, 560 pixels wide.
const WIDE: f64 = 5600.0;

fn solved(name: &str) -> Outcome {
    let path = format!("examples/sheets/{name}.toml");
    let text = std::fs::read_to_string(&path).expect("an example");
    let sheet = sheet::read(&text).unwrap_or_else(|_| panic!("{name} reads"));
    let solution = sheet.solve(None).expect("a solution");
    build::solved(&sheet, &solution, Origin { source: &path, text: &text }, true)
}

/// A small outcome whose one curve goes through the given pieces.
fn made(pieces: Vec<Vec<(f64, f64)>>, span: (f64, f64)) -> Outcome {
    let all: Vec<(f64, f64)> = pieces.iter().flatten().copied().collect();
    let best = all.iter().copied().max_by(|a, b| a.1.total_cmp(&b.1));
    let least = all.iter().copied().min_by(|a, b| a.1.total_cmp(&b.1));
    let mark = |p: (f64, f64), label: &str| Mark { x: p.0, value: p.1, label: label.into() };
    let marks = best.map(|p| mark(p, "largest")).into_iter().chain(least.map(|p| mark(p, "smallest"))).collect();
    Outcome {
        title: "A made outcome".into(),
        note: None,
        source: "made.toml".into(),
        sheet: String::new(),
        status: Status::Solved,
        reason: None,
        coordinate: "x".into(),
        coordinate_unit: "m".into(),
        span,
        unknowns: Vec::new(),
        equations: Vec::new(),
        conditions: Vec::new(),
        data: Vec::new(),
        quantities: Vec::new(),
        checks: Vec::new(),
        curves: vec![Curve { name: "u".into(), unit: "kN*m".into(), pieces, marks }],
        stations: Vec::new(),
        residual: Vec::new(),
        features: Vec::new(),
        path: None,
        cases: Vec::new(),
        envelopes: Vec::new(),
        modes: Vec::new(),
        count_checked: None,
        count_region: [f64::NAN; 4],
        decay_names: Vec::new(),
        mesh: Vec::new(),
        passes: 1,
        warnings: Vec::new(),
        relative: 1e-10,
    }
}

/// Every tag is closed in order; every number is finite; every coordinate stays near the paper.
fn assert_drawing(svg: &str) {
    assert!(svg.starts_with("<svg "), "{}", &svg[..svg.len().min(80)]);
    let mut open: Vec<&str> = Vec::new();
    for tag in svg.split('<').skip(1) {
        let inner = tag.split('>').next().expect("a tag ends");
        let name = inner.split([' ', '/']).next().expect("a name");
        if inner.starts_with('/') {
            assert_eq!(open.pop(), inner.strip_prefix('/'), "tags close in order");
        } else if !inner.ends_with('/') {
            open.push(name);
        }
        for (key, value) in attributes(inner) {
            if ["x", "y", "x1", "x2", "y1", "y2", "cx", "cy", "points"].contains(&key) {
                for number in value.split([' ', ',']).filter(|t| !t.is_empty()) {
                    let number: f64 = number.parse().unwrap_or_else(|_| panic!("{number} in {inner}"));
                    assert!((-100.0..=WIDE + 100.0).contains(&number), "{number} in {inner}");
                }
            }
        }
    }
    assert!(open.is_empty(), "{open:?} left open");
    for bad in ["NaN", ">inf", "-inf"] {
        assert!(!svg.contains(bad), "{bad}");
    }
}

fn attributes(tag: &str) -> Vec<(&str, &str)> {
    let mut parts = tag.split('"');
    let mut found = Vec::new();
    while let (Some(key), Some(value)) = (parts.next(), parts.next()) {
        found.push((key.trim().trim_end_matches('=').rsplit(' ').next().unwrap_or(""), value));
    }
    found
}

/// The thick polylines of a picture: its curve.
fn curve_lines(svg: &str) -> Vec<Vec<(f64, f64)>> {
    let lines = svg.split('<').filter(|t| t.starts_with("polyline") && t.contains("stroke-width=\"20\""));
    lines
        .map(|t| {
            let points = attributes(t).into_iter().find(|(k, _)| *k == "points").expect("points").1;
            let pair = |p: &str| p.split_once(',').map(|(x, y)| (x.parse().expect("x"), y.parse().expect("y")));
            points.split(' ').filter_map(pair).collect()
        })
        .collect()
}

fn assert_page(html: &str) {
    assert!(html.starts_with("<!DOCTYPE html>"));
    for banned in ["<script", " src=", "<link", "@import", "url(", "onload", "NaN"] {
        assert!(!html.contains(banned), "{banned}");
    }
    // The only addresses are the names of the SVG language.
    let addresses = html.matches("://").count();
    assert_eq!(addresses, html.matches("xmlns=\"http://www.w3.org/2000/svg\"").count());
    // Every picture has its words.
    let pictures = html.matches("<svg ").count();
    assert_eq!(pictures, html.matches("role=\"img\" aria-label=\"").count());
    assert!(!html.contains("aria-label=\"\""));
}

#[test]
fn pages_of_the_examples() {
    for name in ["agitator-shaft", "walkway-four-spans", "dryer-wall", "biofilm"] {
        let outcome = solved(name);
        let plots = plot::all(&outcome);
        assert_eq!(plots.len(), outcome.curves.len() + 3, "span, curves, residual, decay");
        plots.iter().for_each(|p| assert_drawing(&p.svg));
        let html = page::render(&outcome, &plots, DIGEST, "9.9.9");
        assert_page(&html);
        let escaped =
            |s: &str| s.replace('&', "&amp;").replace('<', "&lt;").replace('>', "&gt;").replace('"', "&quot;");
        let entries = outcome.unknowns.iter().chain(&outcome.equations).chain(&outcome.conditions).chain(&outcome.data);
        for entry in entries {
            assert!(html.contains(&escaped(&entry.text)), "{name}: {}", entry.text);
        }
        for quantity in &outcome.quantities {
            assert!(html.contains(&escaped(&quantity.name)), "{name}: {}", quantity.name);
        }
        assert!(html.contains(&outcome.title) && html.contains(DIGEST) && html.contains("9.9.9"));
        assert!(html.contains(&escaped(&outcome.sheet)), "{name}: the sheet itself");
        assert!(html.len() < 500_000, "{name}: {} bytes", html.len());
    }
}

#[test]
fn no_line_is_drawn_across_a_jump() {
    let outcome = made(vec![vec![(0.0, 3.0), (1.0, 3.5)], vec![(1.0, -2.0), (2.0, -1.0)]], (0.0, 2.0));
    let svg = plot::curve(&outcome.curves[0], &outcome).expect("a picture");
    assert_drawing(&svg);
    let lines = curve_lines(&svg);
    assert_eq!(lines.len(), 2);
    assert_eq!(lines[0][1].0, lines[1][0].0, "both pieces reach the jump");
    assert!(lines[1][0].1 > lines[0][1].1 + 500.0, "values are drawn upwards");
}

#[test]
fn thinning_keeps_a_curve_where_it_is() {
    let line: Vec<(f64, f64)> = (0..=4000).map(|k| f64::from(k) / 4000.0).map(|x| (x, (9.0 * x).sin())).collect();
    let outcome = made(vec![line.clone()], (0.0, 1.0));
    let svg = plot::curve(&outcome.curves[0], &outcome).expect("a picture");
    let drawn = &curve_lines(&svg)[0];
    assert!(drawn.len() < 400, "{} points", drawn.len());
    // The map from values to paper, from the highest and the lowest point.
    let top = drawn.iter().map(|p| p.1).fold(f64::INFINITY, f64::min);
    let low = drawn.iter().map(|p| p.1).fold(f64::NEG_INFINITY, f64::max);
    let (left, right) = (drawn[0].0, drawn[drawn.len() - 1].0);
    for (x, y) in line {
        let at = (left + x * (right - left), low + (y + 1.0) / 2.0 * (top - low));
        let k = drawn.iter().position(|p| p.0 >= at.0 - 1e-9).expect("inside").max(1);
        let ((a, b), (c, d)) = (drawn[k - 1], drawn[k]);
        let on = b + (at.0 - a) / (c - a) * (d - b);
        // Measured across the line: 0.15 pixels of thinning, half a unit of rounding at both ends.
        let across = (on - at.1).abs() / (1.0 + ((d - b) / (c - a)).powi(2)).sqrt();
        assert!(across <= 4.0, "{across} at {x}");
    }
}

#[test]
fn hard_ranges_are_drawn() {
    let two = |a: f64, b: f64| vec![vec![(0.0, a), (0.5, 0.5 * a + 0.5 * b), (1.0, b)]];
    let cases = [
        two(0.0, 0.0),
        two(5.0, 5.0),
        two(1000.0, 1_000.000_001),
        two(-1e-300, 1e-300),
        two(-1e300, 1.7e308),
        two(f64::MAX, f64::MIN),
        two(5e-324, 0.0),
        two(0.0, 12_345.0),
        vec![vec![(0.0, f64::NAN), (0.5, 1.0), (1.0, f64::INFINITY)]],
        vec![vec![(0.5, 1.0)]],
        vec![Vec::new()],
        Vec::new(),
    ];
    for pieces in cases {
        for span in [(0.0, 1.0), (-1e-12, 1e12), (1e6, 1e6 + 1e-3)] {
            let shift = |p: &(f64, f64)| (span.0 + p.0 * (span.1 - span.0), p.1);
            let moved = pieces.iter().map(|p| p.iter().map(shift).collect()).collect();
            let mut outcome = made(moved, span);
            outcome.residual = outcome.curves.clone();
            let plots = plot::all(&outcome);
            assert_eq!(plots.len(), 3, "{pieces:?}");
            plots.iter().for_each(|p| assert_drawing(&p.svg));
            assert_page(&page::render(&outcome, &plots, DIGEST, "1"));
        }
    }
}

#[test]
fn many_features_and_long_names_stay_on_the_paper() {
    let mut outcome = made(vec![vec![(0.0, 1.0), (1.0, 2.0)]], (0.0, 1.0));
    let kinds = [FeatureKind::Condition, FeatureKind::Jump, FeatureKind::Release, FeatureKind::Break];
    outcome.features = (0..=200)
        .map(|k| Feature {
            x: f64::from(k) / 200.0,
            label: format!("a rather long name of a support, number {k}, on the north side"),
            kind: kinds[k as usize % 4],
        })
        .collect();
    outcome.curves[0].name = "q".repeat(300);
    outcome.coordinate = "station".repeat(40);
    outcome.decay_names = (0..30).map(|k| format!("unknown{k}")).collect();
    outcome.mesh = (0..300)
        .map(|k| MeshRow {
            from: f64::from(k),
            to: f64::from(k + 1),
            nodes: 20,
            decay: (0..30).map(|u| (0..20).map(|d| 10f64.powi(-d - u)).collect()).collect(),
        })
        .collect();
    let plots = plot::all(&outcome);
    assert_eq!(plots.len(), 3);
    for plot in &plots {
        assert_drawing(&plot.svg);
        for text in plot.svg.split("<text ").skip(1) {
            let words = text.split('>').nth(1).and_then(|t| t.split('<').next()).expect("words").trim();
            assert!(words.chars().count() <= 70, "{words}");
        }
    }
    assert_page(&page::render(&outcome, &plots, DIGEST, "1"));
}

#[test]
fn names_cannot_break_the_page() {
    let evil = "</style></pre><script>alert('x')</script>\" onload=\"&\u{1}`";
    let mut outcome = made(vec![vec![(0.0, 1.0), (1.0, 2.0)]], (0.0, 1.0));
    let entry = || Entry { name: evil.into(), text: evil.into(), remark: evil.into() };
    outcome.title = evil.into();
    outcome.note = Some(evil.into());
    outcome.source = evil.into();
    outcome.sheet = evil.into();
    outcome.coordinate = evil.into();
    outcome.unknowns = vec![entry()];
    outcome.data = vec![entry()];
    outcome.curves[0].name = evil.into();
    outcome.warnings = vec![evil.into()];
    outcome.features = vec![Feature { x: 0.5, label: evil.into(), kind: FeatureKind::Jump }];
    outcome.checks = vec![Check { name: evil.into(), result: evil.into(), meaning: evil.into(), passed: Some(false) }];
    let plots = plot::all(&outcome);
    plots.iter().for_each(|p| assert_drawing(&p.svg));
    let html = page::render(&outcome, &plots, DIGEST, "1");
    assert!(!html.contains("<script") && !html.contains("\" onload=\""));
    assert_eq!(html.matches("</style>").count(), 1);
    assert_eq!(html.matches("</pre>").count(), 1);
}

#[test]
fn missed_and_missing_numbers_are_said() {
    let mut outcome = made(Vec::new(), (0.0, 1.0));
    let quantity = |name: &str, value: Option<f64>, met: bool| Quantity {
        name: name.into(),
        formula: "u(0 m)".into(),
        value,
        error: 0.5,
        unit: "mm".into(),
        reason: (!met).then(|| format!("reason of {name}, 2.5e-7")),
        remarks: vec!["left of the break".into()],
        met,
    };
    outcome.quantities =
        vec![quantity("good", Some(-12.25), true), quantity("poor", Some(7.0), false), quantity("none", None, false)];
    outcome.status = Status::Inaccurate;
    outcome.checks = vec![
        Check { name: "a".into(), result: "b".into(), meaning: "c".into(), passed: Some(false) },
        Check { name: "d".into(), result: "e".into(), meaning: "f".into(), passed: None },
    ];
    let html = page::render(&outcome, &[], DIGEST, "1");
    assert_eq!(html.matches("class=\"missed\"").count(), 2);
    assert!(html.contains("<b>accuracy missed</b>: reason of poor, 2.5·10⁻⁷"));
    assert!(html.contains("<b>no value</b>: reason of none"));
    assert!(html.contains("not every number met the accuracy asked"));
    assert!(html.contains("−12.3(") || html.contains("−12.2("), "a real minus sign");
    assert!(html.contains("verdict bad\">failed") && html.contains("verdict plain\">for information"));

    outcome.status = Status::Failed;
    outcome.reason = Some("nothing holds `y` against translation".into());
    let html = page::render(&outcome, &[], DIGEST, "1");
    assert!(html.contains("Not solved") && html.contains("nothing holds <code>y</code> against translation"));
}

/// Relative luminance of a colour `#rrggbb` or `#rgb` (WCAG 2.1, definition of relative luminance).
fn luminance(colour: &str) -> f64 {
    let digits: Vec<u32> = colour.trim_start_matches('#').chars().filter_map(|c| c.to_digit(16)).collect();
    let part = |k: usize| if digits.len() == 3 { 17 * digits[k] } else { 16 * digits[2 * k] + digits[2 * k + 1] };
    let linear = |k: usize| {
        let c = f64::from(part(k)) / 255.0;
        if c <= 0.04045 { c / 12.92 } else { ((c + 0.055) / 1.055).powf(2.4) }
    };
    0.2126 * linear(0) + 0.7152 * linear(1) + 0.0722 * linear(2)
}

#[test]
fn colours_are_readable_in_every_dress() {
    let html = page::render(&made(Vec::new(), (0.0, 1.0)), &[], DIGEST, "1");
    let dresses: Vec<&str> = html.split(":root {").skip(1).map(|t| t.split('}').next().expect("closed")).collect();
    assert_eq!(dresses.len(), 3, "light, dark, print");
    for dress in dresses {
        let colour = |name: &str| {
            let at = dress.find(&format!("--{name}:")).unwrap_or_else(|| panic!("{name}"));
            luminance(dress[at..].split([':', ';']).nth(1).expect("a colour").trim())
        };
        let contrast = |a: f64, b: f64| (a.max(b) + 0.05) / (a.min(b) + 0.05);
        for paper in ["paper", "tint"] {
            for text in ["ink", "soft", "key", "good", "bad"] {
                let found = contrast(colour(text), colour(paper));
                assert!(found >= 4.5, "{text} on {paper}: {found}");
            }
        }
        for line in 1..=6 {
            let found = contrast(colour(&format!("line{line}")), colour("paper"));
            assert!(found >= 3.0, "line {line}: {found}");
        }
    }
}
