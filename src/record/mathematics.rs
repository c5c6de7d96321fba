//! Formulas set as mathematics (MathML Core), from the text as written.
//!
//! Names and digits stay as they were written, so that a checker finds them again in the sheet; only their
//! arrangement changes: fractions, powers, roots, primes, integrals, cases.

use super::axis::pretty;
use crate::formula::syntax::{self, Argument, Comparison, Expression, Kind, Operator, Sign, Test};
use maud::{Markup, html};

/// A formula, an equation, or data by pieces; as code where it cannot be read.
pub(super) fn formula(text: &str, coordinate: &str) -> Markup {
    let setter = Setter { coordinate };
    match setter.line(text) {
        Some(set) => html! { math title=(text) displaystyle="true" { (set) } },
        None => html! { code { (text) } },
    }
}

/// How strongly a part binds: what is weaker needs parentheses.
const SUM: u8 = 1;
const PRODUCT: u8 = 2;
const SIGNED: u8 = 3;
const POWER: u8 = 4;
const PRIMARY: u8 = 5;

fn binding(e: &Expression) -> u8 {
    match &e.kind {
        Kind::Binary(Operator::Add | Operator::Subtract, ..) => SUM,
        Kind::Binary(Operator::Multiply, ..) => PRODUCT,
        Kind::Negate(_) => SIGNED,
        Kind::Number { value, .. } if value.is_sign_negative() => SIGNED,
        Kind::Number { unit: Some(_), .. } | Kind::Binary(Operator::Power, ..) | Kind::Prime(..) => POWER,
        _ => PRIMARY,
    }
}

struct Setter<'a> {
    coordinate: &'a str,
}

impl Setter<'_> {
    fn line(&self, text: &str) -> Option<Markup> {
        if let Ok((left, right)) = syntax::parse_equation(text) {
            return Some(html! { mrow { (self.set(text, &left)) mo { "=" } (self.set(text, &right)) } });
        }
        if let Ok(e) = syntax::parse(text) {
            return Some(self.set(text, &e));
        }
        self.pieces(text)
    }

    /// Data by pieces: `0 m .. 1 m: value; else value`.
    fn pieces(&self, text: &str) -> Option<Markup> {
        let mut rows = Vec::new();
        for part in text.split("; ") {
            let (value, stretch) = match part.strip_prefix("else ") {
                Some(value) => (value, html! { mtext { "elsewhere" } }),
                None => {
                    let (stretch, value) = part.split_once(": ")?;
                    let (from, to) = stretch.split_once("..")?;
                    let (from, to) = (from.trim(), to.trim());
                    let (a, b) = (syntax::parse(from).ok()?, syntax::parse(to).ok()?);
                    let stretch = html! {
                        (self.set(from, &a)) mo { "≤" } (name(self.coordinate)) mo { "≤" } (self.set(to, &b))
                    };
                    (value, stretch)
                }
            };
            let e = syntax::parse(value).ok()?;
            rows.push((self.set(value, &e), stretch));
        }
        Some(cases(&rows))
    }

    /// Set within parentheses if it binds more weakly than `floor`.
    fn part(&self, text: &str, e: &Expression, floor: u8) -> Markup {
        let inside = self.set(text, e);
        html! { @if binding(e) < floor { mrow { mo { "(" } (inside) mo { ")" } } } @else { (inside) } }
    }

    fn set(&self, text: &str, e: &Expression) -> Markup {
        match &e.kind {
            Kind::Number { unit, unit_span, .. } => {
                let end = unit_span.as_ref().map_or(e.span.end, |u| u.start);
                let digits = text.get(e.span.start..end).unwrap_or("").trim_end_matches(['[', ' ', '\t']);
                html! { mrow { (number(digits)) @if let Some(unit) = unit { mtext { "\u{202f}" (pretty(&unit.text)) } } } }
            }
            Kind::Name(own) => name(own),
            Kind::Negate(a) => html! { mrow { mo { "−" } (self.part(text, a, SIGNED)) } },
            Kind::Binary(Operator::Divide, a, b) => {
                html! { mfrac { mrow { (self.set(text, a)) } mrow { (self.set(text, b)) } } }
            }
            Kind::Binary(Operator::Power, a, b) => {
                html! { msup { mrow { (self.part(text, a, PRIMARY)) } mrow { (self.set(text, b)) } } }
            }
            Kind::Binary(operator, a, b) => {
                let (floor, sign) = match operator {
                    Operator::Add => (SUM, "+"),
                    Operator::Subtract => (SUM, "−"),
                    _ => (PRODUCT, "⋅"),
                };
                html! { mrow { (self.part(text, a, floor)) mo { (sign) } (self.part(text, b, floor + 1)) } }
            }
            Kind::Prime(a, order) => html! { msup { mrow { (self.part(text, a, PRIMARY)) } (primes(*order)) } },
            Kind::Call { name, primes, arguments, .. } => self.call(text, name, *primes, arguments),
            Kind::If(test, a, b) => {
                let when = html! { (self.test(text, test)) };
                cases(&[(self.set(text, a), when), (self.set(text, b), html! { mtext { "otherwise" } })])
            }
        }
    }

    fn call(&self, text: &str, own: &str, order: usize, arguments: &[Argument]) -> Markup {
        let plain = order == 0 && arguments.iter().all(|a| a.side.is_none());
        let value = |k: usize| self.set(text, &arguments[k].value);
        match (own, arguments.len()) {
            ("sqrt", 1) if plain => html! { msqrt { (value(0)) } },
            ("abs", 1) if plain => html! { mrow { mo { "|" } (value(0)) mo { "|" } } },
            ("integral", 1 | 3) if plain => {
                let sign = html! { mo { "∫" } };
                html! {
                    mrow {
                        @if arguments.len() == 3 {
                            munderover { (sign) mrow { (value(1)) } mrow { (value(2)) } }
                        } @else { (sign) }
                        (self.part(text, &arguments[0].value, PRODUCT))
                        mspace width="0.17em" {}
                        mo { "d" } (name(self.coordinate))
                    }
                }
            }
            ("jump", 2) if plain => html! { msub { mrow { mo { "[" } (value(0)) mo { "]" } } mrow { (value(1)) } } },
            _ => html! {
                mrow {
                    @if order > 0 { msup { (name(own)) (primes(order)) } } @else { (name(own)) }
                    mo { "(" }
                    @for (k, argument) in arguments.iter().enumerate() {
                        @if k > 0 { mo { "," } }
                        (self.argument(text, argument))
                    }
                    mo { ")" }
                }
            },
        }
    }

    fn argument(&self, text: &str, argument: &Argument) -> Markup {
        let value = self.set(text, &argument.value);
        match argument.side {
            None => value,
            Some(Sign::Minus) => html! { msup { mrow { (value) } mo lspace="0" rspace="0" { "−" } } },
            Some(Sign::Plus) => html! { msup { mrow { (value) } mo lspace="0" rspace="0" { "+" } } },
        }
    }

    fn test(&self, text: &str, test: &Test) -> Markup {
        let within = |side: &Test, bracket: bool| {
            let set = self.test(text, side);
            html! { @if bracket { mrow { mo { "(" } (set) mo { ")" } } } @else { (set) } }
        };
        match test {
            Test::Compare(a, sign, b) => {
                let sign = match sign {
                    Comparison::Less => "<",
                    Comparison::LessEqual => "≤",
                    Comparison::Greater => ">",
                    Comparison::GreaterEqual => "≥",
                };
                html! { mrow { (self.set(text, a)) mo { (sign) } (self.set(text, b)) } }
            }
            Test::And(p, q) => {
                let or = |side: &Test| matches!(side, Test::Or(..));
                html! { mrow { (within(p, or(p))) mtext { " and " } (within(q, or(q))) } }
            }
            Test::Or(p, q) => html! { mrow { (within(p, false)) mtext { " or " } (within(q, false)) } },
        }
    }
}

/// Digits as written; a power of ten as print shows it.
fn number(digits: &str) -> Markup {
    let plain = digits.replace('_', "\u{202f}").replace('-', "−");
    match plain.split_once(['e', 'E']) {
        Some((mantissa, exponent)) => html! {
            mrow { mn { (mantissa) } mo { "⋅" } msup { mn { "10" } mn { (exponent.trim_start_matches('+')) } } }
        },
        None => html! { mn { (plain) } },
    }
}

/// A name: what stands behind its first underscore, or its last digits, as an index.
fn name(own: &str) -> Markup {
    let own = match own {
        "pi" => "π",
        "inf" => "∞",
        other => other,
    };
    let letters = own.trim_end_matches(|c: char| c.is_ascii_digit());
    let (base, index) = match own.split_once('_') {
        Some((base, index)) if !base.is_empty() && !index.is_empty() => (base, index),
        Some(_) => (own, ""),
        None if letters.is_empty() => (own, ""),
        None => (letters, &own[letters.len()..]),
    };
    html! { @if index.is_empty() { mi { (base) } } @else { msub { mi { (base) } mi { (index) } } } }
}

fn primes(order: usize) -> Markup {
    match order {
        1..=3 => html! { mo lspace="0" rspace="0" { (["′", "″", "‴"][order - 1]) } },
        _ => html! { mrow { mo { "(" } mn { (order) } mo { ")" } } },
    }
}

/// A choice: values and where each holds.
fn cases(rows: &[(Markup, Markup)]) -> Markup {
    html! {
        mrow {
            mo { "{" }
            mtable {
                @for (value, place) in rows {
                    mtr { mtd { (value) } mtd { (place) } }
                }
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::formula;

    fn shown(text: &str) -> String {
        let whole = formula(text, "x").into_string();
        let inside = whole.split_once('>').map_or("", |w| w.1);
        inside.trim_end_matches("</math>").to_owned()
    }

    #[test]
    fn arrangement_follows_the_tree() {
        assert_eq!(shown("a + b"), "<mrow><mi>a</mi><mo>+</mo><mi>b</mi></mrow>");
        assert_eq!(
            shown("a*(b - c)"),
            "<mrow><mi>a</mi><mo>⋅</mo><mrow><mo>(</mo><mrow><mi>b</mi><mo>−</mo><mi>c</mi></mrow><mo>)</mo></mrow></mrow>"
        );
        assert_eq!(
            shown("y''(L)"),
            "<mrow><msup><mi>y</mi><mo lspace=\"0\" rspace=\"0\">″</mo></msup><mo>(</mo><mi>L</mi><mo>)</mo></mrow>"
        );
        assert!(shown("y''''").contains("<mn>4</mn>"));
        assert_eq!(shown("T_in"), "<msub><mi>T</mi><mi>in</mi></msub>");
        assert_eq!(shown("h2"), "<msub><mi>h</mi><mi>2</mi></msub>");
        assert!(
            shown("1.2e-5 1/K").starts_with("<mrow><mrow><mn>1.2</mn><mo>⋅</mo><msup><mn>10</mn><mn>−5</mn></msup>")
        );
        assert!(shown("integral(q, 0 m, L)").starts_with("<mrow><munderover><mo>∫</mo>"));
        assert!(shown("if(x < h, a, 0)").contains("<mtext>otherwise</mtext>"));
        assert!(shown("0 m .. 1 m: 3; else 4").contains("elsewhere"));
    }

    #[test]
    fn what_cannot_be_read_stays_code_and_nothing_slips_through() {
        assert_eq!(formula("2x <b>", "x").into_string(), "<code>2x &lt;b&gt;</code>");
        assert!(formula("a < b", "x").into_string().starts_with("<code>"));
    }
}
