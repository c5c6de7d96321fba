//! Tokens to trees: operator precedence by binding powers (Pratt, POPL 1973, 41-51).

use super::lexer::{Token, tokens};
use super::{Argument, DEEPEST, DEEPEST_TREE, Expression, Kind, Operator, Sign, Span, SyntaxError, Test};
use crate::unit;

type Parsed<T> = Result<T, Box<SyntaxError>>;

// Binding powers.
const SUM: u8 = 10;
const PRODUCT: u8 = 20;
const SIGN: u8 = 30;
const POWER: u8 = 40;

pub(super) struct Parser<'a> {
    text: &'a str,
    tokens: Vec<(Token, Span)>,
    at: usize,
    /// Brackets, signs and powers around the place at hand.
    nesting: usize,
}

/// An expression and how deep its tree is. Boxed at once: expressions by value would fill the stack of a deep parse.
struct Tree {
    expression: Box<Expression>,
    depth: usize,
}

impl<'a> Parser<'a> {
    pub(super) fn new(text: &'a str) -> Result<Self, SyntaxError> {
        Ok(Self { text, tokens: tokens(text)?, at: 0, nesting: 0 })
    }

    pub(super) fn formula(mut self) -> Result<Expression, SyntaxError> {
        let tree = self.expression(0).map_err(|e| *e)?;
        match self.peek() {
            Token::End => Ok(*tree.expression),
            Token::Equals => {
                Err(SyntaxError::new(self.span(), "an equation cannot stand here, only an expression", None))
            }
            _ => Err(*self.unexpected()),
        }
    }

    pub(super) fn equation(mut self) -> Result<(Expression, Expression), SyntaxError> {
        let left = self.expression(0).map_err(|e| *e)?;
        match self.peek() {
            Token::Equals => self.at += 1,
            Token::End => {
                let end = self.text.len();
                let hint = Some("write left = right");
                return Err(SyntaxError::new(0..end, "an equation needs a =", hint));
            }
            _ => return Err(*self.unexpected()),
        }
        let right = self.expression(0).map_err(|e| *e)?;
        match self.peek() {
            Token::End => Ok((*left.expression, *right.expression)),
            Token::Equals => {
                Err(SyntaxError::new(self.span(), "a second = in one equation", Some("write two equations")))
            }
            _ => Err(*self.unexpected()),
        }
    }

    fn peek(&self) -> &Token {
        &self.tokens[self.at].0
    }

    /// The token `ahead` places further on.
    fn ahead(&self, ahead: usize) -> &Token {
        let last = self.tokens.len() - 1;
        &self.tokens[(self.at + ahead).min(last)].0
    }

    fn span(&self) -> Span {
        self.tokens[self.at].1.clone()
    }

    /// Passes over the token at hand; the end stays.
    fn advance(&mut self) -> Span {
        let span = self.span();
        if *self.peek() != Token::End {
            self.at += 1;
        }
        span
    }

    /// Reads with one bracket, sign or power more around.
    fn nested<T>(&mut self, place: Span, read: impl FnOnce(&mut Self) -> Parsed<T>) -> Parsed<T> {
        if self.nesting == DEEPEST {
            return Err(error(
                place,
                format!("more than {DEEPEST} brackets, signs and powers within each other"),
                Some("give a part of the formula a name of its own"),
            ));
        }
        self.nesting += 1;
        let result = read(self);
        self.nesting -= 1;
        result
    }

    fn tree(&self, kind: Kind, span: Span, depth: usize) -> Parsed<Tree> {
        let depth = depth + 1;
        if depth > DEEPEST_TREE {
            return Err(error(
                span,
                format!("more than {DEEPEST_TREE} operations in a row"),
                Some("give a part of the formula a name of its own"),
            ));
        }
        let expression = Box::new(Expression { kind, span });
        Ok(Tree { expression, depth })
    }

    fn expression(&mut self, floor: u8) -> Parsed<Tree> {
        let mut left = self.operand()?;
        loop {
            let (operator, power) = match self.peek() {
                Token::Plus => (Operator::Add, SUM),
                Token::Minus => (Operator::Subtract, SUM),
                Token::Star => (Operator::Multiply, PRODUCT),
                Token::Slash => (Operator::Divide, PRODUCT),
                Token::Caret => (Operator::Power, POWER),
                _ => return Ok(left),
            };
            // A sign before `)` or `,` names a side of a point: V(a-).
            let side = power == SUM && matches!(self.ahead(1), Token::Close | Token::Comma);
            if side || power < floor {
                return Ok(left);
            }
            let place = self.advance();
            let right = if operator == Operator::Power {
                self.check_base(&left.expression, place.clone())?;
                self.nested(place, |p| p.expression(POWER))?
            } else {
                self.expression(power + 1)?
            };
            let span = left.expression.span.start..right.expression.span.end;
            let depth = left.depth.max(right.depth);
            let kind = Kind::Binary(operator, left.expression, right.expression);
            left = self.tree(kind, span, depth)?;
        }
    }

    /// `2 mm^n` would read as (2 mm)^n although `2 mm^2` is 2 (mm^2).
    fn check_base(&self, base: &Expression, place: Span) -> Parsed<()> {
        let bare = self.text[base.span.clone()].starts_with(|c: char| c != '(');
        match &base.kind {
            Kind::Number { unit: Some(_), .. } if bare => {
                let literal = &self.text[base.span.clone()];
                Err(error(
                    base.span.start..place.end,
                    "the power of a unit must be a plain number",
                    Some(&format!("write ({literal})^...")),
                ))
            }
            _ => Ok(()),
        }
    }

    fn operand(&mut self) -> Parsed<Tree> {
        if matches!(self.peek(), Token::Minus | Token::Plus) {
            let minus = *self.peek() == Token::Minus;
            let sign = self.advance();
            let literal = matches!(self.peek(), Token::Number { .. });
            let mut inner = self.nested(sign.clone(), |p| p.expression(SIGN))?;
            if !minus {
                return Ok(inner);
            }
            let span = sign.start..inner.expression.span.end;
            // -5 degC is a temperature five degrees below zero, not the negative of 278.15 K.
            if let Kind::Number { value, unit: Some(unit), .. } = &mut inner.expression.kind
                && literal
                && unit.is_absolute()
            {
                *value = -*value;
                inner.expression.span = span;
                return Ok(inner);
            }
            let depth = inner.depth;
            return self.tree(Kind::Negate(inner.expression), span, depth);
        }
        let base = self.primary()?;
        self.primes(base)
    }

    /// Counts the primes at hand; the end of the last.
    fn count_primes(&mut self) -> (usize, usize) {
        let (mut primes, mut end) = (0, 0);
        while *self.peek() == Token::Prime {
            primes += 1;
            end = self.advance().end;
        }
        (primes, end)
    }

    fn primes(&mut self, base: Tree) -> Parsed<Tree> {
        let start = self.span();
        let (primes, end) = self.count_primes();
        if primes == 0 {
            return Ok(base);
        }
        if matches!(base.expression.kind, Kind::Number { .. }) {
            return Err(error(
                start.start..end,
                "a number has no derivative",
                Some("' stands behind a name or a parenthesis"),
            ));
        }
        if primes > DEEPEST {
            return Err(error(start.start..end, "too many derivatives", None));
        }
        let span = base.expression.span.start..end;
        let kind = Kind::Prime(base.expression, primes);
        self.tree(kind, span, base.depth)
    }

    fn primary(&mut self) -> Parsed<Tree> {
        let span = self.span();
        match self.peek().clone() {
            Token::Number { value, unit } => {
                self.at += 1;
                let (unit, unit_span) = unit.map_or((None, None), |(u, s)| (Some(*u), Some(s)));
                let kind = Kind::Number { value, unit, unit_span };
                self.tree(kind, span, 0)
            }
            Token::Name(name) => self.named(name, span),
            Token::Open => {
                self.at += 1;
                let mut inner = self.nested(span.clone(), |p| p.expression(0))?;
                let close = self.close(&span)?;
                // The parentheses belong to the place of what they hold.
                inner.expression.span = span.start..close.end;
                Ok(inner)
            }
            _ => Err(self.missing_operand()),
        }
    }

    fn named(&mut self, name: String, name_span: Span) -> Parsed<Tree> {
        if matches!(name.as_str(), "and" | "or" | "in") {
            return Err(self.missing_operand());
        }
        self.at += 1;
        if name == "if" {
            return self.choice(name_span);
        }
        let before = self.at;
        let (primes, _) = self.count_primes();
        if *self.peek() != Token::Open {
            self.at = before;
            return self.tree(Kind::Name(name), name_span, 0);
        }
        if primes > DEEPEST {
            return Err(error(name_span, "too many derivatives", None));
        }
        let open = self.advance();
        let mut arguments = Vec::new();
        let mut depth = 0;
        if *self.peek() != Token::Close {
            loop {
                let tree = self.nested(open.clone(), |p| p.expression(0))?;
                depth = depth.max(tree.depth);
                let side = match self.peek() {
                    Token::Plus => Some(Sign::Plus),
                    Token::Minus => Some(Sign::Minus),
                    _ => None,
                };
                self.at += usize::from(side.is_some());
                arguments.push(Argument { value: *tree.expression, side });
                if *self.peek() != Token::Comma {
                    break;
                }
                self.at += 1;
            }
        }
        let close = self.close(&open)?;
        let span = name_span.start..close.end;
        let kind = Kind::Call { name, name_span, primes, arguments };
        self.tree(kind, span, depth)
    }

    /// `if(test, a, b)` behind the `if`.
    fn choice(&mut self, name: Span) -> Parsed<Tree> {
        const FORM: Option<&str> = Some("write if(test, a, b)");
        if *self.peek() != Token::Open {
            return Err(error(name, "a parenthesis is missing behind `if`", FORM));
        }
        let open = self.advance();
        let (test, mut depth) = self.nested(open.clone(), Self::either)?;
        let mut branches = Vec::with_capacity(2);
        for _ in 0..2 {
            if *self.peek() == Token::Close {
                let span = name.start..self.span().end;
                return Err(error(span, "`if` needs a test and two values", FORM));
            }
            if *self.peek() != Token::Comma {
                return Err(self.unclosed(&open));
            }
            self.at += 1;
            let tree = self.nested(open.clone(), |p| p.expression(0))?;
            depth = depth.max(tree.depth);
            branches.push(tree.expression);
        }
        if *self.peek() == Token::Comma {
            return Err(error(
                self.span(),
                "`if` takes a test and two values, not more",
                Some("for more cases put another if(...) in the place of b"),
            ));
        }
        let close = self.close(&open)?;
        let (Some(b), Some(a)) = (branches.pop(), branches.pop()) else {
            return Err(self.missing_operand());
        };
        let span = name.start..close.end;
        self.tree(Kind::If(Box::new(test), a, b), span, depth)
    }

    /// `p or q or ...`, with the depth of the tree.
    fn either(&mut self) -> Parsed<(Test, usize)> {
        self.chain("or", Self::both, Test::Or)
    }

    fn both(&mut self) -> Parsed<(Test, usize)> {
        self.chain("and", Self::comparison, Test::And)
    }

    fn chain(
        &mut self,
        word: &str,
        part: impl Fn(&mut Self) -> Parsed<(Test, usize)>,
        join: impl Fn(Box<Test>, Box<Test>) -> Test,
    ) -> Parsed<(Test, usize)> {
        let (mut test, mut depth) = part(self)?;
        while *self.peek() == Token::Name(word.into()) {
            let place = self.advance();
            let (next, next_depth) = part(self)?;
            depth = depth.max(next_depth) + 1;
            if depth > DEEPEST_TREE {
                return Err(error(place, format!("more than {DEEPEST_TREE} tests in a row"), None));
            }
            test = join(Box::new(test), Box::new(next));
        }
        Ok((test, depth))
    }

    fn comparison(&mut self) -> Parsed<(Test, usize)> {
        if *self.peek() == Token::Open && self.holds_test() {
            let open = self.advance();
            let test = self.nested(open.clone(), Self::either)?;
            self.close(&open)?;
            return Ok(test);
        }
        let start = self.span().start;
        let mut left = self.expression(0)?;
        let mut test: Option<(Test, usize)> = None;
        while let Token::Compare(sign) = *self.peek() {
            self.at += 1;
            let right = self.expression(0)?;
            let depth = left.depth.max(right.depth) + 1;
            let link = Test::Compare(left.expression, sign, right.expression.clone());
            test = Some(match test {
                None => (link, depth),
                Some((before, d)) => (Test::And(Box::new(before), Box::new(link)), d.max(depth) + 1),
            });
            if depth > DEEPEST_TREE || test.as_ref().is_some_and(|(_, d)| *d > DEEPEST_TREE) {
                let span = start..right.expression.span.end;
                return Err(error(span, "too many comparisons in a row", None));
            }
            left = right;
        }
        let end = left.expression.span.end;
        test.ok_or_else(|| match self.peek() {
            Token::Comma | Token::Close => {
                error(start..end, "a comparison is missing in `if`", Some("write if(x < a, ..., ...)"))
            }
            Token::Equals => error(self.span(), "a test cannot be an equality", Some("use <, <=, > or >=")),
            _ => self.unexpected(),
        })
    }

    /// Whether the parenthesis at hand holds a test, not an expression: what follows its end decides.
    fn holds_test(&self) -> bool {
        let mut depth = 0usize;
        for (i, (token, _)) in self.tokens[self.at..].iter().enumerate() {
            match token {
                Token::Open => depth += 1,
                Token::Close => depth -= 1,
                _ => {}
            }
            if depth == 0 {
                return match self.ahead(i + 1) {
                    Token::Comma | Token::Close | Token::End => true,
                    Token::Name(word) => word == "and" || word == "or",
                    _ => false,
                };
            }
        }
        false
    }

    fn close(&mut self, open: &Span) -> Parsed<Span> {
        if *self.peek() == Token::Close { Ok(self.advance()) } else { Err(self.unclosed(open)) }
    }

    /// Whether a `)` without partner follows.
    fn closes_later(&self) -> bool {
        let mut depth = 0usize;
        for (token, _) in &self.tokens[self.at..] {
            match token {
                Token::Open => depth += 1,
                Token::Close if depth == 0 => return true,
                Token::Close => depth -= 1,
                _ => {}
            }
        }
        false
    }

    /// What is wrong where a `)` was expected.
    fn unclosed(&self, open: &Span) -> Box<SyntaxError> {
        match self.peek() {
            // In an equation only what stands before the sign can tell: f(a = b) or (a = b.
            Token::Equals if self.closes_later() => self.unexpected(),
            Token::End | Token::Equals => error(open.clone(), "this parenthesis is not closed", Some("a ) is missing")),
            _ => self.unexpected(),
        }
    }

    /// Where a name, a number or a parenthesis should stand.
    fn missing_operand(&self) -> Box<SyntaxError> {
        let span = self.span();
        let before = self.at.checked_sub(1).map(|i| &self.tokens[i]);
        let Some((_, place)) = before else {
            return match self.peek() {
                Token::End => error(0..0, "the formula is empty", None),
                _ => error(span.clone(), format!("a formula cannot begin with `{}`", &self.text[span]), None),
            };
        };
        let sign = &self.text[place.clone()];
        let hint = match (&before, self.peek()) {
            (Some((Token::Star, _)), Token::Star) => Some("a power is written with ^"),
            (_, Token::Prime) => Some("' stands behind a name or a parenthesis"),
            _ => None,
        };
        error(place.clone(), format!("something is missing behind `{sign}`"), hint)
    }

    /// A token that cannot follow a finished expression.
    fn unexpected(&self) -> Box<SyntaxError> {
        let span = self.span();
        let found = &self.text[span.clone()];
        let before = self.at.checked_sub(1).map(|i| &self.tokens[i]);
        let number_before = matches!(before, Some((Token::Number { .. }, _)));
        match self.peek() {
            Token::Name(word) if word == "in" => error(
                span,
                "`in` cannot stand here",
                Some("a unit is asked for at the end of a report: \"y(L) in mm\""),
            ),
            Token::Name(word) if word == "and" || word == "or" => {
                error(span, format!("`{word}` stands only between comparisons in if(...)"), None)
            }
            Token::Name(word) => {
                let hint = match (before, unit::suggest(word)) {
                    (Some((Token::Number { unit: None, .. }, _)), Some(meant)) => {
                        format!("`{word}` is not a unit: {meant}")
                    }
                    _ => "a product is written with *".into(),
                };
                error(span.clone(), format!("an operator is missing before `{found}`"), Some(&hint))
            }
            Token::Number { .. } if number_before => {
                error(span, "two numbers in a row", Some("an operator is missing; digits are not grouped"))
            }
            Token::Open if matches!(before, Some((Token::Prime, _))) => error(
                span,
                "a value at a point is taken of a name",
                Some("give the expression a name, or write at(expression, point)"),
            ),
            Token::Number { .. } | Token::Open => error(
                span.clone(),
                format!("an operator is missing before `{found}`"),
                Some("a product is written with *"),
            ),
            Token::Comma if number_before && matches!(self.ahead(1), Token::Number { .. }) => {
                error(span, "a comma cannot stand here", Some("decimals are written with a point: 3.5"))
            }
            Token::Comma => error(span, "a comma cannot stand here", None),
            Token::Close => error(span, "this parenthesis was never opened", Some("take it away, or open one before")),
            Token::Compare(_) => error(span, "a comparison stands only in if(test, a, b)", None),
            Token::Equals => error(span, "an equation cannot stand within an expression", None),
            Token::Plus | Token::Minus => error(span.clone(), format!("something is missing behind `{found}`"), None),
            _ => error(span.clone(), format!("`{found}` cannot stand here"), None),
        }
    }
}

fn error(span: Span, message: impl Into<String>, hint: Option<&str>) -> Box<SyntaxError> {
    Box::new(SyntaxError::new(span, message, hint))
}
