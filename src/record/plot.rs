//! Pictures of a record as SVG: curves along the span, residual, decay of the coefficients, the span itself.

use super::axis::{Axis, Decades, few, pretty};
use super::canvas::{Canvas, GRID, INK, LINES, PAPER, SOFT, Stand, TEXT, cut, draw, width};
use super::outcome::{Curve, Feature, FeatureKind, Outcome};

/// Width of a picture, in pixels.
const WIDTH: f64 = 560.0;
/// Height of a picture.
const HEIGHT: f64 = 330.0;
/// Space at the right.
const RIGHT: f64 = 18.0;
/// Space above the field: title.
const TOP: f64 = 36.0;
/// Space below the field: marks, tick labels, key and title.
const BOTTOM: f64 = 74.0;
/// Rows of labels under the drawing of the span.
const ROWS: usize = 6;
/// Most unknowns named and drawn in the picture of the decay.
const MOST_NAMES: usize = LINES.len();
/// Deepest decade drawn below the largest.
const DEEPEST: i32 = 20;

/// Most curves that are drawn; all are in the table.
const MOST_PLOTS: usize = 100;

/// File of the drawing of the span.
pub const SPAN: &str = "span.svg";

/// A picture: file name, drawing, and what it shows in words.
pub struct Plot {
    /// Name inside the folder of plots.
    pub file: String,
    /// The drawing.
    pub svg: String,
    /// What it shows, for those who do not see it.
    pub words: String,
}

/// The rectangle curves are drawn in.
struct Frame {
    left: f64,
    right: f64,
    top: f64,
    bottom: f64,
}

impl Frame {
    fn beside(labels: impl Iterator<Item = usize>) -> Self {
        let wide = labels.max().unwrap_or(1).max(2) as f64 * 0.56 * TEXT;
        Self { left: (wide + 14.0).min(WIDTH / 3.0), right: WIDTH - RIGHT, top: TOP, bottom: HEIGHT - BOTTOM }
    }

    fn x(&self, part: f64) -> f64 {
        self.left + part * (self.right - self.left)
    }

    fn y(&self, part: f64) -> f64 {
        self.bottom - part * (self.bottom - self.top)
    }

    fn axes(&self, canvas: &mut Canvas<'_>) {
        canvas.line((self.left, self.top), (self.left, self.bottom), 1.2, INK);
        canvas.line((self.left, self.bottom), (self.right, self.bottom), 1.2, INK);
    }

    fn rung(&self, canvas: &mut Canvas<'_>, part: f64, label: &str) {
        let y = self.y(part);
        canvas.line((self.left, y), (self.right, y), 0.8, GRID);
        canvas.line((self.left - 4.0, y), (self.left, y), 1.2, INK);
        canvas.text(label, (self.left - 8.0, y), Stand::End, INK);
    }
}

/// One quantity along the span with its extremes and the features of the span.
///
/// # Errors
/// What the drawing library reports.
pub fn curve(curve: &Curve, outcome: &Outcome) -> Result<String, String> {
    let points = || curve.pieces.iter().flatten();
    let values = points().map(|p| p.1).chain(curve.marks.iter().map(|m| m.value));
    let y = Axis::holding(values, 0.16, 7);
    let frame = Frame::beside(y.ticks.iter().map(|t| t.1.chars().count()));
    draw((WIDTH, HEIGHT), |canvas| {
        for (value, label) in &y.ticks {
            frame.rung(canvas, share(*value, y.ends), label);
        }
        let x = along(canvas, &frame, outcome);
        if y.ends.0 < 0.0 && y.ends.1 > 0.0 && y.base == 0.0 {
            let zero = frame.y(share(0.0, y.ends));
            canvas.line((frame.left, zero), (frame.right, zero), 0.8, INK);
        }
        frame.axes(canvas);
        let title = y.title(&cut(&curve.name, WIDTH / 2.0), &curve.unit);
        canvas.bold(&cut(&title, WIDTH - 20.0), (8.0, 15.0), Stand::Begin, INK);
        for piece in &curve.pieces {
            let line: Vec<_> = piece
                .iter()
                .filter(|p| p.0.is_finite() && p.1.is_finite())
                .map(|p| (frame.x(x.place(p.0)), frame.y(y.place(p.1))))
                .collect();
            canvas.path(&line, 2.0, LINES[0]);
        }
        if points().next().is_none() {
            nothing(canvas, &frame);
        }
        for mark in curve.marks.iter().filter(|m| m.x.is_finite() && m.value.is_finite()) {
            let at = (frame.x(x.place(mark.x)), frame.y(y.place(mark.value)));
            canvas.circle(at, 3.5, LINES[1], true);
            let label = format!("{} at {}", few(y.shown(mark.value), 5), few(x.shown(mark.x), 4));
            // Above the largest and below the smallest there is no line to cross.
            let up = !mark.label.starts_with("smallest");
            let half = 0.5 * width(&label);
            let middle = at.0.max(frame.left + half + 4.0).min(frame.right - half);
            let height = at.1 + if up { -14.0 } else { 15.0 };
            canvas.area((middle - half, height - 8.0), (middle + half, height + 8.0), PAPER);
            canvas.text(&label, (middle, height), Stand::Middle, INK);
        }
    })
}

/// The relative residual along the span, in decades.
///
/// # Errors
/// What the drawing library reports.
pub fn residual(outcome: &Outcome) -> Result<String, String> {
    let points = || outcome.residual.iter().flat_map(|c| c.pieces.iter().flatten());
    let y = Decades::holding(points().map(|p| p.1.abs()), DEEPEST, 6);
    let frame = Frame::beside(y.ticks.iter().map(|t| t.1.chars().count()));
    draw((WIDTH, HEIGHT), |canvas| {
        rungs(canvas, &frame, &y);
        let x = along(canvas, &frame, outcome);
        frame.axes(canvas);
        canvas.bold("residual, relative to the terms", (8.0, 15.0), Stand::Begin, INK);
        for (k, one) in outcome.residual.iter().enumerate() {
            for piece in &one.pieces {
                let line: Vec<_> = piece
                    .iter()
                    .filter(|p| p.0.is_finite() && p.1.is_finite())
                    .map(|p| (frame.x(x.place(p.0)), frame.y(y.place(p.1.abs()))))
                    .collect();
                canvas.path(&line, 1.4, LINES[k % LINES.len()]);
            }
        }
        if points().next().is_none() {
            nothing(canvas, &frame);
        }
    })
}

/// Sizes of the Legendre coefficients, element after element, one line per unknown and element.
///
/// # Errors
/// What the drawing library reports.
pub fn decay(outcome: &Outcome) -> Result<String, String> {
    let mesh = &outcome.mesh;
    let y = Decades::holding(mesh.iter().flat_map(|r| r.decay.iter().flatten().copied()), DEEPEST, 6);
    let frame = Frame::beside(y.ticks.iter().map(|t| t.1.chars().count()));
    draw((WIDTH, HEIGHT), |canvas| {
        rungs(canvas, &frame, &y);
        // Each element gets the same width: short elements are where there is something to see.
        let wide = 1.0 / mesh.len().max(1) as f64;
        let every = (mesh.len() as f64 * 30.0 / (frame.right - frame.left)).ceil().max(1.0) as usize;
        for index in 0..mesh.len() {
            if index > 0 && every < 4 {
                let x = frame.x(index as f64 * wide);
                canvas.line((x, frame.top), (x, frame.bottom), 0.8, GRID);
            }
            if index % every == 0 {
                let middle = frame.x((index as f64 + 0.5) * wide);
                canvas.text(&(index + 1).to_string(), (middle, frame.bottom + 15.0), Stand::Middle, INK);
            }
        }
        frame.axes(canvas);
        for (index, row) in mesh.iter().enumerate() {
            for (k, sizes) in row.decay.iter().enumerate().take(MOST_NAMES) {
                decayed(canvas, &frame, &y, sizes, (index as f64 * wide, wide), k);
            }
        }
        canvas.bold("coefficient size, relative", (8.0, 15.0), Stand::Begin, INK);
        canvas.text("element, in sequence", (frame.right, HEIGHT - 12.0), Stand::End, INK);
        canvas.text("degree rises to the right", (8.0, HEIGHT - 12.0), Stand::Begin, SOFT);
        key(canvas, outcome, (frame.left, frame.bottom + 38.0));
        if mesh.iter().all(|r| r.decay.is_empty()) {
            nothing(canvas, &frame);
        }
    })
}

/// Coefficients of one unknown on one element: a line with dots, dots left out where they would touch.
fn decayed(canvas: &mut Canvas<'_>, frame: &Frame, y: &Decades, sizes: &[f64], (from, wide): (f64, f64), k: usize) {
    let count = sizes.len().max(1) as f64;
    let line: Vec<_> = sizes
        .iter()
        .enumerate()
        // A coefficient that is exactly zero has no place on a logarithmic axis.
        .filter(|(_, s)| s.is_finite() && **s > 0.0)
        .map(|(d, s)| (frame.x(from + wide * (0.06 + 0.88 * (d as f64 + 0.5) / count)), frame.y(y.place(*s))))
        .collect();
    canvas.path(&line, 1.2, LINES[k]);
    if wide * (frame.right - frame.left) / count > 7.0 {
        for &at in &line {
            canvas.circle(at, 2.2, LINES[k], k.is_multiple_of(2));
        }
    }
}

fn key(canvas: &mut Canvas<'_>, outcome: &Outcome, (mut x, y): (f64, f64)) {
    for (k, name) in outcome.decay_names.iter().enumerate() {
        let name = cut(name, 120.0);
        if k >= MOST_NAMES || x + width(&name) + 30.0 > WIDTH - 60.0 && k > 0 {
            canvas.text(&format!("and {} more", outcome.decay_names.len() - k), (x, y), Stand::Begin, SOFT);
            break;
        }
        canvas.line((x, y), (x + 20.0, y), 2.0, LINES[k]);
        canvas.text(&name, (x + 26.0, y), Stand::Begin, INK);
        x += 26.0 + width(&name) + 18.0;
    }
}

/// The span as a bar with its features, their names and places.
///
/// # Errors
/// What the drawing library reports.
pub fn span(outcome: &Outcome) -> Result<String, String> {
    let (from, to) = outcome.span;
    let (left, right) = (30.0, WIDTH - 30.0);
    let x = |v: f64| left + (right - left) * share(v, outcome.span);
    let places = Axis::holding([from, to].into_iter(), 0.0, 9);
    let number = |v: f64| few(places.shown(v), 4);
    let groups = grouped(&outcome.features, outcome.span);
    // Labels go to the first row with room for them; what finds none stays without a label.
    let mut ends = [f64::NEG_INFINITY; ROWS];
    let mut rows = 0;
    let mut labels = Vec::new();
    for (place, kinds, names) in &groups {
        let text = cut(&names.join(", "), 230.0);
        let half = 0.5 * width(&text);
        let middle = x(*place).max(half + 4.0).min(WIDTH - half - 4.0);
        let row = ends.iter().position(|&e| e + 12.0 < middle - half).filter(|_| !text.is_empty());
        if let Some(row) = row {
            ends[row] = middle + half;
            rows = rows.max(row + 1);
        }
        labels.push((*place, kinds, text, middle, row));
    }
    let bar = 46.0;
    let height = bar + 62.0 + 20.0 * rows as f64;
    draw((WIDTH, height), |canvas| {
        for (place, _, _, middle, row) in &labels {
            if let Some(row) = row {
                let y = bar + 31.0 + 20.0 * *row as f64;
                canvas.line((x(*place), bar + 24.0), (x(*place), y - 8.0), 0.8, GRID);
                if (x(*place) - middle).abs() > 60.0 {
                    canvas.line((x(*place), y - 8.0), (*middle, y - 8.0), 0.8, GRID);
                }
            }
        }
        canvas.area((left, bar - 4.0), (right, bar + 4.0), LINES[0]);
        let mut numbered = f64::NEG_INFINITY;
        for (place, kinds, text, middle, row) in &labels {
            for (n, kind) in kinds.iter().enumerate() {
                canvas.mark(*kind, (x(*place) + 13.0 * (n as f64 - 0.5 * (kinds.len() as f64 - 1.0)), bar + 14.0));
            }
            // Places above the bar, where the neighbour leaves room.
            if x(*place) - numbered >= 46.0 {
                canvas.text(&number(*place), (x(*place), bar - 16.0), Stand::Middle, SOFT);
                numbered = x(*place);
            }
            if let Some(row) = row {
                canvas.text(text, (*middle, bar + 33.0 + 20.0 * *row as f64), Stand::Middle, INK);
            }
        }
        if groups.is_empty() {
            canvas.text(&number(from), (left, bar - 16.0), Stand::Middle, SOFT);
            canvas.text(&number(to), (right, bar - 16.0), Stand::Middle, SOFT);
        }
        let title = places.title(&cut(&outcome.coordinate, 160.0), &outcome.coordinate_unit);
        canvas.text(&title, (WIDTH - 8.0, 12.0), Stand::End, INK);
        kinds_key(canvas, &outcome.features, (8.0, height - 12.0));
    })
}

/// Every picture of a record. One that cannot be drawn is left out.
pub fn all(outcome: &Outcome) -> Vec<Plot> {
    let mut plots = Vec::new();
    let mut keep = |file: String, svg: Result<String, String>, words: String| {
        plots.extend(svg.map(|svg| Plot { file, svg, words }));
    };
    keep(SPAN.into(), span(outcome), span_words(outcome));
    for (k, one) in outcome.curves.iter().enumerate().take(MOST_PLOTS) {
        keep(format!("{:02}-{}.svg", k + 1, file_name(&one.name)), curve(one, outcome), curve_words(one, outcome));
    }
    for (k, one) in outcome.envelopes.iter().enumerate().take(MOST_PLOTS) {
        let file = format!("envelope-{:02}-{}.svg", k + 1, file_name(&one.name));
        keep(file, curve(&one.curve(), outcome), one.words(outcome));
    }
    for (name, one, over) in super::path::pictures(outcome) {
        keep(format!("{}.svg", file_name(&name)), curve(&one, &over), curve_words(&one, &over));
    }
    if !outcome.residual.is_empty() {
        keep("residual.svg".into(), residual(outcome), residual_words(outcome));
    }
    if !outcome.mesh.is_empty() {
        keep("decay.svg".into(), decay(outcome), decay_words(outcome));
    }
    plots
}

/// Letters and digits only, for a file name on any system.
fn file_name(name: &str) -> String {
    let text: String = name.chars().map(|c| if c.is_ascii_alphanumeric() { c } else { '-' }).take(40).collect();
    text.trim_matches('-').to_owned()
}

fn span_words(outcome: &Outcome) -> String {
    let unit = plain_unit(&outcome.coordinate_unit);
    let mut words = format!("Drawing of the span from {} to {}{unit}.", few(outcome.span.0, 4), few(outcome.span.1, 4));
    for feature in outcome.features.iter().take(20) {
        words.push_str(&format!(" {} “{}” at {}.", kind_name(feature.kind), feature.label, few(feature.x, 4)));
    }
    words
}

fn plain_unit(unit: &str) -> String {
    if unit == "1" { String::new() } else { format!(" {}", pretty(unit)) }
}

/// Text for a curve.
fn curve_words(curve: &Curve, outcome: &Outcome) -> String {
    let mut words = format!("{} along {}", curve.name, outcome.coordinate);
    for mark in &curve.marks {
        words.push_str(&format!(
            "; {} {}{} at {}{}",
            mark.label,
            few(mark.value, 5),
            plain_unit(&curve.unit),
            few(mark.x, 4),
            plain_unit(&outcome.coordinate_unit)
        ));
    }
    words.push('.');
    words
}

fn decay_words(outcome: &Outcome) -> String {
    let last = outcome.mesh.iter().flat_map(|r| r.decay.iter()).filter_map(|d| d.last());
    let last = last.copied().fold(0.0, f64::max);
    format!(
        "Sizes of the Legendre coefficients on {} elements, one line per unknown; the largest last coefficient is {} \
         of the largest of its unknown.",
        outcome.mesh.len(),
        few(last, 2)
    )
}

fn residual_words(outcome: &Outcome) -> String {
    let points = outcome.residual.iter().flat_map(|c| c.pieces.iter().flatten());
    let most = points.map(|p| p.1.abs()).fold(0.0, f64::max);
    format!("Relative residual of the equations along the span; at most {}.", few(most, 2))
}

fn share(value: f64, (low, high): (f64, f64)) -> f64 {
    let part = (value / 2.0 - low / 2.0) / (high / 2.0 - low / 2.0);
    if part.is_finite() { part.clamp(-1.0, 2.0) } else { 0.5 }
}

fn nothing(canvas: &mut Canvas<'_>, frame: &Frame) {
    canvas.text("nothing to draw", (frame.x(0.5), frame.y(0.5)), Stand::Middle, SOFT);
}

fn rungs(canvas: &mut Canvas<'_>, frame: &Frame, y: &Decades) {
    let (low, high) = y.ends;
    for (tick, label) in &y.ticks {
        frame.rung(canvas, f64::from(tick - low) / f64::from(high - low), label);
    }
}

/// The coordinate's axis with the features of the span below it.
fn along(canvas: &mut Canvas<'_>, frame: &Frame, outcome: &Outcome) -> Axis {
    let (from, to) = outcome.span;
    let x = Axis::holding([from, to].into_iter(), 0.0, 9);
    for feature in &outcome.features {
        let at = frame.x(x.place(feature.x));
        canvas.line((at, frame.top), (at, frame.bottom), 0.8, GRID);
    }
    for (value, label) in &x.ticks {
        let at = frame.x(share(*value, x.ends));
        canvas.line((at, frame.bottom), (at, frame.bottom + 4.0), 1.2, INK);
        canvas.text(label, (at, frame.bottom + 34.0), Stand::Middle, INK);
    }
    for (place, kinds, _) in grouped(&outcome.features, outcome.span) {
        let wide = 12.0 * (kinds.len() as f64 - 1.0);
        for (n, kind) in kinds.iter().enumerate() {
            canvas.mark(*kind, (frame.x(x.place(place)) + 12.0 * n as f64 - 0.5 * wide, frame.bottom + 15.0));
        }
    }
    let title = x.title(&cut(&outcome.coordinate, 160.0), &outcome.coordinate_unit);
    canvas.text(&title, (frame.right, HEIGHT - 13.0), Stand::End, INK);
    kinds_key(canvas, &outcome.features, (8.0, HEIGHT - 13.0));
    x
}

/// What the marks mean, for the kinds that occur.
fn kinds_key(canvas: &mut Canvas<'_>, features: &[Feature], (mut x, y): (f64, f64)) {
    for kind in [FeatureKind::Condition, FeatureKind::Jump, FeatureKind::Release, FeatureKind::Break] {
        if features.iter().any(|f| f.kind == kind) {
            canvas.mark(kind, (x + 6.0, y));
            canvas.text(kind_name(kind), (x + 17.0, y), Stand::Begin, SOFT);
            x += 17.0 + width(kind_name(kind)) + 8.0;
        }
    }
}

/// The word for a kind of feature.
fn kind_name(kind: FeatureKind) -> &'static str {
    match kind {
        FeatureKind::Condition => "condition",
        FeatureKind::Jump => "jump",
        FeatureKind::Release => "release",
        FeatureKind::Break => "break",
    }
}

/// Features at one place: the kinds once each, the names once each (breaks have none worth printing).
type Group = (f64, Vec<FeatureKind>, Vec<String>);

fn grouped(features: &[Feature], (from, to): (f64, f64)) -> Vec<Group> {
    let near = 1e-9 * (to - from).abs();
    let mut sorted: Vec<&Feature> = features.iter().filter(|f| f.x.is_finite()).collect();
    sorted.sort_by(|a, b| a.x.total_cmp(&b.x));
    let mut groups: Vec<Group> = Vec::new();
    for feature in sorted {
        if groups.last().is_none_or(|g| (g.0 - feature.x).abs() > near) {
            groups.push((feature.x, Vec::new(), Vec::new()));
        }
        let Some((_, kinds, names)) = groups.last_mut() else { continue };
        if !kinds.contains(&feature.kind) {
            kinds.push(feature.kind);
        }
        if feature.kind != FeatureKind::Break && !names.contains(&feature.label) {
            names.push(feature.label.clone());
        }
    }
    // A break is implied where anything else stands.
    for (_, kinds, _) in &mut groups {
        if kinds.len() > 1 {
            kinds.retain(|k| *k != FeatureKind::Break);
        }
    }
    groups
}
