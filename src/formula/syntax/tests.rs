use super::*;
use proptest::prelude::*;

/// The tree with all parentheses, units in brackets.
fn shape(e: &Expression) -> String {
    match &e.kind {
        Kind::Number { value, unit, .. } => match unit {
            Some(unit) => format!("{value}[{}]", unit.text),
            None => format!("{value}"),
        },
        Kind::Name(name) => name.clone(),
        Kind::Negate(a) => format!("(-{})", shape(a)),
        Kind::Binary(o, a, b) => format!("({}{}{})", shape(a), o.sign(), shape(b)),
        Kind::Prime(a, n) => format!("{}{}", shape(a), "'".repeat(*n)),
        Kind::Call { name, primes, arguments, .. } => {
            let list: Vec<_> = arguments
                .iter()
                .map(|a| {
                    let side = match a.side {
                        Some(Sign::Minus) => "-",
                        Some(Sign::Plus) => "+",
                        None => "",
                    };
                    shape(&a.value) + side
                })
                .collect();
            format!("{name}{}<{}>", "'".repeat(*primes), list.join(";"))
        }
        Kind::If(test, a, b) => format!("if<{};{};{}>", test_shape(test), shape(a), shape(b)),
    }
}

fn test_shape(t: &Test) -> String {
    match t {
        Test::Compare(a, c, b) => format!("{}{}{}", shape(a), c.sign(), shape(b)),
        Test::And(p, q) => format!("({}&{})", test_shape(p), test_shape(q)),
        Test::Or(p, q) => format!("({}|{})", test_shape(p), test_shape(q)),
    }
}

#[test]
fn reads_formulas() {
    #[rustfmt::skip]
    let cases = [
        ("1.2e-5", "0.000012"),
        (".5 + 5.", "(0.5+5)"),
        ("40 mm", "40[mm]"),
        ("12 kN/m*x", "(12[kN/m]*x)"),
        ("9.81 m/s^2", "9.81[m/s^2]"),
        ("9.81 m / s", "(9.81[m]/s)"),
        ("9.81 m/width", "(9.81[m]/width)"),
        ("12 [kN*m]", "12[kN m]"),
        ("12[kN / m]", "12[kN/m]"),
        ("7 s^-1", "7[s^-1]"),
        ("1.2 W/(m K)", "1.2[W/(m K)]"),
        ("1.2e-5 1/K*dT", "(0.000012[1/K]*dT)"),
        ("3.2 Pa s^0.42", "3.2[Pa s^0.42]"),
        ("2 kN·m + 1", "(2[kN m]+1)"),
        ("50 % * q", "(50[%]*q)"),
        ("-x^2", "(-(x^2))"),
        ("2^3^2", "(2^(3^2))"),
        ("2^-x*y", "((2^(-x))*y)"),
        ("a - b - c", "((a-b)-c)"),
        ("a/b/c", "((a/b)/c)"),
        ("a*-b", "(a*(-b))"),
        ("--a", "(-(-a))"),
        ("+a", "a"),
        ("a − b", "(a-b)"),
        ("-5 degC", "-5[degC]"),
        ("-(5 degC)", "(-5[degC])"),
        ("-5 m", "(-5[m])"),
        ("E*I*y''", "((E*I)*y'')"),
        ("M'^2", "(M'^2)"),
        ("(k*A*T')'", "((k*A)*T')'"),
        ("y''(L)", "y''<L>"),
        ("y(0 m)", "y<0[m]>"),
        ("V(a-) + V(1.4 m+)", "(V<a->+V<1.4[m]+>)"),
        ("T(a -, b+ )", "T<a-;b+>"),
        ("f()", "f<>"),
        ("max(sigma, 0 m, L/2)", "max<sigma;0[m];(L/2)>"),
        ("if(x < h, a, b)", "if<x<h;a;b>"),
        ("if(b1 < x <= b2, 1, 0)", "if<(b1<x&x<=b2);1;0>"),
        ("if((x < 1 or x > 2) and (x) < 3, 1, 0)", "if<((x<1|x>2)&x<3);1;0>"),
        ("if((a + b)*c > 40 mm and x≥1, 1, 0)", "if<(((a+b)*c)>40[mm]&x>=1);1;0>"),
        ("µ_1*Ω2", "(μ_1*Ω2)"),
        ("2 h*x", "(2[h]*x)"),
        ("3 min", "3[min]"),
    ];
    for (text, expected) in cases {
        let tree = parse(text).unwrap_or_else(|e| panic!("{text}: {e:?}"));
        assert_eq!(shape(&tree), expected, "{text}");
    }
}

/// What is wrong, exactly where, and what to do.
#[test]
fn faults_have_place_message_and_hint() {
    const PRODUCT: Option<&str> = Some("a product is written with *");
    #[rustfmt::skip]
    let table: &[(&str, Span, &str, Option<&str>)] = &[
        ("", 0..0, "the formula is empty", None),
        ("  ", 0..0, "the formula is empty", None),
        ("* x", 0..1, "a formula cannot begin with `*`", None),
        ("2x", 0..2, "`2x` is not understood", Some("write 2*x")),
        ("40mm", 0..4, "`40mm` is not understood", Some("write 40 mm for the unit, 40*mm for a product")),
        ("50%", 0..3, "`50%` is not understood", Some("write 50 %, with a blank")),
        ("1_000", 0..5, "`1_000` is not understood", Some("digits are not grouped: write 1000")),
        ("1 000", 2..5, "two numbers in a row", Some("an operator is missing; digits are not grouped")),
        ("1.2.3", 0..4, "a number with two points", None),
        ("1e999", 0..5, "this number is outside the range of about 1e-308 to 1e308", None),
        ("1e-999", 0..6, "this number is outside the range of about 1e-308 to 1e308", None),
        ("3,5 m", 1..2, "a comma cannot stand here", Some("decimals are written with a point: 3.5")),
        ("a, b", 1..2, "a comma cannot stand here", None),
        ("x y", 2..3, "an operator is missing before `y`", PRODUCT),
        ("2 (x)", 2..3, "an operator is missing before `(`", PRODUCT),
        ("(a)(b)", 3..4, "an operator is missing before `(`", PRODUCT),
        ("(a)'(b)", 4..5, "a value at a point is taken of a name", Some("give the expression a name, or write at(expression, point)")),
        ("x 2", 2..3, "an operator is missing before `2`", PRODUCT),
        ("40 kn", 3..5, "an operator is missing before `kn`", Some("`kn` is not a unit: did you mean kN?")),
        ("5 m x", 4..5, "an operator is missing before `x`", PRODUCT),
        ("x**2", 1..3, "`**` is not understood", Some("a power is written with ^")),
        ("a·b", 1..3, "`·` is not understood", Some("a product is written with *")),
        ("a × b", 2..4, "`×` is not understood", Some("a product is written with *")),
        ("x²", 1..3, "`²` is not understood", Some("write ^2")),
        ("y’", 1..4, "`’` is not understood", Some("a derivative is written with the plain mark '")),
        ("y\"(L)", 1..2, "`\"` is not understood", Some("a second derivative is written with two plain marks ''")),
        ("a == b", 2..4, "`==` is not understood", Some("an equation is written with one =")),
        ("a – b", 2..5, "`–` is not understood", Some("write the minus sign -")),
        ("a = b", 2..3, "an equation cannot stand here, only an expression", None),
        ("(a + b", 0..1, "this parenthesis is not closed", Some("a ) is missing")),
        ("f(a, g(b)", 1..2, "this parenthesis is not closed", Some("a ) is missing")),
        ("a + b)", 5..6, "this parenthesis was never opened", Some("take it away, or open one before")),
        ("a + ", 2..3, "something is missing behind `+`", None),
        ("a + * b", 2..3, "something is missing behind `+`", None),
        ("(a+)", 2..3, "something is missing behind `+`", None),
        ("f(a,)", 3..4, "something is missing behind `,`", None),
        ("f(,a)", 1..2, "something is missing behind `(`", None),
        ("()", 0..1, "something is missing behind `(`", None),
        ("a*'", 1..2, "something is missing behind `*`", Some("' stands behind a name or a parenthesis")),
        ("2'", 1..2, "a number has no derivative", Some("' stands behind a name or a parenthesis")),
        ("a < b", 2..3, "a comparison stands only in if(test, a, b)", None),
        ("a and b", 2..5, "`and` stands only between comparisons in if(...)", None),
        ("if(x, 1, 2)", 3..4, "a comparison is missing in `if`", Some("write if(x < a, ..., ...)")),
        ("if(x = 2, 1, 2)", 5..6, "a test cannot be an equality", Some("use <, <=, > or >=")),
        ("if(x < 2, 1)", 0..12, "`if` needs a test and two values", Some("write if(test, a, b)")),
        ("if(x < 2, 1, 2, 3)", 14..15, "`if` takes a test and two values, not more", Some("for more cases put another if(...) in the place of b")),
        ("if x < 2", 0..2, "a parenthesis is missing behind `if`", Some("write if(test, a, b)")),
        ("y(L) in mm", 5..7, "`in` cannot stand here", Some("a unit is asked for at the end of a report: \"y(L) in mm\"")),
        ("2 mm^n", 0..5, "the power of a unit must be a plain number", Some("write (2 mm)^...")),
        ("12 [kN*x]", 7..8, "`x` is not a unit", None),
        ("12 [kN", 3..4, "this bracket is not closed", None),
        ("[kN]", 0..1, "`[` is not understood", Some("square brackets hold a unit behind a number: 12 [kN*m]")),
        ("1.2 W/(m degC)*a", 9..13, "degC is an absolute temperature and stands alone only", Some("write K for differences of temperature: W/(m K)")),
        ("20 deg C", 3..8, "this reads as degree times C", Some("write degC for the temperature")),
        ("a & b", 2..3, "`&` is not understood", Some("write `and`")),
        ("a#b", 1..2, "`#` is not understood", None),
    ];
    for (text, span, message, hint) in table {
        let error = parse(text).expect_err(text);
        assert_eq!(
            (error.span, error.message.as_str(), error.hint.as_deref()),
            (span.clone(), *message, *hint),
            "{text}"
        );
    }
    for (text, span, message) in [
        ("a + b", 0..5, "an equation needs a ="),
        ("a = b = c", 6..7, "a second = in one equation"),
        ("a == b", 2..4, "`==` is not understood"),
        ("a = ", 2..3, "something is missing behind `=`"),
        ("= b", 0..1, "a formula cannot begin with `=`"),
        ("f(a = b)", 4..5, "an equation cannot stand within an expression"),
        ("(a = b", 0..1, "this parenthesis is not closed"),
        ("a b = c", 2..3, "an operator is missing before `b`"),
    ] {
        let error = parse_equation(text).expect_err(text);
        assert_eq!((error.span, error.message.as_str()), (span, message), "{text}");
    }
    for (text, span, message) in [
        ("y(L) in foo", 8..11, "`foo` is not a unit"),
        ("y(L) in kn", 8..10, "`kn` is not a unit"),
        ("y(L in mm", 4..6, "`in` cannot stand here"),
        ("y(L) in ", 8..8, "a unit is missing"),
        ("y( in mm", 1..2, "something is missing behind `(`"),
    ] {
        let error = parse_report(text).expect_err(text);
        assert_eq!((error.span, error.message.as_str()), (span, message), "{text}");
    }
}

#[test]
fn reports_split_at_the_last_in() {
    for (text, shape_expected, unit, place) in [
        ("y(L) in mm", "y<L>", Some("mm"), "mm"),
        ("y(L)  in  kN*m ", "y<L>", Some("kN m"), "kN*m"),
        ("y(L)\nin\tmm", "y<L>", Some("mm"), "mm"),
        ("y(L)", "y<L>", None, ""),
        ("L in in", "L", Some("in"), "in"),
        ("2 in in in", "2[in]", Some("in"), "in"),
        ("3 in + h", "(3[in]+h)", None, ""),
        ("h + 3 in", "(h+3[in])", None, ""),
        ("f(3 in + h) in mm", "f<(3[in]+h)>", Some("mm"), "mm"),
        ("f(3 in + h)", "f<(3[in]+h)>", None, ""),
        ("T(0 m) in °C", "T<0[m]>", Some("°C"), "°C"),
        ("k/m in 1", "(k/m)", Some("1"), "1"),
    ] {
        let (tree, found) = parse_report(text).unwrap_or_else(|e| panic!("{text}: {e:?}"));
        assert_eq!(shape(&tree), shape_expected, "{text}");
        assert_eq!(found.as_ref().map(|(u, _)| u.text.as_str()), unit, "{text}");
        assert_eq!(found.map_or("", |(_, span)| &text[span]), place, "{text}");
    }
}

#[test]
fn parts_know_their_places() {
    let text = "E*(a + 12 kN/m) - f''(x-, 2 [mm])";
    let tree = parse(text).expect("good");
    let Kind::Binary(Operator::Subtract, product, call) = tree.kind else { panic!("{tree:?}") };
    assert_eq!(&text[product.span], "E*(a + 12 kN/m)");
    let Kind::Binary(Operator::Multiply, _, sum) = product.kind else { panic!("a product") };
    assert_eq!(&text[sum.span.clone()], "(a + 12 kN/m)");
    let Kind::Binary(Operator::Add, _, number) = sum.kind else { panic!("a sum") };
    assert_eq!(&text[number.span], "12 kN/m");
    let Kind::Number { unit_span: Some(unit), .. } = number.kind else { panic!("a number") };
    assert_eq!(&text[unit], "kN/m");
    assert_eq!(&text[call.span], "f''(x-, 2 [mm])");
    let Kind::Call { name_span, primes, arguments, .. } = call.kind else { panic!("a call") };
    assert_eq!((&text[name_span], primes), ("f", 2));
    assert_eq!(&text[arguments[0].value.span.clone()], "x");
    assert_eq!(arguments[0].side, Some(Sign::Minus));
    let Kind::Number { unit_span: Some(unit), .. } = &arguments[1].value.kind else { panic!("a number") };
    assert_eq!(&text[unit.clone()], "mm");
    let (left, right) = parse_equation("V' = q").expect("good");
    assert_eq!((left.span, right.span), (0..2, 5..6));
}

#[test]
fn names_are_told_from_words_of_the_language() {
    for (text, expected) in [
        ("q_0", Some("q_0")),
        ("µ", Some("μ")),
        ("σ_max", Some("σ_max")),
        ("Länge", Some("Länge")),
        ("in", None),
        ("pi", None),
        ("if", None),
        ("2a", None),
        ("a b", None),
        ("", None),
        ("a'", None),
        ("x²", None),
    ] {
        assert_eq!(name(text).as_deref(), expected, "{text}");
    }
}

/// Whatever is nested, and however deep, the answer is a message; on a small stack, for threads have one.
#[test]
fn depth_and_length_are_bounded() {
    let repeat =
        |open: &str, middle: &str, close: &str, n: usize| format!("{}{middle}{}", open.repeat(n), close.repeat(n));
    let run = move || {
        for n in [DEEPEST, DEEPEST + 1, 10_000, 100_000] {
            for text in [
                repeat("(", "x", ")", n),
                repeat("-", "x", "", n),
                repeat("+", "x", "", n),
                repeat("f(", "x", ")", n),
                repeat("2^", "x", "", n),
                repeat("(", "x", "", n),
                repeat("if((", "x < 1", ")", n),
                repeat("a*(b + ", "x", ")", n),
                repeat("if(x < 1, 0, ", "x", ")", n),
                repeat("if(f(x) < 1 and ", "x", ")", n),
            ] {
                let result = parse(&text);
                if text.len() > LONGEST {
                    assert!(result.is_err());
                } else if n > DEEPEST {
                    let error = result.expect_err("too deep");
                    assert!(error.message.contains("200 brackets"), "{error:?}");
                } else if let Ok(tree) = result {
                    assert_eq!(parse(&tree.to_string()).map(|t| t.to_string()), Ok(tree.to_string()));
                }
            }
        }
        for text in [
            repeat("a + ", "x", "", 100_000),
            repeat("a*", "x", "", 100_000),
            format!("x{}", "'".repeat(100_000)),
            format!("x{}(0)", "'".repeat(100_000)),
            format!("if({}, 1, 2)", vec!["x"; 100_000].join(" < ")),
            format!("if({}, 1, 2)", vec!["x < 1"; 100_000].join(" and ")),
            "x".repeat(LONGEST + 1),
        ] {
            let error = parse(&text).expect_err("too long");
            assert!(error.message.contains("more than") || error.message.contains("too many"), "{error:?}");
        }
        // Many arguments are no depth.
        assert!(parse(&format!("max({})", vec!["x"; 100_000].join(", "))).is_ok());
        let longest = vec!["x"; DEEPEST_TREE].join(" + ");
        assert!(parse(&longest).is_ok());
    };
    let thread = std::thread::Builder::new().stack_size(1 << 20).spawn(run);
    thread.expect("a thread").join().expect("no overflow, no failure");
}

fn leaf() -> impl Strategy<Value = Kind> {
    let units = ["mm", "kN/m", "W/(m K)", "Pa s^0.42", "degC", "%", "s^-1"];
    prop_oneof![
        (0u32..4000, prop::option::of(prop::sample::select(units.to_vec()))).prop_map(|(n, unit)| Kind::Number {
            value: f64::from(n) / 8.0,
            unit: unit.map(|u| Unit::parse(u, true).expect("a unit")),
            unit_span: None,
        }),
        (-300i32..300).prop_map(|e| Kind::Number { value: 10f64.powi(e), unit: None, unit_span: None }),
        prop::sample::select(vec!["x", "pi", "σ_1", "L", "min"]).prop_map(|n| Kind::Name(n.into())),
    ]
}

fn boxed(kind: Kind) -> Box<Expression> {
    Box::new(Expression { kind, span: 0..0 })
}

fn kinds() -> impl Strategy<Value = Kind> {
    leaf().prop_recursive(6, 50, 4, |inner| {
        let compare = (
            inner.clone(),
            prop::sample::select(vec![
                Comparison::Less,
                Comparison::LessEqual,
                Comparison::Greater,
                Comparison::GreaterEqual,
            ]),
            inner.clone(),
        )
            .prop_map(|(a, c, b)| Test::Compare(boxed(a), c, boxed(b)));
        let tests = compare.prop_recursive(3, 6, 2, |test| {
            (any::<bool>(), test.clone(), test).prop_map(|(and, p, q)| {
                let join = if and { Test::And } else { Test::Or };
                join(Box::new(p), Box::new(q))
            })
        });
        let sides = prop::option::of(prop::sample::select(vec![Sign::Minus, Sign::Plus]));
        let argument =
            (inner.clone(), sides).prop_map(|(kind, side)| Argument { value: Expression { kind, span: 0..0 }, side });
        prop_oneof![
            inner.clone().prop_map(|a| Kind::Negate(boxed(a))),
            (
                prop::sample::select(vec![
                    Operator::Add,
                    Operator::Subtract,
                    Operator::Multiply,
                    Operator::Divide,
                    Operator::Power
                ]),
                inner.clone(),
                inner.clone()
            )
                .prop_map(|(o, a, b)| Kind::Binary(o, boxed(a), boxed(b))),
            (inner.clone(), 1..4usize).prop_map(|(a, n)| match a {
                // A number has no derivative, and primes add up.
                Kind::Number { .. } | Kind::Prime(..) => a,
                a => Kind::Prime(boxed(a), n),
            }),
            ("[fghV]", 0..3usize, prop::collection::vec(argument, 0..3))
                .prop_map(|(name, primes, arguments)| { Kind::Call { name, name_span: 0..0, primes, arguments } }),
            (tests, inner.clone(), inner).prop_map(|(t, a, b)| Kind::If(Box::new(t), boxed(a), boxed(b))),
        ]
    })
}

proptest! {
    #![proptest_config(crate::formula::random::cases(3000))]

    /// Printing and reading again gives the same tree.
    #[test]
    fn printed_trees_read_back(kind in kinds()) {
        let tree = Expression { kind, span: 0..0 };
        let text = tree.to_string();
        let back = parse(&text).map_err(|e| TestCaseError::fail(format!("{text}: {e:?}")))?;
        prop_assert_eq!(shape(&back), shape(&tree), "{}", text);
        prop_assert_eq!(back.to_string(), text);
    }

    #[test]
    fn no_text_panics(text in "\\PC{0,40}") {
        let _ = (parse(&text), parse_equation(&text), parse_report(&text));
    }

    /// Texts made of what formulas are made of; every place given lies in the text.
    #[test]
    fn no_likely_text_panics(
        parts in prop::collection::vec(prop::sample::select(vec![
            "x", "y", "L", "if", "and", "or", "in", " in ", " ", "12", "0.5", "1e3", ".", "+", "-", "*", "/", "^", "(", ")", "(",
            ")", ",", "=", "<", "<=", "'", "''", "[", "]", " mm", " kN/m", " degC", " 1/K", "²", "’", "µ", "°", "%", "sin(", "if(",
        ]), 0..25),
    ) {
        let text = parts.concat();
        for result in [
            parse(&text).map(|_| ()),
            parse_equation(&text).map(|_| ()),
            parse_report(&text).map(|_| ()),
        ] {
            if let Err(error) = result {
                prop_assert!(text.get(error.span.clone()).is_some(), "{error:?}");
            }
        }
    }
}
