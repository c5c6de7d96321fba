use super::*;
use proptest::prelude::*;
use proptest::test_runner::RngSeed;

fn unit(text: &str) -> Unit {
    Unit::parse(text, true).unwrap_or_else(|e| panic!("{text}: {e:?}"))
}

/// NIST Special Publication 811 (2008), appendix B.8 and B.9: factors to seven digits, as printed there.
// Digits as printed, though some of them are those of pi.
#[allow(clippy::approx_constant)]
#[test]
fn factors_agree_with_the_printed_table() {
    #[rustfmt::skip]
    let table = [
        ("in", 2.54e-2, "m"), ("ft", 3.048e-1, "m"), ("lb", 4.535924e-1, "kg"), ("lbf", 4.448222, "N"),
        ("kip", 4.448222e3, "N"), ("psi", 6.894757e3, "Pa"), ("ksi", 6.894757e6, "Pa"), ("Btu", 1.055056e3, "J"),
        ("bar", 1e5, "Pa"), ("rpm", 1.047198e-1, "rad/s"), ("rev", 6.283185, "rad"), ("deg", 1.745329e-2, "rad"),
        ("kWh", 3.6e6, "J"), ("L", 1e-3, "m^3"), ("t", 1e3, "kg"), ("d", 8.64e4, "s"), ("h", 3.6e3, "s"),
        ("min", 6e1, "s"), ("lbf/ft^2", 4.788026e1, "Pa"), ("lb/ft^3", 1.601846e1, "kg/m^3"),
        ("lbf ft", 1.355818, "N m"), ("in^4", 4.162314e-7, "m^4"), ("ft^3/min", 4.719474e-4, "m^3/s"),
        ("Btu/h", 2.930711e-1, "W"), ("kWh/d", 4.166667e1, "W"), ("lbf/in", 1.751268e2, "N/m"),
        // The electronvolt and the angles: SI Brochure, 9th ed., table 8.
        ("eV", 1.602177e-19, "J"), ("%", 1e-2, "1"), ("ppm", 1e-6, "1"), ("mrad", 1e-3, "rad"),
    ];
    for (text, factor, si) in table {
        let (unit, si) = (unit(text), unit(si));
        assert_eq!(unit.dimension, si.dimension, "{text}");
        let relative = unit.factor / (si.factor * factor) - 1.0;
        assert!(relative.abs() < 5e-7, "{text}: {}", unit.factor);
    }
}

/// Each derived unit in base units: SI Brochure, 9th ed., tables 4 and 8.
#[test]
fn derived_units_in_base_units() {
    #[rustfmt::skip]
    let table = [
        ("N", "kg m/s^2"), ("Pa", "N/m^2"), ("J", "N m"), ("W", "J/s"), ("C", "A s"), ("V", "W/A"), ("F", "C/V"),
        ("Ω", "V/A"), ("ohm", "V/A"), ("\u{2126}", "V/A"), ("S", "A/V"), ("Wb", "V s"), ("T", "Wb/m^2"),
        ("H", "Wb/A"), ("lm", "cd sr"), ("lx", "lm/m^2"), ("Hz", "1/s"), ("Bq", "1/s"), ("Gy", "J/kg"),
        ("Sv", "J/kg"), ("kat", "mol/s"), ("rad", "m/m"), ("sr", "m^2/m^2"), ("1", "m/m"), ("kg", "1000 g"),
    ];
    for (text, base) in table {
        let base = match base.strip_prefix("1000 ") {
            Some(part) => Unit { factor: 1000.0 * unit(part).factor, ..unit(part) },
            None => unit(base),
        };
        assert_eq!((unit(text).factor, unit(text).dimension), (base.factor, base.dimension), "{text}");
    }
}

/// One rounding: the result is the double nearest to the true decimal value, which the literal spells.
#[test]
fn conversions_round_once() {
    #[rustfmt::skip]
    let table = [
        (160.0, "mm", 0.16), (0.3, "mm", 0.0003), (4180.0, "cm^4", 4.18e-5), (2140.0, "cm^4", 2.14e-5),
        (1.2, "um", 1.2e-6), (1.2, "\u{b5}m", 1.2e-6), (1.2, "\u{3bc}m", 1.2e-6), (9.81, "kN/m^3", 9810.0),
        (210.0, "GPa", 2.1e11), (7.0, "1/min", 7.0 / 60.0), (3.6, "km/h", 1.0), (0.7, "g/mm^3", 0.7e6),
        (20.0, "degC", 293.15), (-5.0, "degC", 268.15), (0.1, "°C", 273.25), (32.0, "degF", 273.15),
        (212.0, "degF", 373.15), (180.0, "deg", std::f64::consts::PI),
        (360.0, "deg", std::f64::consts::TAU), (30.0, "rpm", std::f64::consts::PI), (1.0, "in", 0.0254),
        (5.0, "%", 0.05), (1.0, "psi", 6_894.757_293_168_362), (1e300, "kPa", 1e303), (0.0, "mm", 0.0),
        (2.5, "Wh", 9000.0), (1.0, "ym", 1e-24), (3.0, "Qm", 3e30), (1.0, "rm^3", 1e-81), (3.2, "Pa s^0.42", 3.2),
    ];
    for (value, text, si) in table {
        let (unit, found) = (unit(text), unit(text).to_si(value));
        let slack = if text == "rm^3" { 2e-16 * si } else { 0.0 };
        assert!((found - si).abs() <= slack, "{value} {text}: {found:?} {si:?}");
        let back = unit.from_si(found);
        let slack = 4.0 * f64::EPSILON * value.abs().max(unit.offset / unit.factor);
        assert!((back - value).abs() <= slack, "{value} {text}: {back:?}");
    }
    assert_eq!(unit("degF").difference_from_si(5.0), 9.0);
    assert_eq!(unit("degC").difference_from_si(5.0), 5.0);
}

#[test]
fn texts_are_cleaned() {
    #[rustfmt::skip]
    let table = [
        ("kN*m", "kN m"), ("kN · m", "kN m"), (" kN  m ", "kN m"), ("W/(m K)", "W/(m K)"), ("W / (m*K)", "W/(m K)"),
        ("Pa s^0.42", "Pa s^0.42"), ("m^(1/2)", "m^(1/2)"), ("(m/s)^2", "(m/s)^2"), ("1/K", "1/K"), ("N m/m", "N m/m"),
        ("s^-1", "s^-1"), ("s^+1", "s^+1"), ("m^(-2)", "m^(-2)"), ("°C", "°C"),
    ];
    for (text, clean) in table {
        assert_eq!(unit(text).text, clean, "{text}");
        assert_eq!(unit(clean), unit(text), "{text}");
    }
    assert_eq!(unit("s^(21/50)").dimension, unit("s^0.42").dimension);
    assert_eq!(unit("(m/s)^2").dimension, unit("J/kg").dimension);
    // A bar takes the next factor only.
    assert_eq!(unit("W/m K").dimension, unit("W K/m").dimension);
}

#[test]
fn exact_symbols_go_before_prefixes() {
    #[rustfmt::skip]
    let table = [
        ("min", "60 s"), ("ft", "0.3048 m"), ("cd", "1 cd"), ("Pa", "1 Pa"), ("mol", "1 mol"), ("d", "86400 s"),
        ("h", "3600 s"), ("t", "1000 kg"), ("T", "1 T"), ("m", "1 m"), ("mm", "0.001 m"), ("hm", "100 m"),
        ("das", "10 s"), ("kip", "4448.2216152605 N"), ("Gy", "1 Gy"), ("mT", "0.001 T"), ("Mt", "1e9 kg"),
        ("mbar", "100 Pa"), ("hbar", "1e7 Pa"), ("mmol", "0.001 mol"), ("dm", "0.1 m"), ("kat", "1 kat"),
        ("kkat", "1000 kat"), ("mcd", "0.001 cd"), ("Em", "1e18 m"), ("nm", "1e-9 m"), ("dam", "10 m"),
    ];
    for (text, meaning) in table {
        let (value, base) = meaning.split_once(' ').expect("number and unit");
        let value: f64 = value.parse().expect("a number");
        assert_eq!(unit(text).factor, unit(base).to_si(value), "{text}");
        assert_eq!(unit(text).dimension, unit(base).dimension, "{text}");
    }
    // These take no prefix.
    for text in ["mmin", "kh", "kd", "kft", "mdeg", "krpm", "kpsi", "mdegC", "m%", "kppm", "kin", "klb", "k1"] {
        assert!(Unit::parse(text, true).is_err(), "{text}");
    }
}

#[test]
fn faults_have_place_and_hint() {
    #[rustfmt::skip]
    let table: &[(&str, std::ops::Range<usize>, &str, Option<&str>)] = &[
        ("", 0..0, "a unit is missing", Some("the unit of a pure number is 1")),
        ("kn", 0..2, "`kn` is not a unit", Some("did you mean kN?")),
        ("N/Mpa", 2..5, "`Mpa` is not a unit", Some("did you mean MPa?")),
        ("kN m2", 3..5, "`m2` is not a unit", Some("did you mean m^2?")),
        ("m²", 0..3, "`m²` is not a unit", Some("did you mean m^2?")),
        ("Nm", 0..2, "`Nm` is not a unit", Some("did you mean N m?")),
        ("kNm", 0..3, "`kNm` is not a unit", Some("did you mean kN m?")),
        ("l/sec", 0..1, "`l` is not a unit", Some("did you mean L?")),
        ("m/sec", 2..5, "`sec` is not a unit", Some("did you mean s?")),
        ("celsius", 0..7, "`celsius` is not a unit", Some("did you mean degC?")),
        ("℃", 0..3, "`℃` cannot stand here in a unit", Some("did you mean degC?")),
        ("KN", 0..2, "`KN` is not a unit", Some("did you mean kN?")),
        ("Kg", 0..2, "`Kg` is not a unit", Some("did you mean kg?")),
        ("atm", 0..3, "`atm` is not a unit", Some("1 atm is 101325 Pa")),
        ("width", 0..5, "`width` is not a unit", None),
        ("W/(m degC)", 5..9, "degC is an absolute temperature and stands alone only", Some("write K for differences of temperature: W/(m K)")),
        ("degC/m", 0..4, "degC is an absolute temperature and stands alone only", Some("write K for differences of temperature: W/(m K)")),
        ("degF^2", 0..4, "degF is an absolute temperature and stands alone only", Some("write K for differences of temperature: W/(m K)")),
        ("deg C", 0..5, "this reads as degree times C", Some("write degC for the temperature")),
        ("kN/", 3..3, "a unit is missing at the end", None),
        ("W/(m K", 2..3, "this parenthesis is not closed", None),
        ("m)", 1..2, "`)` cannot stand here in a unit", None),
        ("m^x", 1..2, "a number is missing behind ^", Some("write m^2, s^-1, s^0.42 or m^(1/2)")),
        ("m^99999", 1..7, "the exponent of a unit is out of range", None),
        ("m^(1/0)", 1..7, "the exponent of a unit is out of range", None),
        ("m^30000 m^30000", 0..15, "the exponent of a unit is out of range", None),
        ("m m^", 3..4, "a number is missing behind ^", Some("write m^2, s^-1, s^0.42 or m^(1/2)")),
        ("kN+m", 2..3, "`+` cannot stand here in a unit", None),
        ("2 m", 0..1, "`2` is not a unit", None),
        ("m**2", 2..3, "`*` cannot stand here in a unit", Some("a power is written with ^")),
    ];
    for (text, span, message, hint) in table {
        let error = Unit::parse(text, true).expect_err(text);
        assert_eq!(
            (error.span, error.message.as_str(), error.hint.as_deref()),
            (span.clone(), *message, *hint),
            "{text}"
        );
    }
    let error = Unit::parse("kN*m", false).expect_err("a star");
    assert_eq!((error.span, error.hint.as_deref()), (2..3, Some("join units by a blank: kN m")));
}

#[test]
fn a_literal_reaches_as_far_as_it_can() {
    #[rustfmt::skip]
    let table = [
        ("m/s^2*x", "m/s^2"), ("kN/m*x", "kN/m"), ("m / s", "m"), ("m/width", "m"), ("m/(s x)", "m"), ("m/(s kg)+1", "m/(s kg)"),
        ("kN m x", "kN m"), ("s^-1", "s^-1"), ("s^0.42)", "s^0.42"), ("m+", "m"), ("m-", "m"), ("mm and x", "mm"),
        ("h or x", "h"), ("1/K*(T", "1/K"), ("m^n", "m"), ("N·m-2", "N m"), ("% *q", "%"), ("W/(m K)*(", "W/(m K)"),
        ("m/s/s", "m/s/s"), ("m^2x", "m"),
    ];
    for (text, expected) in table {
        let (unit, used) = scan(text).expect("no fault").expect("a unit");
        assert_eq!(unit.text, expected, "{text}");
        assert!(text.is_char_boundary(used) && !text[used..].starts_with(char::is_alphanumeric) || text == "m^2x");
    }
    for text in ["x", "width*2", "and x", "1", "1 m", "1/x", "1/2", "2 m", "", "kn", "/m", "^2"] {
        assert_eq!(scan(text), Ok(None), "{text}");
    }
    for text in ["W/(m degC)", "degC/m", "deg C", "m^99999"] {
        assert!(scan(text).is_err(), "{text}");
    }
}

#[test]
fn coherent_units_by_dimension() {
    for text in ["N/m", "N m", "W/(m K)", "Pa s", "kg^2 cd/s^3", "s^0.42", "1", "1/m^(1/3)"] {
        let dimension = unit(text).dimension;
        let si = Unit::si(dimension);
        assert_eq!((si.factor, si.offset, si.dimension), (1.0, 0.0, dimension));
        assert_eq!(unit(&si.text).dimension, dimension, "{text}: {}", si.text);
        assert_eq!(unit(&dimension.to_string()).dimension, dimension, "{text}: {dimension}");
    }
    // Every line of the table of usual units says what its exponents say.
    for (usual, dimension) in dimension::usual_units() {
        assert_eq!(unit(usual).dimension, dimension, "{usual}");
        assert_eq!(unit(usual).factor, 1.0, "{usual}");
    }
}

#[test]
fn capitals_that_name_another_unit() {
    let wanted = Dimension::TEMPERATURE;
    assert_eq!(mistaken(&unit("C"), wanted).as_deref(), Some("C is the coulomb; the degree Celsius is degC"),);
    assert!(mistaken(&unit("S"), Dimension::TIME).is_some());
    assert_eq!(mistaken(&unit("C"), Dimension::TIME), None);
    assert_eq!(mistaken(&unit("degC"), wanted), None);
}

#[test]
fn nesting_is_bounded() {
    let deep = format!("{}m{}", "(".repeat(10_000), ")".repeat(10_000));
    assert!(Unit::parse(&deep, true).is_err());
    let long = vec!["m/m"; 100_000].join(" ");
    let unit = unit(&long);
    assert!(unit.dimension.is_none() && unit.factor == 1.0);
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 5000, rng_seed: RngSeed::Fixed(2_385), failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn no_text_panics(text in "\\PC{0,20}", star: bool) {
        let _ = Unit::parse(&text, star);
        if let Ok(Some((_, used))) = scan(&text) {
            prop_assert!(used > 0 && text.is_char_boundary(used));
        }
    }

    #[test]
    fn no_likely_text_panics(text in "[kmNPasKdegCF1 /*^().0-9·°µ%-]{0,20}", star: bool) {
        let whole = Unit::parse(&text, star);
        if let Err(error) = &whole {
            prop_assert!(error.span.start <= error.span.end && error.span.end <= text.len());
            prop_assert!(text.get(error.span.clone()).is_some());
        }
        if let Ok(unit) = whole {
            prop_assert!(unit.factor > 0.0, "{unit:?}");
            prop_assert_eq!(Unit::parse(&unit.text, false).map(|u| u.dimension), Ok(unit.dimension));
        }
    }
}
