//! Plots as SVG: curves along the span, residual, decay of the coefficients.

use super::outcome::{Curve, FeatureKind, Outcome};
use crate::sheet::short;
use plotters::coord::Shift;
use plotters::coord::ranged1d::{KeyPointHint, NoDefaultFormatting, Ranged, ValueFormatter};
use plotters::prelude::*;
use plotters::style::text_anchor::{HPos, Pos, VPos};

/// Units of the drawing for one of the page: its coordinates are whole numbers, and a fine grid keeps lines smooth.
const S: u32 = 4;
/// The same with a sign.
const Z: i32 = S as i32;
/// Size of a plot.
const SIZE: (u32, u32) = (860 * S, 340 * S);
const INK: RGBColor = RGBColor(34, 40, 49);
const GRID: RGBColor = RGBColor(222, 226, 230);
const LINE: RGBColor = RGBColor(18, 87, 133);
const MARK: RGBColor = RGBColor(176, 66, 24);
const SOFT: RGBColor = RGBColor(120, 128, 138);
/// Colours told apart by the colour-blind, in print also by lightness.
const SERIES: [RGBColor; 6] =
    [LINE, MARK, RGBColor(70, 130, 82), RGBColor(122, 82, 150), RGBColor(150, 120, 20), RGBColor(60, 60, 60)];

type Drawing<'a> = DrawingArea<SVGBackend<'a>, Shift>;
type Outcoming<T> = Result<T, DrawingAreaErrorKind<std::io::Error>>;

/// A plot: file name, drawing, and what it shows in words.
pub struct Plot {
    /// Name inside the folder of plots.
    pub file: String,
    /// The drawing.
    pub svg: String,
    /// What it shows, for those who do not see it.
    pub words: String,
}

/// All plots of a record. One that cannot be drawn is left out.
pub fn all(outcome: &Outcome) -> Vec<Plot> {
    let mut plots = Vec::new();
    for (k, curve) in outcome.curves.iter().enumerate() {
        let file = format!("{:02}-{}.svg", k + 1, file_name(&curve.name));
        plots.extend(drawn(|area| along(area, curve, outcome)).map(|svg| Plot {
            file,
            svg,
            words: words(curve, outcome),
        }));
    }
    for curve in &outcome.residual {
        let words = "Residual of the equations along the span, relative to their largest terms, logarithmic".to_owned();
        let svg = drawn(|area| residual(area, curve, outcome));
        plots.extend(svg.map(|svg| Plot { file: "residual.svg".into(), svg, words }));
    }
    if !outcome.mesh.is_empty() {
        let words =
            "Sizes of the Legendre coefficients of each carried unknown, element after element, logarithmic".to_owned();
        plots.extend(drawn(|area| decay(area, outcome)).map(|svg| Plot { file: "decay.svg".into(), svg, words }));
    }
    plots
}

/// Letters and digits only, for a file name on any system.
fn file_name(name: &str) -> String {
    let text: String = name.chars().map(|c| if c.is_ascii_alphanumeric() { c } else { '-' }).take(40).collect();
    text.trim_matches('-').to_owned()
}

fn words(curve: &Curve, outcome: &Outcome) -> String {
    let unit = |u: &str| if u == "1" { String::new() } else { format!(" {u}") };
    let marks: Vec<String> = curve
        .marks
        .iter()
        .map(|m| {
            let at = format!("{}{}", short(m.x), unit(&outcome.coordinate_unit));
            format!("{} {}{} at {} = {at}", m.label, short(m.value), unit(&curve.unit), outcome.coordinate)
        })
        .collect();
    format!("{} along the span; {}", curve.name, marks.join("; "))
}

fn drawn(draw: impl Fn(&Drawing<'_>) -> Outcoming<()>) -> Option<String> {
    let mut svg = String::new();
    {
        let area = SVGBackend::with_string(&mut svg, SIZE).into_drawing_area();
        draw(&area).ok()?;
        area.present().ok()?;
    }
    // Scales with the page; the page gives it its name.
    let (width, height) = SIZE;
    let head = format!("<svg width=\"{width}\" height=\"{height}\"");
    Some(svg.replacen(&head, "<svg", 1))
}

/// Ticks at round numbers, written as short as they allow.
#[derive(Clone)]
struct Round {
    from: f64,
    to: f64,
    /// Least distance of ticks.
    least: f64,
}

impl Round {
    /// Spacing 1, 2 or 5 times a power of ten with at most `most` ticks.
    fn step(&self, most: usize) -> f64 {
        let rough = (self.to - self.from).abs() / most.max(1) as f64;
        let power = 10f64.powf(rough.log10().floor());
        let factor = [1.0, 2.0, 5.0, 10.0].into_iter().find(|f| f * power >= rough * 0.999).unwrap_or(10.0);
        (factor * power).max(self.least)
    }
}

impl Ranged for Round {
    type FormatOption = NoDefaultFormatting;
    type ValueType = f64;

    fn map(&self, value: &f64, limit: (i32, i32)) -> i32 {
        let share = (value - self.from) / (self.to - self.from);
        limit.0 + (share * f64::from(limit.1 - limit.0)).round() as i32
    }

    fn key_points<Hint: KeyPointHint>(&self, hint: Hint) -> Vec<f64> {
        let step = self.step(hint.max_num_points().min(9));
        if !(step.is_finite() && step > 0.0) {
            return Vec::new();
        }
        let first = (self.from / step).ceil() as i64;
        (0..20).map(|k| (first + k) as f64 * step).take_while(|v| *v <= self.to + 1e-9 * step).collect()
    }

    fn range(&self) -> std::ops::Range<f64> {
        self.from..self.to
    }
}

impl ValueFormatter<f64> for Round {
    fn format_ext(&self, value: &f64) -> String {
        tick(*value, self.from.abs().max(self.to.abs()))
    }
}

/// A tick label: engineering powers of ten where the axis is large or small.
fn tick(value: f64, largest: f64) -> String {
    if largest == 0.0 || (1e-3..1e5).contains(&largest) {
        let text = format!("{value:.6}");
        let text = text.trim_end_matches('0').trim_end_matches('.');
        return if text == "-0" { "0".into() } else { text.to_owned() };
    }
    let power = (largest.log10() / 3.0).floor() as i32 * 3;
    let scaled = value / 10f64.powi(power);
    let text = format!("{scaled:.4}");
    let text = text.trim_end_matches('0').trim_end_matches('.');
    if text == "0" || text == "-0" { "0".into() } else { format!("{text}e{power}") }
}

/// Ends of an axis with some air; a constant gets a band around it.
fn padded(low: f64, high: f64) -> (f64, f64) {
    let spread = high - low;
    let size = low.abs().max(high.abs());
    if spread <= 1e-12 * size || spread == 0.0 {
        let half = if size > 0.0 { 0.1 * size } else { 1.0 };
        return (low - half, high + half);
    }
    (low - 0.08 * spread, high + 0.12 * spread)
}

fn label(name: &str, unit: &str) -> String {
    let name: String =
        if name.chars().count() > 40 { name.chars().take(39).chain(['…']).collect() } else { name.into() };
    if unit == "1" { name } else { format!("{name}  [{unit}]") }
}

fn text(size: u32) -> TextStyle<'static> {
    ("sans-serif", size * S).into_font().color(&INK)
}

/// A quantity along the span with its extremes and what stands at the points.
fn along(area: &Drawing<'_>, curve: &Curve, outcome: &Outcome) -> Outcoming<()> {
    let points = || curve.pieces.iter().flatten().filter(|p| p.1.is_finite());
    let low = points().map(|p| p.1).fold(f64::INFINITY, f64::min);
    let high = points().map(|p| p.1).fold(f64::NEG_INFINITY, f64::max);
    if low > high {
        return Ok(());
    }
    let (bottom, top) = padded(low, high);
    let (from, to) = outcome.span;
    let mut chart = ChartBuilder::on(area)
        .margin(14 * S)
        .margin_right(26 * S)
        .x_label_area_size(62 * S)
        .y_label_area_size(86 * S)
        .build_cartesian_2d(Round { from, to, least: 0.0 }, Round { from: bottom, to: top, least: 0.0 })?;
    chart
        .configure_mesh()
        .light_line_style(TRANSPARENT)
        .bold_line_style(GRID.stroke_width(S))
        .axis_style(INK.stroke_width(S))
        .label_style(text(14))
        .axis_desc_style(text(15))
        .set_all_tick_mark_size(5 * S)
        .x_desc(label(&outcome.coordinate, &outcome.coordinate_unit))
        .y_desc(label(&curve.name, &curve.unit))
        .draw()?;
    if bottom < 0.0 && top > 0.0 {
        chart.draw_series([PathElement::new(vec![(from, 0.0), (to, 0.0)], INK.stroke_width(S))])?;
    }
    for feature in outcome.features.iter().filter(|f| f.x > from && f.x < to).take(200) {
        let line = vec![(feature.x, bottom), (feature.x, top)];
        chart.draw_series([PathElement::new(line, GRID.mix(0.9).stroke_width(S))])?;
    }
    for piece in &curve.pieces {
        chart.draw_series(LineSeries::new(piece.iter().copied(), LINE.stroke_width(2 * S)))?;
    }
    for mark in &curve.marks {
        chart.draw_series([Circle::new((mark.x, mark.value), 4 * S, MARK.filled())])?;
        let right = mark.x > from + 0.72 * (to - from);
        let above = mark.value > 0.5 * (low + high);
        let pos = Pos::new(if right { HPos::Right } else { HPos::Left }, if above { VPos::Bottom } else { VPos::Top });
        let shift = (if right { -8 * Z } else { 8 * Z }, if above { -6 * Z } else { 6 * Z });
        let style = ("sans-serif", 14 * S).into_font().color(&MARK).pos(pos);
        let words = format!("{} at {}", short(mark.value), short(mark.x));
        let element = EmptyElement::at((mark.x, mark.value)) + Text::new(words, shift, style);
        chart.draw_series([element])?;
    }
    let strip = chart.plotting_area().get_pixel_range();
    features(area, outcome, (strip.0.start, strip.0.end), strip.1.end)
}

/// Our marks for what stands at the points, in the strip below the axis.
fn features(area: &Drawing<'_>, outcome: &Outcome, range: (i32, i32), base: i32) -> Outcoming<()> {
    let (from, to) = outcome.span;
    for feature in outcome.features.iter().take(200) {
        let share = ((feature.x - from) / (to - from)).clamp(0.0, 1.0);
        let x = range.0 + (share * f64::from(range.1 - range.0)).round() as i32;
        let y = base;
        match feature.kind {
            FeatureKind::Condition => {
                let shape = [(-5, 10), (5, 10), (5, 3), (-5, 3)].map(|(a, b)| (x + a * Z, y + b * Z)).to_vec();
                area.draw(&Polygon::new(shape, INK.filled()))?;
            }
            FeatureKind::Jump => {
                area.draw(&PathElement::new(vec![(x, y - 22 * Z), (x, y)], MARK.stroke_width(2 * S)))?;
                area.draw(&Polygon::new(vec![(x - 4 * Z, y - 7 * Z), (x + 4 * Z, y - 7 * Z), (x, y)], MARK.filled()))?;
            }
            FeatureKind::Release => {
                area.draw(&Circle::new((x, y + 6 * Z), 5 * S, WHITE.filled()))?;
                area.draw(&Circle::new((x, y + 6 * Z), 5 * S, INK.stroke_width(2 * S)))?;
            }
            FeatureKind::Break => {
                area.draw(&PathElement::new(vec![(x, y), (x, y + 9 * Z)], SOFT.stroke_width(2 * S)))?;
            }
        }
    }
    Ok(())
}

/// Decades from the smallest to the largest, at most 20 of them.
fn decades(values: impl Iterator<Item = f64>) -> (f64, f64) {
    let (mut low, mut high) = (f64::INFINITY, f64::NEG_INFINITY);
    for v in values.filter(|v| *v > 0.0 && v.is_finite()) {
        low = low.min(v.log10());
        high = high.max(v.log10());
    }
    if low > high {
        return (-17.0, 0.0);
    }
    let high = high.ceil().max(low.floor() + 1.0);
    (low.floor().max(high - 20.0), high)
}

fn residual(area: &Drawing<'_>, curve: &Curve, outcome: &Outcome) -> Outcoming<()> {
    let (low, high) = decades(curve.pieces.iter().flatten().map(|p| p.1));
    let (from, to) = outcome.span;
    let mut chart = ChartBuilder::on(area)
        .margin(14 * S)
        .margin_right(26 * S)
        .x_label_area_size(56 * S)
        .y_label_area_size(86 * S)
        .build_cartesian_2d(Round { from, to, least: 0.0 }, Round { from: low, to: high, least: 1.0 })?;
    chart
        .configure_mesh()
        .light_line_style(TRANSPARENT)
        .bold_line_style(GRID.stroke_width(S))
        .axis_style(INK.stroke_width(S))
        .label_style(text(14))
        .axis_desc_style(text(15))
        .set_all_tick_mark_size(5 * S)
        .x_desc(label(&outcome.coordinate, &outcome.coordinate_unit))
        .y_desc("residual, relative")
        .y_label_formatter(&|v| format!("1e{v:.0}"))
        .draw()?;
    for piece in &curve.pieces {
        let points = piece.iter().map(|(x, r)| (*x, r.max(1e-300).log10().max(low)));
        chart.draw_series(LineSeries::new(points, LINE.stroke_width(S)))?;
    }
    Ok(())
}

fn decay(area: &Drawing<'_>, outcome: &Outcome) -> Outcoming<()> {
    let all = || outcome.mesh.iter().flat_map(|row| row.decay.iter().flatten().copied());
    let (low, high) = decades(all());
    let total: usize = outcome.mesh.iter().map(|row| row.nodes + 1).sum();
    let mut chart = ChartBuilder::on(area)
        .margin(14 * S)
        .margin_right(26 * S)
        .x_label_area_size(56 * S)
        .y_label_area_size(86 * S)
        .build_cartesian_2d(
            Round { from: 0.0, to: total.max(2) as f64, least: 1.0 },
            Round { from: low, to: high, least: 1.0 },
        )?;
    chart
        .configure_mesh()
        .disable_x_mesh()
        .light_line_style(TRANSPARENT)
        .bold_line_style(GRID.stroke_width(S))
        .axis_style(INK.stroke_width(S))
        .label_style(text(14))
        .axis_desc_style(text(15))
        .x_labels(0)
        .set_all_tick_mark_size(5 * S)
        .x_desc("degree, element after element")
        .y_desc("coefficient, relative")
        .y_label_formatter(&|v| format!("1e{v:.0}"))
        .draw()?;
    let mut start = 0;
    for row in &outcome.mesh {
        let edge = start as f64;
        chart.draw_series([PathElement::new(vec![(edge, low), (edge, high)], GRID.stroke_width(S))])?;
        for (u, coefficients) in row.decay.iter().enumerate() {
            let colour = SERIES[u % SERIES.len()];
            let at = |(k, c): (usize, &f64)| (edge + 0.5 + k as f64, c.max(1e-300).log10().max(low));
            chart.draw_series(LineSeries::new(coefficients.iter().enumerate().map(at), colour.stroke_width(S)))?;
        }
        start += row.nodes + 1;
    }
    for (u, name) in outcome.decay_names.iter().enumerate().take(12) {
        let style = ("sans-serif", 14 * S).into_font().color(&SERIES[u % SERIES.len()]);
        let place = (Z * (110 + 110 * (u as i32 % 6)), Z * (14 + 16 * (u as i32 / 6)));
        area.draw(&Text::new(label(name, "1"), place, style))?;
    }
    Ok(())
}
