//! Axes: ranges, round ticks, engineering powers, labels. Numbers in, numbers and labels out; no drawing.

/// Values smaller than this are drawn as zero: powers of ten near the end of the number range are inexact.
const SMALLEST: f64 = 1e-290;
/// A range narrower than this part of its values is drawn as a constant: below it rounding is all there is to see.
const FLAT: f64 = 1e-12;
/// A step narrower than this part of the values would need labels of too many digits: a base is taken off.
const NARROW: f64 = 1e-5;

/// A linear axis: `shown = value / 10^exponent - base`.
#[derive(Debug, Clone, PartialEq)]
pub struct Axis {
    /// Exponent of ten, a multiple of three.
    pub exponent: i32,
    /// What is taken off, in multiples of the power.
    pub base: f64,
    /// Ends, as shown.
    pub ends: (f64, f64),
    /// Ticks, as shown, with their labels.
    pub ticks: Vec<(f64, String)>,
}

impl Axis {
    /// An axis that holds all finite `values`, widened by the part `room` of the range at both ends.
    pub fn holding(values: impl Iterator<Item = f64>, room: f64, most_ticks: usize) -> Self {
        let (mut low, mut high) = (f64::INFINITY, f64::NEG_INFINITY);
        for value in values.filter(|v| v.is_finite()) {
            low = low.min(value);
            high = high.max(value);
        }
        if low > high {
            (low, high) = (0.0, 0.0);
        }
        let exponent = engineering(low.abs().max(high.abs()));
        let (mut low, mut high) = (scaled(low, exponent), scaled(high, exponent));
        let size = low.abs().max(high.abs());
        let mut base = 0.0;
        if size < SMALLEST || high - low <= FLAT * size {
            let half = if size < SMALLEST { 1.0 } else { 0.2 * size };
            (low, high) = (low - half, high + half);
        } else {
            let step = round_step((high - low) / most_ticks as f64);
            if step < NARROW * size {
                base = (low / step).floor() * step;
            }
            let widen = room * (high - low);
            (low, high) = (low - base - widen, high - base + widen);
        }
        let step = round_step((high - low) / most_ticks as f64);
        let places = (-step.log10().floor()).clamp(0.0, 17.0) as usize;
        let first = (low / step - 1e-9).ceil();
        let count = ((high / step + 1e-9).floor() - first).clamp(0.0, 2.0 * most_ticks as f64) as usize;
        let ticks = (0..=count).map(|k| (first + k as f64) * step).map(|t| (t, fixed(t, places))).collect();
        Self { exponent, base, ends: (low, high), ticks }
    }

    /// Where `value` stands between the ends: 0 at the lower, 1 at the upper.
    pub fn place(&self, value: f64) -> f64 {
        let (low, high) = self.ends;
        ((self.shown(value) - low) / (high - low)).clamp(-1.0, 2.0)
    }

    /// The value as the axis shows it: in multiples of the power, without what was taken off.
    pub fn shown(&self, value: f64) -> f64 {
        scaled(value, self.exponent) - self.base
    }

    /// Title: name, what was taken off, power and unit.
    pub fn title(&self, name: &str, unit: &str) -> String {
        let mut title = name.to_owned();
        if self.base != 0.0 {
            let sign = if self.base < 0.0 { "+" } else { "−" };
            title.push_str(&format!(" {sign} {}", few(self.base.abs() * 10f64.powi(self.exponent), 12)));
        }
        let power = if self.exponent == 0 { String::new() } else { format!("10{}", superscript(self.exponent)) };
        let unit = if unit == "1" { String::new() } else { pretty(unit) };
        match (power.is_empty(), unit.is_empty()) {
            (true, true) => title,
            (false, true) => format!("{title} in {power}"),
            (true, false) => format!("{title} in {unit}"),
            (false, false) => format!("{title} in {power} {unit}"),
        }
    }
}

/// `value / 10^exponent`, in two steps so that neither power leaves the number range.
fn scaled(value: f64, exponent: i32) -> f64 {
    let half = exponent / 2;
    value / 10f64.powi(half) / 10f64.powi(exponent - half)
}

/// The multiple of three that leaves one to three digits before the point; zero where plain numbers read well.
fn engineering(size: f64) -> i32 {
    if size.is_nan() || size < SMALLEST || size.is_infinite() || (0.1..10_000.0).contains(&size) {
        0
    } else {
        3 * (size.log10() / 3.0 + 1e-12).floor() as i32
    }
}

/// The next of 1, 2, 5 times a power of ten at or above `step`.
fn round_step(step: f64) -> f64 {
    let power = 10f64.powf(step.log10().floor());
    let lead = step / power;
    let round = [1.0, 2.0, 5.0].into_iter().find(|r| lead <= r * (1.0 + 1e-9)).unwrap_or(10.0);
    round * power
}

/// Fixed places, a real minus sign, never minus zero.
fn fixed(value: f64, places: usize) -> String {
    let text = format!("{value:.places$}");
    let zero = text.chars().all(|c| matches!(c, '-' | '0' | '.'));
    if zero { "0".to_owned() } else { text.replace('-', "−") }
}

/// A number in few digits, for labels: plain where it reads well, else with a power of ten.
pub fn few(value: f64, digits: usize) -> String {
    if !value.is_finite() {
        return "no value".to_owned();
    }
    if value == 0.0 {
        return "0".to_owned();
    }
    let scientific = format!("{:.*e}", digits.saturating_sub(1), value);
    let (mantissa, exponent) = scientific.split_once('e').unwrap_or((&scientific, "0"));
    let exponent: i32 = exponent.parse().unwrap_or(0);
    let text = if (-3..6).contains(&exponent) {
        let places = (digits as i32 - 1 - exponent).max(0) as usize;
        trimmed(&format!("{value:.places$}"))
    } else {
        power_of_ten(&trimmed(mantissa), exponent)
    };
    text.replace('-', "−")
}

fn power_of_ten(mantissa: &str, exponent: i32) -> String {
    let power = format!("10{}", superscript(exponent));
    match mantissa {
        "1" => power,
        "-1" => format!("-{power}"),
        _ => format!("{mantissa}·{power}"),
    }
}

/// A sentence with its computer-written powers (`2.9e-16`) as print shows them (`2.9·10⁻¹⁶`).
pub fn typeset(text: &str) -> String {
    let number = |m: &str| !m.is_empty() && m.chars().all(|c| c.is_ascii_digit() || c == '.' || c == '-');
    let word = |word: &str| {
        let bare = word.trim_end_matches([',', ';', '.', ':', ')']);
        let tail = &word[bare.len()..];
        let parts = bare.split_once('e').filter(|(m, _)| number(m));
        match parts.and_then(|(m, e)| Some((m, e.parse::<i32>().ok()?))) {
            Some((m, 0)) => format!("{}{tail}", trimmed(m)),
            Some((m, e)) => format!("{}{tail}", power_of_ten(m, e)).replace('-', "−"),
            None => word.to_owned(),
        }
    };
    text.split(' ').map(word).collect::<Vec<_>>().join(" ")
}

/// Without zeros at the end of the fraction.
fn trimmed(text: &str) -> String {
    if text.contains('.') { text.trim_end_matches('0').trim_end_matches('.').to_owned() } else { text.to_owned() }
}

/// An exponent in raised digits.
fn superscript(exponent: i32) -> String {
    exponent.to_string().chars().map(raised).collect()
}

fn raised(c: char) -> char {
    match c {
        '-' => '⁻',
        '1' => '¹',
        '2' => '²',
        '3' => '³',
        '0' => '⁰',
        '4'..='9' => char::from_u32(u32::from(c) - u32::from('4') + 0x2074).unwrap_or(c),
        other => other,
    }
}

/// A unit as print shows it: a raised dot for products, raised digits for whole powers, a degree sign.
pub fn pretty(unit: &str) -> String {
    let mut out = String::with_capacity(unit.len());
    let mut rest = unit;
    while let Some(c) = rest.chars().next() {
        rest = &rest[c.len_utf8()..];
        match c {
            '*' => out.push('·'),
            '^' => {
                let end = rest
                    .char_indices()
                    .find(|&(i, c)| !(c.is_ascii_digit() || (i == 0 && c == '-')))
                    .map_or(rest.len(), |(i, _)| i);
                // A fraction as power keeps its caret.
                if end > 0 && &rest[..end] != "-" && !rest[end..].starts_with('.') {
                    out.extend(rest[..end].chars().map(raised));
                    rest = &rest[end..];
                } else {
                    out.push('^');
                }
            }
            other => out.push(other),
        }
    }
    out.replace("degC", "°C").replace("degF", "°F")
}

/// A logarithmic axis in decades: ends and ticks as exponents of ten.
#[derive(Debug, Clone, PartialEq)]
pub struct Decades {
    /// Ends.
    pub ends: (i32, i32),
    /// Ticks, with their labels.
    pub ticks: Vec<(i32, String)>,
}

impl Decades {
    /// Whole decades that hold the positive `values`, at most `deepest` of them below the largest.
    pub fn holding(values: impl Iterator<Item = f64>, deepest: i32, most_ticks: i32) -> Self {
        let (mut low, mut high) = (i32::MAX, i32::MIN);
        for value in values.filter(|v| v.is_finite() && *v > 0.0) {
            low = low.min(value.log10().floor() as i32);
            high = high.max(value.log10().ceil() as i32);
        }
        if low > high {
            (low, high) = (-1, 0);
        }
        let low = low.max(high - deepest).min(high - 1);
        let step = [1, 2, 3, 5, 10, 20, 50, 100].into_iter().find(|s| (high - low) / s <= most_ticks).unwrap_or(200);
        let ticks = (low..=high).filter(|k| k % step == 0).map(|k| (k, format!("10{}", superscript(k)))).collect();
        Self { ends: (low, high), ticks }
    }

    /// Where `value` stands between the ends; what is below the lower end, or zero, stands on it.
    pub fn place(&self, value: f64) -> f64 {
        let (low, high) = (f64::from(self.ends.0), f64::from(self.ends.1));
        if value > 0.0 { ((value.log10() - low) / (high - low)).clamp(0.0, 1.0) } else { 0.0 }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn ticks_are_round_and_inside() {
        let ranges = [(0.0, 1.0), (-3.7e-9, 2.2e-8), (1e12, 5e12), (-7.0, 0.0), (1e-320, 1e300), (1000.0, 1000.00001)];
        for (low, high) in ranges {
            let axis = Axis::holding([low, high].into_iter(), 0.1, 6);
            assert!(axis.ticks.len() >= 2 && axis.ticks.len() <= 9, "{axis:?}");
            assert!(axis.ticks.iter().all(|(t, _)| *t >= axis.ends.0 - 1e-9 && *t <= axis.ends.1 + 1e-9), "{axis:?}");
            assert!(axis.ticks.iter().all(|(_, l)| l.chars().count() <= 9), "{axis:?}");
            assert!(axis.place(low) > 0.0 && axis.place(high) < 1.0);
        }
    }

    #[test]
    fn constants_zero_and_nothing_have_an_axis() {
        for values in [vec![], vec![0.0], vec![f64::NAN], vec![5.0, 5.0], vec![-2e20], vec![f64::MAX, f64::MIN]] {
            let axis = Axis::holding(values.iter().copied(), 0.1, 6);
            assert!(axis.ends.0 < axis.ends.1 && axis.ticks.len() >= 2, "{values:?} {axis:?}");
        }
    }

    #[test]
    fn units_and_numbers_in_print() {
        assert_eq!(pretty("W/m^2/K"), "W/m²/K");
        assert_eq!(pretty("N*m"), "N·m");
        assert_eq!(pretty("degC"), "°C");
        assert_eq!(pretty("m^-3"), "m⁻³");
        assert_eq!(pretty("m^0.5"), "m^0.5");
        assert_eq!(few(-0.001234567, 4), "−0.001235");
        assert_eq!(few(1.5e-9, 4), "1.5·10⁻⁹");
        assert_eq!(few(-1e-10, 2), "−10⁻¹⁰");
        assert_eq!(few(1200.0, 4), "1200");
        assert_eq!(few(0.0, 4), "0");
    }

    #[test]
    fn sentences_in_print() {
        assert_eq!(typeset("2.9e-16 in the mean, 5.1e-16 at most"), "2.9·10⁻¹⁶ in the mean, 5.1·10⁻¹⁶ at most");
        assert_eq!(typeset("open by 0.0e0 of it, 1.6e3."), "open by 0 of it, 1.6·10³.");
        assert_eq!(typeset("the e2e test, 3e, inf"), "the e2e test, 3e, inf");
    }

    #[test]
    fn engineering_powers() {
        assert_eq!(engineering(25_000.0), 3);
        assert_eq!(engineering(1e6), 6);
        assert_eq!(engineering(0.02), -3);
        assert_eq!(engineering(3.0), 0);
        assert_eq!(Axis::holding([0.0, 25e3].into_iter(), 0.0, 5).title("Q", "N*m"), "Q in 10³ N·m");
    }
}
