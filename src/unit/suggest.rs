//! What was probably meant by a symbol that is no unit.

use super::table::{PREFIXES, UNITS, lookup};
use super::{Dimension, Unit};

/// Words and foreign symbols people write for units.
#[rustfmt::skip]
const WORDS: &[(&str, &str)] = &[
    ("sec", "s"), ("secs", "s"), ("second", "s"), ("seconds", "s"), ("minute", "min"), ("minutes", "min"),
    ("mins", "min"), ("hr", "h"), ("hrs", "h"), ("hour", "h"), ("hours", "h"), ("day", "d"), ("days", "d"),
    ("l", "L"), ("ml", "mL"), ("liter", "L"), ("litre", "L"), ("meter", "m"), ("metre", "m"), ("meters", "m"),
    ("metres", "m"), ("cc", "cm^3"), ("micron", "um"), ("inch", "in"), ("inches", "in"), ("foot", "ft"),
    ("feet", "ft"), ("lbs", "lb"), ("pound", "lb"), ("kips", "kip"), ("gram", "g"), ("grams", "g"), ("gr", "g"),
    ("kilo", "kg"), ("kgs", "kg"), ("ton", "t"), ("tons", "t"), ("tonne", "t"), ("tonnes", "t"), ("to", "t"),
    ("newton", "N"), ("pascal", "Pa"), ("joule", "J"), ("watt", "W"), ("watts", "W"), ("volt", "V"),
    ("volts", "V"), ("amp", "A"), ("amps", "A"), ("ampere", "A"), ("kelvin", "K"), ("degK", "K"), ("°K", "K"),
    ("celsius", "degC"), ("Celsius", "degC"), ("DegC", "degC"), ("degc", "degC"), ("℃", "degC"), ("ºC", "degC"),
    ("fahrenheit", "degF"), ("Fahrenheit", "degF"), ("°F", "degF"), ("℉", "degF"), ("degf", "degF"),
    ("radian", "rad"), ("radians", "rad"), ("degree", "deg"), ("degrees", "deg"), ("°", "deg"), ("turn", "rev"),
    ("percent", "%"), ("pct", "%"), ("mole", "mol"), ("moles", "mol"), ("BTU", "Btu"), ("btu", "Btu"),
    ("kph", "km/h"), ("kmh", "km/h"), ("mps", "m/s"), ("gpm", "L/min"), ("sqm", "m^2"), ("cycles", "rev"),
    ("Nm", "N m"), ("Ns", "N s"), ("As", "A s"), ("Ah", "A h"), ("Ws", "W s"), ("Vs", "V s"), ("Ohm", "ohm"), ("ohms", "ohm"), ("bars", "bar"),
];

/// Units outside the table, and what they are in units of the table.
/// NIST SP 811 (2008), appendix B.8.
#[rustfmt::skip]
const CONVERSIONS: &[(&str, &str)] = &[
    ("atm", "1 atm is 101325 Pa"),
    ("at", "1 at is 98066.5 Pa"),
    ("mmHg", "1 mmHg is about 133.322 Pa"),
    ("Torr", "1 Torr is about 133.322 Pa"),
    ("cal", "1 cal is 4.184 J"),
    ("kcal", "1 kcal is 4184 J"),
    ("hp", "1 hp is about 745.6999 W"),
    ("kgf", "1 kgf is 9.80665 N"),
    ("kp", "1 kp is 9.80665 N"),
    ("dyn", "1 dyn is 1e-5 N"),
    ("erg", "1 erg is 1e-7 J"),
    ("yd", "1 yd is 0.9144 m"),
    ("mi", "1 mi is 1609.344 m"),
    ("mile", "1 mile is 1609.344 m"),
    ("mph", "1 mph is 0.44704 m/s"),
    ("oz", "1 oz is 28.349523125 g"),
    ("slug", "1 slug is about 14.5939 kg"),
    ("gal", "1 US gal is 3.785411784 L"),
    ("acre", "1 acre is about 4046.873 m^2"),
    ("ha", "1 ha is 1e4 m^2"),
    ("yr", "write 365 d or 365.25 d"),
    ("year", "write 365 d or 365.25 d"),
    ("week", "write 7 d"),
    ("P", "1 P (poise) is 0.1 Pa s"),
    ("cP", "1 cP is 1e-3 Pa s"),
    ("St", "1 St is 1e-4 m^2/s"),
    ("cSt", "1 cSt is 1e-6 m^2/s"),
    ("M", "1 M is 1 mol/L"),
    ("Da", "1 Da is about 1.66053906892e-27 kg"),
    ("Å", "1 Å is 0.1 nm"),
];

/// A hint for a symbol that is no unit, if there is a likely one.
///
/// ```
/// assert_eq!(spanwise::unit::suggest("kn").as_deref(), Some("did you mean kN?"));
/// assert_eq!(spanwise::unit::suggest("mm2").as_deref(), Some("did you mean mm^2?"));
/// assert_eq!(spanwise::unit::suggest("kNm").as_deref(), Some("did you mean kN m?"));
/// ```
pub fn suggest(symbol: &str) -> Option<String> {
    if symbol.chars().count() > 12 {
        return None;
    }
    if let Some((_, text)) = CONVERSIONS.iter().find(|(word, _)| *word == symbol) {
        return Some((*text).into());
    }
    let meant =
        word(symbol).or_else(|| with_exponent(symbol)).or_else(|| other_case(symbol)).or_else(|| joined(symbol, 3))?;
    Some(format!("did you mean {meant}?"))
}

/// What was probably meant by a unit that is right in itself but of a dimension not wanted: `C` for a temperature.
pub fn mistaken(unit: &Unit, wanted: Dimension) -> Option<String> {
    let table = [
        ("C", Dimension::TEMPERATURE, "coulomb", "degree Celsius is degC"),
        ("F", Dimension::TEMPERATURE, "farad", "degree Fahrenheit is degF"),
        ("S", Dimension::TIME, "siemens", "second is s"),
        ("H", Dimension::TIME, "henry", "hour is h"),
        ("T", Dimension::MASS, "tesla", "tonne is t"),
    ];
    let (symbol, _, name, meant) = table.iter().find(|(s, d, ..)| *s == unit.text && *d == wanted)?;
    Some(format!("{symbol} is the {name}; the {meant}"))
}

fn word(symbol: &str) -> Option<String> {
    let lower = symbol.to_lowercase();
    // A word may begin with a capital; short symbols may not, for there capitals decide.
    let same = |word: &str| word == symbol || (word.chars().count() > 3 && word == lower);
    WORDS.iter().find(|(word, _)| same(word)).map(|(_, unit)| (*unit).into())
}

/// `mm2`, `m²`
fn with_exponent(symbol: &str) -> Option<String> {
    let digit = |c: char| match c {
        '0'..='9' => Some(c),
        '²' => Some('2'),
        '³' => Some('3'),
        '⁴' => Some('4'),
        '⁻' => Some('-'),
        '¹' => Some('1'),
        _ => None,
    };
    let stem = symbol.trim_end_matches(|c| digit(c).is_some());
    let exponent: String = symbol[stem.len()..].chars().filter_map(digit).collect();
    let usable = exponent.parse::<i16>().is_ok_and(|n| n != 0);
    (usable && lookup(stem).is_some()).then(|| format!("{stem}^{exponent}"))
}

/// `kn`, `Mpa`, `KN`: right but for the case of letters; the candidate with most letters kept.
fn other_case(symbol: &str) -> Option<String> {
    let lower = symbol.to_lowercase();
    let mut best: Option<(usize, String)> = None;
    let bare = [("", 0)];
    for (prefix, _) in bare.iter().chain(PREFIXES) {
        for unit in UNITS {
            if !prefix.is_empty() && !unit.prefixes {
                continue;
            }
            let candidate = format!("{prefix}{}", unit.symbol);
            if candidate.to_lowercase() != lower {
                continue;
            }
            let kept = candidate.chars().zip(symbol.chars()).filter(|(a, b)| a == b).count();
            if best.as_ref().is_none_or(|(most, _)| kept > *most) {
                best = Some((kept, candidate));
            }
        }
    }
    best.map(|(_, candidate)| candidate)
}

/// `kNm`, `Pas`: units run together.
fn joined(symbol: &str, parts: usize) -> Option<String> {
    if lookup(symbol).is_some() {
        return Some(symbol.into());
    }
    if parts == 1 {
        return None;
    }
    symbol.char_indices().skip(1).find_map(|(at, _)| {
        let (head, tail) = symbol.split_at(at);
        lookup(head)?;
        Some(format!("{head} {}", joined(tail, parts - 1)?))
    })
}
