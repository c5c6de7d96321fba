//! Unit symbols and prefixes with exact factors.

use super::dimension::Dimension;
use super::scale::Scale;

/// A symbol of the table.
pub(super) struct Entry {
    pub(super) symbol: &'static str,
    pub(super) scale: Scale,
    /// SI value of the unit's zero.
    pub(super) offset: Scale,
    pub(super) dimension: Dimension,
    pub(super) prefixes: bool,
}

impl Entry {
    pub(super) fn prefixed_scale(&self, power: i32) -> Scale {
        self.scale.times(Scale::ten_to(power))
    }
}

pub(super) const NO_OFFSET: Scale = Scale::ratio(0, 1);

const fn entry(symbol: &'static str, scale: Scale, exponents: [i8; 7], prefixes: bool) -> Entry {
    Entry { symbol, scale, offset: NO_OFFSET, dimension: Dimension::whole(exponents), prefixes }
}

const fn si(symbol: &'static str, exponents: [i8; 7]) -> Entry {
    entry(symbol, Scale::ONE, exponents, true)
}

const fn other(symbol: &'static str, num: u128, den: u128, exponents: [i8; 7]) -> Entry {
    entry(symbol, Scale::ratio(num, den), exponents, false)
}

const fn prefixed(symbol: &'static str, num: u128, den: u128, exponents: [i8; 7]) -> Entry {
    entry(symbol, Scale::ratio(num, den), exponents, true)
}

/// A unit of temperature with a zero of its own.
const fn absolute(symbol: &'static str, scale: Scale, offset: Scale) -> Entry {
    Entry { symbol, scale, offset, dimension: Dimension::whole(KELVIN), prefixes: false }
}

// Exponents of kg, m, s, A, K, mol, cd.
const NUMBER: [i8; 7] = [0; 7];
const MASS: [i8; 7] = [1, 0, 0, 0, 0, 0, 0];
const LENGTH: [i8; 7] = [0, 1, 0, 0, 0, 0, 0];
const TIME: [i8; 7] = [0, 0, 1, 0, 0, 0, 0];
const RATE: [i8; 7] = [0, 0, -1, 0, 0, 0, 0];
const KELVIN: [i8; 7] = [0, 0, 0, 0, 1, 0, 0];
const FORCE: [i8; 7] = [1, 1, -2, 0, 0, 0, 0];
const PRESSURE: [i8; 7] = [1, -1, -2, 0, 0, 0, 0];
const ENERGY: [i8; 7] = [1, 2, -2, 0, 0, 0, 0];

/// The international pound, kg: 0.453 592 37 exactly.
const POUND: (u128, u128) = (45_359_237, 100_000_000);
/// Pound times standard gravity 9.806 65 m/s^2, N: 4.448 221 615 260 5 exactly.
const POUND_FORCE: (u128, u128) = (POUND.0 * 980_665, POUND.1 * 100_000);
/// Pound-force per square inch, Pa.
const PSI: (u128, u128) = (POUND_FORCE.0 * 10_000 * 10_000, POUND_FORCE.1 * 254 * 254);

#[rustfmt::skip]
pub(super) const UNITS: &[Entry] = &[
    // Base units and the 22 derived units with names: SI Brochure, 9th ed. (2019), tables 2 and 4.
    // The gram stands for the kilogram, which carries a prefix of its own.
    prefixed("g", 1, 1000, MASS),
    si("m", LENGTH),
    si("s", TIME),
    si("A", [0, 0, 0, 1, 0, 0, 0]),
    si("K", KELVIN),
    si("mol", [0, 0, 0, 0, 0, 1, 0]),
    si("cd", [0, 0, 0, 0, 0, 0, 1]),
    si("rad", NUMBER),
    si("sr", NUMBER),
    si("Hz", RATE),
    si("N", FORCE),
    si("Pa", PRESSURE),
    si("J", ENERGY),
    si("W", [1, 2, -3, 0, 0, 0, 0]),
    si("C", [0, 0, 1, 1, 0, 0, 0]),
    si("V", [1, 2, -3, -1, 0, 0, 0]),
    si("F", [-1, -2, 4, 2, 0, 0, 0]),
    si("Ω", [1, 2, -3, -2, 0, 0, 0]),
    si("ohm", [1, 2, -3, -2, 0, 0, 0]),
    si("S", [-1, -2, 3, 2, 0, 0, 0]),
    si("Wb", [1, 2, -2, -1, 0, 0, 0]),
    si("T", [1, 0, -2, -1, 0, 0, 0]),
    si("H", [1, 2, -2, -2, 0, 0, 0]),
    si("lm", [0, 0, 0, 0, 0, 0, 1]),
    si("lx", [0, -2, 0, 0, 0, 0, 1]),
    si("Bq", RATE),
    si("Gy", [0, 2, -2, 0, 0, 0, 0]),
    si("Sv", [0, 2, -2, 0, 0, 0, 0]),
    si("kat", [0, 0, -1, 0, 0, 1, 0]),
    absolute("degC", Scale::ONE, Scale::ratio(27_315, 100)),
    absolute("°C", Scale::ONE, Scale::ratio(27_315, 100)),

    // Units accepted beside the SI: SI Brochure, table 8; the electronvolt with the exact elementary charge of
    // section 2.2; bar, revolution and parts per million: NIST SP 811 (2008), B.8 and 7.10.3.
    other("min", 60, 1, TIME),
    other("h", 3600, 1, TIME),
    other("d", 86_400, 1, TIME),
    prefixed("L", 1, 1000, [0, 3, 0, 0, 0, 0, 0]),
    prefixed("t", 1000, 1, MASS),
    prefixed("bar", 100_000, 1, PRESSURE),
    prefixed("eV", 1_602_176_634, 10_u128.pow(28), ENERGY),
    prefixed("Wh", 3600, 1, ENERGY),
    entry("deg", Scale::with_pi(1, 180), NUMBER, false),
    entry("rev", Scale::with_pi(2, 1), NUMBER, false),
    entry("rpm", Scale::with_pi(1, 30), RATE, false),
    other("%", 1, 100, NUMBER),
    other("ppm", 1, 1_000_000, NUMBER),

    // Customary units, exact: NIST SP 811 (2008), appendix B.6 and B.8. The Btu is that of the International Table:
    // 4.1868 J/(g K) times a pound times 5/9 K.
    other("in", 254, 10_000, LENGTH),
    other("ft", 3048, 10_000, LENGTH),
    other("lb", POUND.0, POUND.1, MASS),
    other("lbf", POUND_FORCE.0, POUND_FORCE.1, FORCE),
    other("kip", POUND_FORCE.0 * 1000, POUND_FORCE.1, FORCE),
    other("psi", PSI.0, PSI.1, PRESSURE),
    other("ksi", PSI.0 * 1000, PSI.1, PRESSURE),
    other("Btu", 105_505_585_262, 100_000_000, ENERGY),
    absolute("degF", Scale::ratio(5, 9), Scale::ratio(45_967, 180)),
];

/// Prefixes with their powers of ten: SI Brochure, 9th ed. (update of 2022), table 7. Micro in three spellings:
/// `u`, U+00B5, U+03BC.
pub(super) const PREFIXES: &[(&str, i32)] = &[
    ("k", 3),
    ("M", 6),
    ("G", 9),
    ("m", -3),
    ("c", -2),
    ("u", -6),
    ("\u{b5}", -6),
    ("\u{3bc}", -6),
    ("n", -9),
    ("d", -1),
    ("h", 2),
    ("da", 1),
    ("T", 12),
    ("P", 15),
    ("E", 18),
    ("Z", 21),
    ("Y", 24),
    ("R", 27),
    ("Q", 30),
    ("p", -12),
    ("f", -15),
    ("a", -18),
    ("z", -21),
    ("y", -24),
    ("r", -27),
    ("q", -30),
];

/// A symbol with its prefix. An exact symbol goes before prefix and symbol: `min` is the minute, `Pa` the pascal,
/// `cd` the candela, `ft` the foot.
pub(super) fn lookup(symbol: &str) -> Option<(&'static Entry, i32)> {
    // The ohm sign is a compatibility character of the Greek letter.
    let greek;
    let symbol = if symbol.contains('\u{2126}') {
        greek = symbol.replace('\u{2126}', "Ω");
        &greek
    } else {
        symbol
    };
    let exact = |s: &str| UNITS.iter().find(|u| u.symbol == s);
    if let Some(unit) = exact(symbol) {
        return Some((unit, 0));
    }
    PREFIXES.iter().find_map(|(prefix, power)| {
        let unit = exact(symbol.strip_prefix(prefix)?)?;
        unit.prefixes.then_some((unit, *power))
    })
}
