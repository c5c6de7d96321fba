//! Numbers with uncertain digits.

/// Concise notation of a value with its bar, `12.345 678(3)`: the digits in brackets are the bar in units of the
/// last digits shown (JCGM 100:2008, 7.2.2). The bar is rounded up, to one digit, or to two where its first is 1; groups
/// of three digits behind the point. Very large and very small numbers get a power of ten. No more than 17 digits are
/// shown; where the bar is finer than that, it is rounded up to the last digit shown.
///
/// # Example
/// ```
/// use spanwise::record::number::concise;
/// assert_eq!(concise(12.3456784, 2.4e-6), "12.345 678(3)");
/// assert_eq!(concise(-0.00012, 1.2e-5), "-0.000 120(12)");
/// assert_eq!(concise(1.5e12, 2e8), "1.500 0(2)e12");
/// assert_eq!(concise(0.0, 0.0), "0");
/// ```
pub fn concise(value: f64, error: f64) -> String {
    if !value.is_finite() {
        return "none".into();
    }
    if error <= 0.0 || error.is_nan() {
        return exact(value);
    }
    if !error.is_finite() {
        return format!("{}(inf)", exact(value));
    }
    let top = |x: f64| if x == 0.0 { i32::MIN } else { decade(x) };
    // Decade of the last digit shown.
    let (mut last, mut digits) = bar_digits(error);
    let leading = top(value).max(last);
    let finest = leading - 16;
    if last < finest {
        last = finest;
        digits = 1;
    }
    // The value rounded to that digit adds up to half a unit to what the bar must cover.
    let shown = rounded(value, last);
    let gap = (shown.parse::<f64>().unwrap_or(value) - value).abs();
    // The division by a power of ten may be off in its last digit.
    let needed = ((error + gap) / 10f64.powi(last) * (1.0 - 1e-9)).ceil();
    let unit_bar = if needed.is_finite() { needed.max(1.0) } else { digits as f64 };
    if unit_bar >= 100.0 {
        // Rounding up made a third digit: one place coarser.
        return concise(value, error * 1.000_001 + 10f64.powi(last));
    }
    let bar = format!("{unit_bar:.0}");
    let size = leading.max(last);
    if (-5..=9).contains(&size) && last <= 0 {
        return format!("{}({bar})", grouped(&fixed(value, (-last) as usize)));
    }
    // Power of ten: the first digit of the value, or of the bar where that is larger, stands before the point.
    let places = (size - last).max(0) as usize;
    let mantissa = scaled(value, size, places);
    format!("{}({bar})e{size}", grouped(&mantissa))
}

/// Decade of the first digit of a number.
fn decade(x: f64) -> i32 {
    let text = format!("{:e}", x.abs());
    text.split_once('e').and_then(|(_, e)| e.parse().ok()).unwrap_or(0)
}

/// Decade of the last digit of the bar and the bar in units of it.
fn bar_digits(error: f64) -> (i32, u32) {
    let first = decade(error);
    let lead = error / 10f64.powi(first);
    if lead < 2.0 {
        let two = (lead * 10.0 - 1e-9).ceil();
        (first - 1, two as u32)
    } else {
        let one = (lead - 1e-9).ceil();
        if one >= 10.0 { (first, 10) } else { (first, one as u32) }
    }
}

/// The value as text rounded to the decade `last`.
fn rounded(value: f64, last: i32) -> String {
    let size = if value == 0.0 { last } else { decade(value).max(last) };
    format!("{}e{size}", scaled(value, size, (size - last).max(0) as usize))
}

fn fixed(value: f64, places: usize) -> String {
    let text = format!("{value:.places$}");
    if text.trim_start_matches('-').chars().all(|c| c == '0' || c == '.') {
        text.trim_start_matches('-').to_owned()
    } else {
        text
    }
}

/// The value in units of 10^size, with that many places: the digits of the exact value, correctly rounded.
fn scaled(value: f64, size: i32, places: usize) -> String {
    if value != 0.0 && decade(value) == size {
        let text = format!("{value:.places$e}");
        let (digits, power) = text.split_once('e').unwrap_or((&text, ""));
        // Rounding may have reached the next decade.
        return if power.parse() == Ok(size) { digits.to_owned() } else { digits.replacen('1', "10", 1) };
    }
    let last = size - places as i32;
    let units = if last < -290 { value * 1e300 / 10f64.powi(last + 300) } else { value / 10f64.powi(last) };
    let whole = format!("{:.0}", units.abs());
    let padded = format!("{whole:0>width$}", width = places + 1);
    let (before, behind) = padded.split_at(padded.len() - places);
    let sign = if value < 0.0 && whole != "0" { "-" } else { "" };
    if behind.is_empty() { format!("{sign}{before}") } else { format!("{sign}{before}.{behind}") }
}

/// All digits of a value without bar.
fn exact(value: f64) -> String {
    if value == 0.0 {
        return "0".into();
    }
    if (1e-5..1e10).contains(&value.abs()) { grouped(&format!("{value}")) } else { format!("{value:e}") }
}

/// Groups of three digits behind the point.
fn grouped(text: &str) -> String {
    let Some((before, behind)) = text.split_once('.') else { return text.to_owned() };
    let mut out = format!("{before}.");
    for (k, c) in behind.chars().enumerate() {
        if k > 0 && k % 3 == 0 {
            out.push(' ');
        }
        out.push(c);
    }
    out
}

#[cfg(test)]
mod tests {
    use super::concise;
    use proptest::prelude::*;

    #[test]
    fn usual_and_unusual_numbers() {
        for (value, error, text) in [
            (48.9375, 3.0e-13, "48.937 500 000 000 0(3)"),
            (-5.742200153871071, 8.1e-15, "-5.742 200 153 871 071(9)"),
            (100.0, 0.3, "100.0(3)"),
            (99.97, 0.3, "100.0(4)"),
            (3.0, 12.0, "3(12)"),
            (1234567.0, 250.0, "1.234 6(3)e6"),
            (0.0, 2e-7, "0(2)e-7"),
            (1e-300, 2e-306, "1.000 000(2)e-300"),
            (5.0, 0.0, "5"),
            (0.1 + 0.2, 1e-30, "0.300 000 000 000 000 04(1)"),
            (2.0, f64::INFINITY, "2(inf)"),
        ] {
            assert_eq!(concise(value, error), text, "{value} {error}");
        }
    }

    /// Value and bar as a reader of the notation understands them.
    fn read(text: &str) -> (f64, f64) {
        let text = text.replace(' ', "");
        let (value, rest) = text.split_once('(').expect("a bar");
        let (bar, power) = rest.split_once(')').expect("a bar");
        let places = value.split_once('.').map_or(0, |(_, b)| b.len()) as i32;
        let ten: i32 = power.strip_prefix('e').map_or(0, |e| e.parse().expect("a power"));
        let number = |digits: &str, e: i32| format!("{digits}e{e}").parse::<f64>().expect("a number");
        (number(value, ten), number(bar, ten - places))
    }

    proptest! {
        #[test]
        fn what_is_shown_covers_what_is_known(v in -1.0f64..1.0, p in -30i32..30, q in -18i32..3, e in 1.0f64..10.0) {
            let value = v * 10f64.powi(p);
            let error = e * 10f64.powi(p + q);
            let (shown, bar) = read(&concise(value, error));
            // Every point within the true bar lies within the one shown.
            prop_assert!((shown - value).abs() + error <= bar * (1.0 + 1e-8) + 3e-16 * value.abs(), "{}", concise(value, error));
            prop_assert!(bar <= 4.0 * error + 2e-15 * value.abs(), "{}", concise(value, error));
        }
    }
}
