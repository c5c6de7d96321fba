//! Constants of nature by name. A name that the sheet itself gives wins.

use crate::formula::number::Rounded;
use crate::unit::Unit;

/// A constant of nature.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Constant {
    /// Its name in formulas.
    pub name: &'static str,
    /// Its value in digits.
    pub value: &'static str,
    /// Unit of the value.
    pub unit: &'static str,
    /// What it is, and whether it is exact.
    pub meaning: &'static str,
}

const fn constant(name: &'static str, value: &'static str, unit: &'static str, meaning: &'static str) -> Constant {
    Constant { name, value, unit, meaning }
}

/// Exact ones follow from the definitions of the SI units (SI Brochure, 9th ed. 2019, section 2.2; standard gravity and
/// atmosphere: NIST SP 811, 2008, appendix B), the digits of derived ones calculated from them; measured ones are the
/// CODATA adjustment of 2018 or, for the gravitational constant, that of 2018 and 2022 alike.
#[rustfmt::skip]
pub const CONSTANTS: &[Constant] = &[
    constant("g_n",       "9.80665",                "m/s^2",         "standard gravity, exact"),
    constant("p_atm",     "101325",                 "Pa",            "standard atmosphere, exact"),
    constant("R_gas",     "8.31446261815324",       "J/(mol K)",     "molar gas constant, exact"),
    constant("N_A",       "6.02214076e23",          "1/mol",         "Avogadro constant, exact"),
    constant("k_B",       "1.380649e-23",           "J/K",           "Boltzmann constant, exact"),
    constant("sigma_SB",  "5.670374419184429e-8",   "W/(m^2 K^4)",   "Stefan-Boltzmann constant, exact"),
    constant("b_Wien",    "2.897771955185173e-3",   "m K",           "Wien displacement constant, exact"),
    constant("h_Planck",  "6.62607015e-34",         "J s",           "Planck constant, exact"),
    constant("h_bar",     "1.0545718176461564e-34", "J s",           "reduced Planck constant, exact"),
    constant("c_0",       "299792458",              "m/s",           "speed of light in vacuum, exact"),
    constant("q_e",       "1.602176634e-19",        "C",             "elementary charge, exact"),
    constant("F_Faraday", "96485.33212331002",      "C/mol",         "Faraday constant, exact"),
    constant("G_grav",    "6.67430e-11",            "m^3/(kg s^2)",  "gravitational constant, CODATA, good to 2.2e-5"),
    constant("epsilon_0", "8.8541878128e-12",       "F/m",           "electric constant, CODATA 2018, good to 1.5e-10"),
    constant("mu_0",      "1.25663706212e-6",       "H/m",           "magnetic constant, CODATA 2018, good to 1.5e-10"),
    constant("m_e",       "9.1093837015e-31",       "kg",            "electron mass, CODATA 2018, good to 3.0e-10"),
    constant("m_p",       "1.67262192369e-27",      "kg",            "proton mass, CODATA 2018, good to 3.1e-10"),
    constant("m_u",       "1.66053906660e-27",      "kg",            "atomic mass constant, CODATA 2018, good to 3.0e-10"),
];

/// The constant of this name.
pub(super) fn named(name: &str) -> Option<&'static Constant> {
    CONSTANTS.iter().find(|c| c.name == name)
}

impl Constant {
    /// Unit, and value in SI.
    pub fn quantity(&self) -> Option<(Unit, Rounded)> {
        let unit = Unit::parse(self.unit, true).ok()?;
        let value = unit.to_si(self.value.parse().ok()?);
        Some((unit, Rounded { value, error: value.abs() * f64::EPSILON / 2.0 }))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn value(name: &str) -> f64 {
        named(name).and_then(Constant::quantity).expect("listed").1.value
    }

    #[test]
    fn all_can_be_read_and_derived_ones_follow_from_the_defining_ones() {
        for c in CONSTANTS {
            assert!(c.quantity().is_some(), "{}", c.name);
            assert_eq!(crate::formula::syntax::name(c.name).as_deref(), Some(c.name));
        }
        let [k, h, c, e, n] = ["k_B", "h_Planck", "c_0", "q_e", "N_A"].map(value);
        let pi = std::f64::consts::PI;
        let near = |name: &str, other: f64, within: f64| {
            assert!((value(name) / other - 1.0).abs() < within, "{name}: {} against {other}", value(name));
        };
        near("R_gas", k * n, 1e-15);
        near("F_Faraday", e * n, 1e-15);
        near("h_bar", h / (2.0 * pi), 1e-15);
        near("sigma_SB", 2.0 * pi.powi(5) * k.powi(4) / (15.0 * h.powi(3) * c * c), 1e-14);
        // Wien: x = 5 (1 - exp(-x)).
        let x = (0..60).fold(5.0f64, |x, _| 5.0 * (1.0 - (-x).exp()));
        near("b_Wien", h * c / (k * x), 1e-14);
        // mu_0 epsilon_0 c^2 = 1 within the uncertainty of both.
        near("mu_0", 1.0 / (value("epsilon_0") * c * c), 3e-10);
    }
}
