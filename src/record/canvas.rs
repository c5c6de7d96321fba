//! A small sheet of drawing paper: lines, texts and the marks of the span, put into SVG by plotters.
//!
//! Plotters places things on whole units, so a drawing is made ten times as large and shown at a tenth.

use plotters::prelude::*;
use plotters::style::text_anchor::{HPos, Pos, VPos};

use super::outcome::FeatureKind;

/// Units per pixel.
const FINE: f64 = 10.0;
/// Size of text, in pixels.
pub const TEXT: f64 = 15.0;
/// Mean width of a character, in sizes of text: no font is measured, so this is taken a little wide.
const WIDE: f64 = 0.56;
/// Plotters writes sizes of text divided by this.
const PLOTTERS_TEXT: f64 = 1.24;

/// Axes, labels. The page recolours these by value in its dark dress.
pub const INK: RGBColor = RGBColor(0x1b, 0x1b, 0x1b);
/// Labels of second rank.
pub const SOFT: RGBColor = RGBColor(0x55, 0x5a, 0x60);
/// Grid.
pub const GRID: RGBColor = RGBColor(0xdd, 0xe0, 0xe3);
/// Paper.
pub const PAPER: RGBColor = RGBColor(0xff, 0xff, 0xff);
/// Colours of lines, told apart by lightness as well as by hue.
pub const LINES: [RGBColor; 6] = [
    RGBColor(0x17, 0x4a, 0x7c),
    RGBColor(0xc4, 0x5f, 0x17),
    RGBColor(0x2f, 0x8f, 0x88),
    RGBColor(0x7a, 0x2e, 0x5d),
    RGBColor(0x9a, 0x86, 0x14),
    RGBColor(0x6a, 0x6f, 0x75),
];

/// How a text stands about its point.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Stand {
    /// Begins there.
    Begin,
    /// Is centred there.
    Middle,
    /// Ends there.
    End,
}

/// Estimated width of a text in pixels.
pub fn width(text: &str) -> f64 {
    text.chars().count() as f64 * TEXT * WIDE
}

/// A text cut to a width, with an ellipsis where something is left out.
pub fn cut(text: &str, pixels: f64) -> String {
    if width(text) <= pixels {
        return text.to_owned();
    }
    let keep = (pixels / (TEXT * WIDE) - 1.0).max(1.0) as usize;
    let mut short: String = text.chars().take(keep).collect();
    short.push('…');
    short
}

/// Drawing paper; all coordinates in pixels from the upper left corner.
pub struct Canvas<'a> {
    backend: SVGBackend<'a>,
    fault: Option<String>,
}

/// Draws on paper of the given size in pixels and returns the SVG.
pub fn draw(size: (f64, f64), work: impl FnOnce(&mut Canvas<'_>)) -> Result<String, String> {
    let mut text = String::new();
    let units = (fine(size.0).max(1) as u32, fine(size.1).max(1) as u32);
    {
        let mut canvas = Canvas { backend: SVGBackend::with_string(&mut text, units), fault: None };
        canvas.area((0.0, 0.0), size, PAPER);
        work(&mut canvas);
        let done = canvas.backend.present().map_err(|e| e.to_string());
        match canvas.fault {
            Some(fault) => return Err(fault),
            None => done?,
        }
    }
    let big = format!("width=\"{}\" height=\"{}\"", units.0, units.1);
    Ok(text.replacen(&big, &format!("width=\"{}\" height=\"{}\"", size.0, size.1), 1))
}

fn fine(pixels: f64) -> i32 {
    (pixels * FINE).round() as i32
}

fn point((x, y): (f64, f64)) -> (i32, i32) {
    (fine(x), fine(y))
}

impl Canvas<'_> {
    fn keep<E: std::fmt::Display>(&mut self, done: Result<(), E>) {
        if let Err(error) = done {
            self.fault.get_or_insert(error.to_string());
        }
    }

    /// A filled rectangle.
    pub fn area(&mut self, from: (f64, f64), to: (f64, f64), colour: RGBColor) {
        let done = self.backend.draw_rect(point(from), point(to), &colour.filled(), true);
        self.keep(done);
    }

    /// A straight line.
    pub fn line(&mut self, from: (f64, f64), to: (f64, f64), thick: f64, colour: RGBColor) {
        let style = colour.stroke_width(fine(thick).max(1) as u32);
        let done = self.backend.draw_line(point(from), point(to), &style);
        self.keep(done);
    }

    /// A polyline, thinned where nobody could see the difference.
    pub fn path(&mut self, points: &[(f64, f64)], thick: f64, colour: RGBColor) {
        let style = colour.stroke_width(fine(thick).max(1) as u32);
        let thin = thinned(points, 0.15);
        let done = match thin[..] {
            [] => return,
            [only] => self.backend.draw_circle(point(only), fine(thick) as u32, &colour.filled(), true),
            _ => self.backend.draw_path(thin.into_iter().map(point), &style),
        };
        self.keep(done);
    }

    /// A filled or open circle.
    pub fn circle(&mut self, centre: (f64, f64), radius: f64, colour: RGBColor, fill: bool) {
        let style = if fill { colour.filled() } else { colour.stroke_width(fine(1.3) as u32) };
        let done = self.backend.draw_circle(point(centre), fine(radius) as u32, &style, fill);
        self.keep(done);
    }

    /// A filled polygon.
    pub fn polygon(&mut self, corners: &[(f64, f64)], colour: RGBColor) {
        let done = self.backend.fill_polygon(corners.iter().copied().map(point), &colour.filled());
        self.keep(done);
    }

    /// A text whose middle height is at the point.
    pub fn text(&mut self, text: &str, at: (f64, f64), stand: Stand, colour: RGBColor) {
        self.lettering(text, at, stand, colour, FontStyle::Normal);
    }

    /// A text in bold.
    pub fn bold(&mut self, text: &str, at: (f64, f64), stand: Stand, colour: RGBColor) {
        self.lettering(text, at, stand, colour, FontStyle::Bold);
    }

    fn lettering(&mut self, text: &str, at: (f64, f64), stand: Stand, colour: RGBColor, style: FontStyle) {
        let h = match stand {
            Stand::Begin => HPos::Left,
            Stand::Middle => HPos::Center,
            Stand::End => HPos::Right,
        };
        let font = ("sans-serif", TEXT * FINE * PLOTTERS_TEXT).into_font().style(style);
        let look = TextStyle::from(font).color(&colour).pos(Pos::new(h, VPos::Center));
        // Control characters are not allowed in SVG.
        let clean: String = text.chars().map(|c| if c.is_control() { ' ' } else { c }).collect();
        let done = self.backend.draw_text(&clean, &look, point(at));
        self.keep(done);
    }

    /// The mark of a feature, in a box of 12 pixels about the point.
    ///
    /// A condition is a filled wedge, a jump a diamond, a release a ring, a break a stroke.
    pub fn mark(&mut self, kind: FeatureKind, (x, y): (f64, f64)) {
        match kind {
            FeatureKind::Condition => self.polygon(&[(x, y - 6.0), (x + 6.0, y + 6.0), (x - 6.0, y + 6.0)], INK),
            FeatureKind::Jump => {
                self.polygon(&[(x, y - 6.0), (x + 5.0, y), (x, y + 6.0), (x - 5.0, y)], LINES[1]);
            }
            FeatureKind::Release => self.circle((x, y), 4.5, INK, false),
            FeatureKind::Break => self.line((x, y - 6.0), (x, y + 6.0), 1.6, SOFT),
        }
    }
}

/// Fewer points, none of those left out further than `most` from the line drawn (Douglas and Peucker 1973).
fn thinned(points: &[(f64, f64)], most: f64) -> Vec<(f64, f64)> {
    let last = points.len().saturating_sub(1);
    if last < 2 {
        return points.to_vec();
    }
    let mut keep = vec![false; points.len()];
    keep[0] = true;
    keep[last] = true;
    let mut open = vec![(0, last)];
    while let Some((a, b)) = open.pop() {
        let ((x, y), (u, v)) = (points[a], points[b]);
        let (dx, dy) = (u - x, v - y);
        let length = dx.hypot(dy);
        let off = |p: (f64, f64)| {
            if length > 0.0 { ((p.0 - x) * dy - (p.1 - y) * dx).abs() / length } else { (p.0 - x).hypot(p.1 - y) }
        };
        let far = (a + 1..b).map(|k| (off(points[k]), k)).fold((0.0, a), |s, o| if o.0 > s.0 { o } else { s });
        if far.0 > most {
            keep[far.1] = true;
            open.push((a, far.1));
            open.push((far.1, b));
        }
    }
    points.iter().zip(keep).filter(|(_, k)| *k).map(|(p, _)| *p).collect()
}
