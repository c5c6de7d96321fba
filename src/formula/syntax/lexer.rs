//! Text to tokens.
//!
//! Units are read here, for only a number decides that a unit may follow.

use super::{Comparison, LONGEST, Span, SyntaxError};
use crate::unit::{self, Unit};

#[derive(Debug, Clone, PartialEq)]
pub(super) enum Token {
    Number { value: f64, unit: Option<(Box<Unit>, Span)> },
    Name(String),
    Prime,
    Plus,
    Minus,
    Star,
    Slash,
    Caret,
    Open,
    Close,
    Comma,
    Equals,
    Compare(Comparison),
    End,
}

pub(super) fn starts_name(c: char) -> bool {
    // Modifier letters (U+02B0..) look like primes and accents.
    c == '_' || (c.is_alphabetic() && !('\u{2b0}'..='\u{2ff}').contains(&c))
}

pub(super) fn continues_name(c: char) -> bool {
    starts_name(c) || c.is_ascii_digit()
}

/// Micro and ohm signs to the Greek letters they look like.
pub(super) fn normal(name: &str) -> String {
    name.replace('\u{b5}', "\u{3bc}").replace('\u{2126}', "Ω")
}

/// All tokens with their places, [`Token::End`] last.
pub(super) fn tokens(text: &str) -> Result<Vec<(Token, Span)>, SyntaxError> {
    if text.len() > LONGEST {
        return Err(SyntaxError::new(
            0..0,
            format!("a formula of more than {LONGEST} bytes"),
            Some("give parts of it names of their own"),
        ));
    }
    let mut lexer = Lexer { text, at: 0 };
    let mut tokens = Vec::new();
    loop {
        lexer.skip(char::is_whitespace);
        let start = lexer.at;
        let token = lexer.token()?;
        let end = token == Token::End;
        tokens.push((token, start..lexer.at));
        if end {
            return Ok(tokens);
        }
    }
}

struct Lexer<'a> {
    text: &'a str,
    at: usize,
}

impl<'a> Lexer<'a> {
    fn rest(&self) -> &'a str {
        &self.text[self.at..]
    }

    fn peek(&self) -> Option<char> {
        self.rest().chars().next()
    }

    /// Passes over what `wanted` accepts and returns it.
    fn skip(&mut self, wanted: impl Fn(char) -> bool) -> &'a str {
        let rest = self.rest();
        let end = rest.find(|c| !wanted(c)).unwrap_or(rest.len());
        self.at += end;
        &rest[..end]
    }

    fn token(&mut self) -> Result<Token, SyntaxError> {
        let Some(c) = self.peek() else {
            return Ok(Token::End);
        };
        let next = self.rest()[c.len_utf8()..].chars().next();
        if c.is_ascii_digit() || (c == '.' && next.is_some_and(|c| c.is_ascii_digit())) {
            return self.number();
        }
        if starts_name(c) {
            return Ok(Token::Name(normal(self.skip(continues_name))));
        }
        let pair = |second: char| next == Some(second);
        let (token, length) = match c {
            '*' if pair('*') => return Err(self.wrong(2, "a power is written with ^")),
            '=' if pair('=') => return Err(self.wrong(2, "an equation is written with one =")),
            '<' if pair('>') => return Err(self.wrong(2, "there is no test for `unequal`")),
            '<' if pair('=') => (Token::Compare(Comparison::LessEqual), 2),
            '>' if pair('=') => (Token::Compare(Comparison::GreaterEqual), 2),
            '<' => (Token::Compare(Comparison::Less), 1),
            '>' => (Token::Compare(Comparison::Greater), 1),
            '≤' => (Token::Compare(Comparison::LessEqual), 3),
            '≥' => (Token::Compare(Comparison::GreaterEqual), 3),
            '+' => (Token::Plus, 1),
            '-' => (Token::Minus, 1),
            '−' => (Token::Minus, 3),
            '*' => (Token::Star, 1),
            '/' => (Token::Slash, 1),
            '^' => (Token::Caret, 1),
            '(' => (Token::Open, 1),
            ')' => (Token::Close, 1),
            ',' => (Token::Comma, 1),
            '=' => (Token::Equals, 1),
            '\'' => (Token::Prime, 1),
            _ => return Err(self.stray(c)),
        };
        self.at += length;
        Ok(token)
    }

    /// An error about the next `length` bytes.
    fn wrong(&self, length: usize, hint: &str) -> SyntaxError {
        let span = self.at..self.at + length;
        let message = format!("`{}` is not understood", &self.text[span.clone()]);
        SyntaxError::new(span, message, Some(hint))
    }

    fn stray(&self, c: char) -> SyntaxError {
        let hint = match c {
            '·' | '⋅' | '×' | '∗' | '•' => "a product is written with *",
            '÷' | '∕' | ':' => "a quotient is written with /",
            '–' | '—' | '‐' | '‑' => "write the minus sign -",
            '²' => "write ^2",
            '³' => "write ^3",
            '⁻' => "write ^-1",
            '√' => "write sqrt(...)",
            '‘' | '’' | '′' | '`' | '´' | 'ʹ' | 'ʼ' => "a derivative is written with the plain mark '",
            '"' | '“' | '”' | '″' | 'ʺ' => "a second derivative is written with two plain marks ''",
            '[' | ']' => "square brackets hold a unit behind a number: 12 [kN*m]",
            '{' | '}' => "use round parentheses",
            '&' => "write `and`",
            '|' => "write `or`; the size of x is abs(x)",
            '!' | '≠' => "there is no test for `unequal`; use < and >",
            '%' => "write 50 % with a blank, or 0.5",
            '°' => "write 20 degC or 30 deg",
            ';' => "arguments are separated by a comma",
            '∞' => "write inf",
            _ => "",
        };
        let mut error = self.wrong(c.len_utf8(), hint);
        error.hint = error.hint.filter(|hint| !hint.is_empty());
        error
    }

    fn number(&mut self) -> Result<Token, SyntaxError> {
        let start = self.at;
        self.skip(|c| c.is_ascii_digit());
        if self.peek() == Some('.') {
            self.at += 1;
            self.skip(|c| c.is_ascii_digit());
        }
        let mantissa = self.at;
        if matches!(self.peek(), Some('e' | 'E')) {
            self.at += 1;
            if matches!(self.peek(), Some('+' | '-')) {
                self.at += 1;
            }
            if self.skip(|c| c.is_ascii_digit()).is_empty() {
                self.at = mantissa;
            }
        }
        let span = start..self.at;
        let digits = &self.text[span.clone()];
        let value: f64 =
            digits.parse().map_err(|_| SyntaxError::new(span.clone(), format!("`{digits}` is not a number"), None))?;
        let zero = self.text[start..mantissa].bytes().all(|b| b == b'0' || b == b'.');
        if !value.is_finite() || (value == 0.0 && !zero) {
            let message = "this number is outside the range of about 1e-308 to 1e308";
            return Err(SyntaxError::new(span, message, None));
        }
        if let Some(c) = self.peek() {
            if c == '.' {
                let span = start..self.at + 1;
                return Err(SyntaxError::new(span, "a number with two points", None));
            }
            if continues_name(c) || matches!(c, '%' | '°') {
                return Err(self.glued(start));
            }
        }
        Ok(Token::Number { value, unit: self.unit()? })
    }

    /// A number with a word glued to it: `2x`, `40mm`, `50%`.
    fn glued(&mut self, start: usize) -> SyntaxError {
        let number = &self.text[start..self.at];
        let word = self.skip(|c| continues_name(c) || matches!(c, '%' | '°'));
        let known = unit::scan(word).ok().flatten().is_some_and(|(_, n)| n == word.len());
        let named = word.chars().all(continues_name);
        let hint = if let Some(digits) = word.strip_prefix('_') {
            format!("digits are not grouped: write {number}{digits}")
        } else if known && named {
            format!("write {number} {word} for the unit, {number}*{word} for a product")
        } else if known {
            format!("write {number} {word}, with a blank")
        } else {
            format!("write {number}*{word}")
        };
        let message = format!("`{number}{word}` is not understood");
        SyntaxError::new(start..self.at, message, Some(&hint))
    }

    /// The unit behind a number: `[kN*m]`, or as much as can be read behind a blank.
    fn unit(&mut self) -> Result<Option<(Box<Unit>, Span)>, SyntaxError> {
        let before = self.at;
        self.skip(char::is_whitespace);
        let start = self.at;
        let c = self.peek();
        if c == Some('[') {
            let Some(length) = self.rest().find(']') else {
                let message = "this bracket is not closed";
                return Err(SyntaxError::new(start..start + 1, message, None));
            };
            let inner = start + 1..start + length;
            let unit =
                Unit::parse(&self.text[inner.clone()], true).map_err(|e| SyntaxError::in_unit(inner.start, e))?;
            self.at = start + length + 1;
            return Ok(Some((Box::new(unit), inner)));
        }
        if start > before && c.is_some_and(|c| continues_name(c) || matches!(c, '%' | '°')) {
            let found = unit::scan(self.rest()).map_err(|e| SyntaxError::in_unit(start, e))?;
            if let Some((unit, length)) = found {
                self.at = start + length;
                return Ok(Some((Box::new(unit), start..self.at)));
            }
        }
        self.at = before;
        Ok(None)
    }
}
