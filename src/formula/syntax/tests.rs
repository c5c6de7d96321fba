use super::*;

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
