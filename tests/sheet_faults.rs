//! Faulty sheets: every fault with its exact line, column and message, all of one sheet in one pass.

use spanwise::sheet;

const BASE: &str = r#"title = "Bench"
[given]
L = "3 m"
B = "10 kN m^2"
q = "1 kN/m"
[span]
x = ["0 m", "L"]
[unknowns]
y = "mm"
[equations]
bending = "(B*y'')'' = q"
[conditions]
left = ["y(0 m) = 0", "y'(0 m) = 0"]
right = ["y(L) = 0", "y'(L) = 0"]
[report]
deflection = "y(L/2) in mm"
"#;

const HEAT: &str = r#"[given]
L = "3 m"
k = "2 W/(m K)"
h = "5 W/(m^2 K)"
Ta = "20 degC"
[span]
x = ["0 m", "L"]
[unknowns]
T = "degC"
[equations]
heat = "(k*T')' = 0"
[conditions]
left = "T(0 m) = Ta"
right = "T(L) = 30 degC"
[report]
middle = "T(1 m)"
"#;

/// The sheet with some texts replaced, each of which must be there once.
fn with(base: &str, changes: &[(&str, &str)]) -> String {
    let mut text = base.to_owned();
    for (old, new) in changes {
        assert_eq!(text.matches(old).count(), 1, "{old}");
        text = text.replace(old, new);
    }
    text
}

/// All faults: line, column, message.
fn faults(text: &str) -> Vec<(usize, usize, String)> {
    match sheet::read(text) {
        Ok(_) => Vec::new(),
        Err(faults) => faults
            .into_iter()
            .map(|f| {
                // The span is what line and column say, and never cuts a letter.
                assert!(text.get(f.span.clone()).is_some(), "{f:?}");
                let before = &text[..f.span.start];
                assert_eq!(before.matches('\n').count() + 1, f.line);
                (f.line, f.column, f.message)
            })
            .collect(),
    }
}

#[track_caller]
fn expect(text: &str, expected: &[(usize, usize, &str)]) {
    let found = faults(text);
    let found: Vec<(usize, usize, &str)> = found.iter().map(|(l, c, m)| (*l, *c, m.as_str())).collect();
    assert_eq!(found, expected, "{text}");
}

#[track_caller]
fn hint(text: &str, expected: &str) {
    let faults = sheet::read(text).expect_err("a fault");
    assert_eq!(faults[0].hint.as_deref(), Some(expected), "{faults:?}");
}

#[test]
fn the_sound_sheets_are_sound() {
    expect(BASE, &[]);
    expect(HEAT, &[]);
}

#[test]
fn not_toml() {
    expect(
        &with(BASE, &[("q = \"1 kN/m\"", "q = 1 kN/m")]),
        &[(5, 5, "not TOML: string values must be quoted, expected literal string")],
    );
    let text = with(BASE, &[("\"y(L/2) in mm\"", "\"y(L/2) in mm")]);
    expect(&text, &[(16, 27, "not TOML: invalid basic string, expected `\"`")]);
    expect("", &[(1, 1, "the sheet has no section [span]")]);
}

#[test]
fn unknown_keys() {
    let text = with(
        BASE,
        &[
            ("title =", "titel ="),
            ("y = \"mm\"", "y = { unit = \"mm\", gues = \"1 mm\" }"),
            ("[report]", "[accuracy]\nabsolute = 1\n[reports]"),
        ],
    );
    expect(
        &text,
        &[
            (1, 1, "`titel` is not a key of a sheet"),
            (9, 20, "`gues` says nothing about an unknown"),
            (16, 1, "`absolute` is not an accuracy"),
            (17, 2, "`reports` is not a key of a sheet"),
        ],
    );
    hint(&text, "did you mean `title`?");
    expect(
        &with(BASE, &[("q = \"1 kN/m\"", "q = { \"0 m - 1 m\" = \"1 kN/m\", else = \"2 kN/m\" }")]),
        &[(5, 7, "`0 m - 1 m` is not a stretch of the span")],
    );
}

#[test]
fn wrong_kinds_of_value() {
    let text = with(
        BASE,
        &[
            ("q = \"1 kN/m\"", "q = true\nr = {}\ns = nan"),
            ("x = [\"0 m\", \"L\"]", "x = \"0 m\""),
            ("\"y(L/2) in mm\"", "[\"y(1 m)\"]"),
        ],
    );
    expect(
        &text,
        &[
            (5, 5, "true or false cannot stand here"),
            (6, 5, "an empty table cannot stand here"),
            (7, 5, "nan is not a number to calculate with"),
            (9, 5, "a text cannot stand here"),
            (18, 14, "a list cannot stand here"),
        ],
    );
    expect(
        &with(BASE, &[("y = \"mm\"", "y = { unit = \"mm\", constant = 1 }")]),
        &[(9, 31, "a number cannot stand here")],
    );
    expect(&with(BASE, &[("y = \"mm\"", "y = { constant = false }")]), &[(9, 1, "`y` has no unit")]);
}

#[test]
fn names_not_defined() {
    // Each is named once, however often it and its users are used.
    let text = with(
        BASE,
        &[
            ("q = \"1 kN/m\"", "q = \"2*qq0\"\nr = \"q*3\""),
            ("(B*y'')'' = q", "(b*y'')'' = q + r"),
            ("y(L) = 0", "y(L) = 2*w0"),
            ("y(L/2) in mm", "sine(w0) + r"),
        ],
    );
    expect(
        &text,
        &[
            (5, 8, "`qq0` is not defined"),
            (12, 13, "`b` is not defined"),
            (15, 20, "`w0` is not defined"),
            (17, 15, "`sine` is not defined"),
        ],
    );
    let text = with(BASE, &[("B = \"10 kN m^2\"", "B = \"10 kN*m^2\"")]);
    expect(&text, &[(4, 12, "`m` is not defined")]);
    hint(&text, "as a unit it belongs behind a number: `12 kN m` or `12 [kN*m]`");
    hint(&with(BASE, &[("(B*y'')'' = q", "(b*y'')'' = q")]), "did you mean `B`?");
    hint(&with(BASE, &[("y(L/2) in mm", "sqr(y(L/2)^2) in mm")]), "did you mean `sqrt`?");
}

#[test]
fn places_inside_every_kind_of_toml_string() {
    let report = |text: &str| with(BASE, &[("deflection = \"y(L/2) in mm\"", text)]);
    expect(&report("d = \"y(L/2) + \\u0077w\""), &[(16, 15, "`ww` is not defined")]);
    expect(&report("d = 'y(L/2) + ww'"), &[(16, 15, "`ww` is not defined")]);
    expect(&report("d = '''\ny(L/2)\n  + ww'''"), &[(18, 5, "`ww` is not defined")]);
    expect(&report("d = \"\"\"\\\n   y(L/2) + \\\n   ww\"\"\""), &[(18, 4, "`ww` is not defined")]);
    expect(&report("\"größter Ausschlag ü\" = \"y(ü)\""), &[(16, 28, "`ü` is not defined")]);
    expect(&report("d = \"y(L/2)\"\r\ne = \"ww\""), &[(17, 6, "`ww` is not defined")]);
}

#[test]
fn names_that_cannot_be() {
    let text = with(BASE, &[("q = \"1 kN/m\"", "q = \"1 kN/m\"\ny = 3\nx = 4\n\"a b\" = 1\npi = 3\nq2 = 1\nq2x = 1")]);
    expect(
        &text,
        &[
            (6, 1, "`y` is declared twice"),
            (7, 1, "`x` is declared twice"),
            (8, 1, "`a b` cannot be a name"),
            (9, 1, "`pi` cannot be a name"),
        ],
    );
}

#[test]
fn cyclic_names() {
    expect(
        &with(BASE, &[("q = \"1 kN/m\"", "q = \"p + r\"\np = \"2*s\"\ns = \"q/3\"\nr = \"p\"\nt = \"t + 1\"")]),
        &[
            (7, 6, "`q` is defined by way of itself: `q` -> `p` -> `s` -> `q`"),
            (9, 6, "`t` is defined by way of itself: `t` -> `t`"),
        ],
    );
}

#[test]
fn units() {
    expect(
        &with(BASE, &[("10 kN m^2", "10 kM m^2"), ("y = \"mm\"", "y = \"furlong\""), ("in mm", "in mmm")]),
        &[
            (4, 9, "an operator is missing before `kM`"),
            (9, 6, "`furlong` is not a unit"),
            (16, 25, "`mmm` is not a unit"),
        ],
    );
    expect(&with(BASE, &[("y(L/2) in mm", "y(L/2) in kN")]), &[(16, 25, "this number is m (length), not N (force)")]);
}

#[test]
fn units_that_do_not_add_up() {
    expect(
        &with(
            BASE,
            &[
                ("(B*y'')'' = q", "(B*y'')'' + B*y'' = q"),
                ("y(L) = 0", "y(L) = 1"),
                ("y'(L) = 0", "y'(L) = sin(L)"),
                ("y(L/2) in mm", "y(2 s) + max(y, 0 m, q)"),
            ],
        ),
        &[
            (11, 12, "`(B*y'')''` is N/m (force per length) but `B*y''` is N m (moment or energy)"),
            (14, 11, "`y(L)` is m (length) but `1` is 1 (pure number)"),
            (14, 35, "`L` is m (length) but 1 (pure number) is needed here"),
            (16, 17, "`2 s` is s (time) but m (length) is needed here"),
            (16, 36, "`q` is N/m (force per length) but m (length) is needed here"),
        ],
    );
    expect(
        &with(BASE, &[("(B*y'')'' = q", "(B*y'')'' = q^y + q^(x/L)")]),
        &[
            (11, 26, "`y` is m (length) but 1 (pure number) is needed here"),
            (11, 32, "a power of a quantity with a unit needs a constant exponent"),
        ],
    );
}

#[test]
fn counts_of_equations() {
    expect(
        &with(BASE, &[("(B*y'')'' = q\"", "(B*y'')'' = q\"\nmore = \"y'' = 0\"")]),
        &[(12, 1, "2 equations for 1 unknown function")],
    );
    expect(&with(BASE, &[("y = \"mm\"", "y = \"mm\"\nw = \"mm\"")]), &[(12, 1, "1 equation for 2 unknown functions")]);
    expect(
        &with(
            BASE,
            &[
                ("y = \"mm\"", "y = \"mm\"\nw = \"mm\""),
                ("(B*y'')'' = q\"", "(B*y'')'' = q\"\nmore = \"(B*y'')'' + y*1 kN/m^2 = q\""),
            ],
        ),
        &[(13, 8, "the equations do not determine the highest derivative of `w`")],
    );
}

#[test]
fn counts_of_conditions() {
    expect(
        &with(BASE, &[(", \"y'(L) = 0\"", "")]),
        &[(14, 1, "4 conditions are needed (order 4), 3 given: 2 at x = 0 m, 1 at x = 3 m")],
    );
    hint(&with(BASE, &[(", \"y'(L) = 0\"", "")]), "`y` (order 4) lacks 1 condition at x = 3 m");
    expect(
        &with(BASE, &[("\"y'(L) = 0\"", "\"y'(L) = 0\", \"y''(L) = 0\", \"y(1 m) + y(2 m) = 0\"")]),
        &[(14, 1, "4 conditions are needed (order 4), 6 given: 2 at x = 0 m, 3 at x = 3 m, 1 over several points")],
    );
    expect(
        &with(BASE, &[("\"y'(L) = 0\"", "\"y'(L) = 0\", \"release(y', 1 m)\"")]),
        &[(14, 1, "5 conditions are needed (order 4, 1 jump or release), 4 given: 2 at x = 0 m, 2 at x = 3 m")],
    );
}

#[test]
fn pieces() {
    let q = |pieces: &str| with(BASE, &[("q = \"1 kN/m\"", &format!("q = {{ {pieces} }}"))]);
    expect(&q(r#""0 m .. 1 m" = "1 kN/m", "2 m .. L" = "2 kN/m""#), &[(5, 33, "`q` has a gap between two pieces")]);
    expect(
        &q(r#""0 m .. 2 m" = "1 kN/m", "1 m .. L" = "2 kN/m", else = "3 kN/m""#),
        &[(5, 33, "pieces of `q` overlap")],
    );
    expect(
        &q(r#""1 m .. 2 m" = "1 kN/m", "2 m .. 2.5 m" = "2 kN/m""#),
        &[(5, 8, "`q` has no value from 0 m to 1 m"), (5, 40, "`q` has no value from 2.5 m to 3 m")],
    );
    expect(&q(r#""0 m .. 4 m" = "1 kN/m", else = "2 kN/m""#), &[(5, 15, "this piece ends at 4 m, outside the span")]);
    expect(
        &q(r#""2 m .. 1 m" = "1 kN/m", else = "2 kN""#),
        &[
            (5, 8, "a piece of `q` runs backwards"),
            (5, 23, "this piece of `q` is N/m (force per length) but another is N (force)"),
        ],
    );
    expect(
        &q(r#""0 s .. 1 m" = "1 kN/m", "1 m .. y(0 m)" = "2 kN/m", else = "2 kN/m""#),
        &[
            (5, 8, "`0 s` is s (time) but m (length) is needed here"),
            (5, 40, "a value at a point cannot stand here: it is known only from the solution"),
        ],
    );
}

#[test]
fn places_outside_the_span() {
    expect(
        &with(
            BASE,
            &[
                ("x = [\"0 m\", \"L\"]", "x = [\"0 m\", \"L\"]\nbreaks = [\"1 m\", \"4 m\", \"L + 1 mm\"]"),
                ("y(L) = 0", "y(5 m) = 0"),
                ("y'(L) = 0", "jump((B*y'')', 0 m) = 1 kN"),
                ("y(L/2) in mm", "max(y, 1 m, 2*L)"),
            ],
        ),
        &[
            (8, 18, "the break at 4 m lies outside the span"),
            (8, 25, "the break at 3.001 m lies outside the span"),
            (15, 13, "this point, 5 m, lies outside the span"),
            (15, 24, "a jump or release must lie at a point inside the span"),
            (17, 27, "this point, 6 m, lies outside the span"),
        ],
    );
}

#[test]
fn backward_spans() {
    expect(
        &with(BASE, &[("x = [\"0 m\", \"L\"]", "x = [\"L\", \"0 m\"]")]),
        &[(7, 6, "the span runs backwards: its first end is not below its second")],
    );
    expect(
        &with(BASE, &[("x = [\"0 m\", \"L\"]", "x = [\"L\", \"3 m\"]")]),
        &[(7, 6, "the span runs backwards: its first end is not below its second")],
    );
    expect(
        &with(BASE, &[("x = [\"0 m\", \"L\"]", "x = [\"0 m\", \"y(0 m)\"]")]),
        &[(7, 14, "a value at a point cannot stand here: it is known only from the solution")],
    );
}

#[test]
fn stepped_data_outside_a_flux() {
    let stepped = |equation: &str| {
        let steps = "B = { \"0 m .. 1 m\" = \"10 kN m^2\", else = \"20 kN m^2\" }";
        with(BASE, &[("B = \"10 kN m^2\"", steps), ("(B*y'')'' = q", equation)])
    };
    expect(&stepped("(B*y'')'' = q"), &[]);
    let outside = "`B` steps at 1 m but stands outside the derivative: write (B*y''')'";
    expect(&stepped("B*y'''' = q"), &[(11, 12, outside)]);
    expect(&stepped("B/(1 N)*y'''' = q/(1 N)"), &[(11, 12, outside)]);
    hint(&stepped("B*y'''' = q"), "if y''' itself is continuous there, say so in [span]: smooth = [\"y'''\"]");
    let insisted = stepped("B*y'''' = q").replace("x = [\"0 m\", \"L\"]", "x = [\"0 m\", \"L\"]\nsmooth = [\"y'''\"]");
    expect(&insisted, &[]);
    // Part of the factor outside, part inside.
    let partly = stepped("B*((1 + x/L)*y'')'' = q");
    expect(&partly, &[(11, 12, "`B` steps at 1 m but stands outside the derivative: write (B*((1 + x/L)*y''))'")]);
    let divided = "`B` steps at 1 m but stands outside the derivative: write (y'''/B)'";
    expect(&stepped("y''''/B = q/(1 [N^2*m^4])"), &[(11, 18, divided)]);
    // Ends of pieces at which the value does not change are no steps.
    expect(&stepped("B*y'''' = q").replace("20 kN m^2", "10 kN m^2"), &[]);
    expect(
        &insisted.replace("[\"y'''\"]", "[\"y'''\", \"q'\", \"2*y\"]"),
        &[
            (8, 20, "`q'` is neither an unknown nor a derivative of one"),
            (8, 26, "`2*y` is neither an unknown nor a derivative of one"),
        ],
    );
}

#[test]
fn temperature_differences() {
    let right = |condition: &str| with(HEAT, &[("T(L) = 30 degC", condition)]);
    let difference = "`T(0 m) - T(L)` is a difference of temperatures but `5 degC` is an absolute temperature";
    expect(&right("T(0 m) - T(L) = 5 degC"), &[(14, 10, difference)]);
    expect(&right("T(0 m) - T(L) = 5 degC").replace("T = \"degC\"", "T = \"K\""), &[(14, 10, difference)]);
    expect(&right("T(0 m) - T(L) = 5 K"), &[]);
    expect(&right("T(L) = 300 K"), &[]);
    expect(&right("T(L) = 0"), &[(14, 10, "`T(L)` is an absolute temperature: 0 would be 0 K")]);
    expect(&right("-k*T'(L) = h*(T(L) + 5 degC)"), &[(14, 23, "`(T(L) + 5 degC)` adds up absolute temperatures")]);
    expect(&right("-k*T'(L) = h*(T(L) - Ta)"), &[]);
    expect(&right("-k*T'(L) = h*(T(L) - Ta)").replace("T = \"degC\"", "T = \"K\""), &[]);
    expect(&right("-k*T'(L) = h*5 degC"), &[(14, 23, "`5 degC` is an absolute temperature, not a difference")]);
    let warned = sheet::read(&right("-k*T'(L) = h*Ta")).expect("a sheet").warnings;
    assert_eq!(
        warned,
        ["`Ta` counts as an absolute temperature in a product, 293.15 K; if a difference is meant, write it in K"]
    );
    let printed = |formula: &str| with(HEAT, &[("T(1 m)", formula)]);
    let refused = "this is no absolute temperature: it cannot be printed in degC";
    expect(&printed("T(1 m) - Ta in degC"), &[(16, 26, refused)]);
    expect(&printed("T(1 m) + Ta in degC"), &[(16, 26, refused)]);
    expect(&printed("T(1 m) + T(2 m) - Ta in degC"), &[]);
    expect(&printed("T(1 m) in degC").replace("T = \"degC\"", "T = \"K\""), &[(16, 21, refused)]);
}

#[test]
fn bare_names_in_conditions() {
    let text = with(BASE, &[("y(L) = 0", "y = 0"), ("y'(L) = 0", "B*y'' = q*L^2")]);
    expect(&text, &[(14, 11, "`y` varies along the span"), (14, 22, "`y''` varies along the span")]);
    hint(&text, "write its value at a point: y(...)");
    expect(&with(BASE, &[("y(L/2) in mm", "y in mm")]), &[(16, 15, "`y` varies along the span")]);
    expect(
        &with(BASE, &[("y(L) = 0", "L = 3 m")]),
        &[(14, 11, "this condition holds no unknown: it says nothing about the solution")],
    );
}

#[test]
fn conditions_that_cannot_be() {
    let right = |condition: &str| with(BASE, &[("\"y'(L) = 0\"", condition)]);
    expect(
        &right(r#""max(y) = 1 mm""#),
        &[(14, 23, "a condition may hold values at points, jumps, integrals and means, not extremes or places")],
    );
    expect(
        &right(r#""y(argmax(y)) = 1 mm""#),
        &[(14, 25, "a condition may hold values at points, jumps, integrals and means, not extremes or places")],
    );
    expect(
        &right(r#""y'(L) = 0", "release(x*y, 1 m)", "y(1 m) = 0""#),
        &[(14, 35, "`x*y` is not one of the continuous quantities of this problem")],
    );
    expect(
        &right(r#""y'(L) = 0", "release(y', 1 m)", "y'(1 m) = 0""#),
        &[(14, 56, "`y'` has two values at this point")],
    );
    expect(
        &right(r#""y'(L) = 0", "jump(y, 1 m) = 0", "release(y, 1 m)", "y(1 m-) = 0""#),
        &[(14, 55, "the continuity of `y` is given up twice at this point")],
    );
    expect(&right(r#""release(y', 1 m) = 0""#), &[(14, 23, "`release` stands alone, as a condition")]);
    expect(&right(r#""y'(L)""#), &[(14, 23, "an equation needs a =")]);
    expect(
        &right(r#""integral(y - y(L)) = 0""#),
        &[(14, 23, "an integral of a condition cannot hold values at points")],
    );
}

#[test]
fn nothing_asked() {
    expect(&with(BASE, &[("deflection = \"y(L/2) in mm\"\n", "")]), &[(15, 2, "[report] is empty")]);
    expect(
        &with(BASE, &[("[report]\ndeflection = \"y(L/2) in mm\"\n", "")]),
        &[(1, 1, "the sheet has no section [report]")],
    );
}

#[test]
fn numbers_that_are_none() {
    expect(
        &with(
            BASE,
            &[("q = \"1 kN/m\"", "q = \"1 kN/m/(L - 3 m)\"\nr = \"sqrt(-2)\"\ns = \"ln(0*L/(1 m))\"\nt = 1e999")],
        ),
        &[
            (5, 13, "division by zero: `(L - 3 m)` is 0"),
            (6, 6, "`r` is not finite"),
            (7, 6, "`s` is not finite"),
            (8, 5, "this number is outside the range of about 1e-308 to 1e308"),
        ],
    );
}

#[test]
fn points_where_the_equation_is_singular() {
    for equation in ["(1/x)*(x*k*T')' = 0", "(x*k*T')' = 0", "x*T'' + T' = 0"] {
        let text = with(HEAT, &[("(k*T')' = 0", equation)]);
        let message = "at the singular end x = 0 m this equation itself forces T'(0 m) = 0, which no condition says";
        expect(&text, &[(11, 8, message)]);
        let found = sheet::read(&text).expect_err("refused");
        assert_eq!(found[0].hint.as_deref(), Some("write regular(T, 0 m) in place of \"left\""));
        expect(&with(&text, &[("T(0 m) = Ta", "regular(T, 0 m)")]), &[]);
    }
    let flux = with(HEAT, &[("(k*T')' = 0", "(x*k*T')' = 0"), ("[span]", "f = \"x*k*T'\"\n[span]")]);
    expect(&with(&flux, &[("T(0 m) = Ta", "f(0 m) = 0")]), &[]);
    expect(
        &with(&flux, &[("T(0 m) = Ta", "f(0 m) = 3 W/m")]),
        &[(14, 8, "`f(0 m) = 3 W/m` cannot be met: nothing in it varies at this end")],
    );
    expect(
        &with(HEAT, &[("T(0 m) = Ta", "regular(T, 0 m)")]),
        &[(13, 8, "`regular(T, 0 m)` says nothing: the equations are not singular there")],
    );
    expect(
        &with(HEAT, &[("(k*T')' = 0", "(1/x)*(x*k*T')' = 0"), ("[\"0 m\"", "[\"1 mm\""), ("T(0 m)", "T(1 mm)")]),
        &[],
    );
}

#[test]
fn what_is_not_built_yet_is_refused_in_one_sentence() {
    expect(
        &with(
            BASE,
            &[
                ("title = \"Bench\"", "title = \"Bench\"\ncomplex = true"),
                ("x = [\"0 m\", \"L\"]", "x = [\"0 m\", \"L\"]\nuntil = \"y = 0\""),
                ("[report]", "[solutions]\n[sweep]\n[report]"),
            ],
        ),
        &[
            (2, 1, "`complex`: complex sheets are not part of this version"),
            (9, 1, "`until`: marching to an event is not part of this version"),
            (17, 2, "`solutions`: a search for several solutions is not part of this version"),
            (18, 2, "`sweep`: sweeps over data are not part of this version"),
        ],
    );
    expect(
        &with(
            BASE,
            &[
                ("y = \"mm\"", "y = \"mm\"\nl = { unit = \"m\", constant = true }"),
                ("x = [\"0 m\", \"L\"]", "x = [\"0 m\", \"l\"]"),
            ],
        ),
        &[(7, 14, "an end of the span that is an unknown constant is not part of this version")],
    );
}

#[test]
fn sheets_beyond_measure() {
    let large = format!("{BASE}# {}", "x".repeat(10_000_000));
    let message = format!("the sheet has {} bytes; at most 1000000 are read", large.len());
    expect(&large, &[(1, 1, &message)]);
    let deep = with(BASE, &[("1 kN/m", &format!("{}1 kN/m{}", "(".repeat(10_000), ")".repeat(10_000)))]);
    expect(&deep, &[(5, 206, "more than 200 brackets, signs and powers within each other")]);
    let chain: String = (0..300).map(|i| format!("k{i} = \"k{} + 1\"\n", i + 1)).collect();
    let chain = with(BASE, &[("q = \"1 kN/m\"\n", &format!("q = \"1 kN/m\"\n{chain}k300 = 1\n"))]);
    expect(&chain, &[(205, 9, "names are defined by way of more than 200 others")]);
}

#[test]
fn many_faults_are_listed_to_a_limit() {
    let many: String = (0..9_000).map(|i| format!("a{i} = \"zz{i}\"\n")).collect();
    let found = faults(&with(BASE, &[("[span]", &format!("{many}[span]"))]));
    assert_eq!(found.len(), 201);
    assert_eq!(found[200].2, "8800 more faults are not listed");
    let long = with(BASE, &[("q = \"1 kN/m\"", &format!("q = \"{}\"", "a".repeat(99_999)))]);
    assert_eq!(faults(&long).len(), 1);
    let names: String = (0..20_000).map(|i| format!("a{i} = {i}\n")).collect();
    let long = with(BASE, &[("[span]", &format!("{names}[span]"))]);
    expect(&long, &[(10_003, 1, "the sheet has 20008 entries; at most 10000 are allowed")]);
    let unknowns: String = (0..300).map(|i| format!("u{i} = \"m\"\n")).collect();
    let equations: String = (0..300).map(|i| format!("e{i} = \"u{i}' = 0\"\n")).collect();
    let crowd = with(
        BASE,
        &[("y = \"mm\"\n", &format!("y = \"mm\"\n{unknowns}")), ("[conditions]", &format!("{equations}[conditions]"))],
    );
    expect(&crowd, &[(209, 1, "the sheet has 301 unknowns; at most 200 are allowed")]);
    let stretches: String =
        (0..5000).map(|i| format!("\"{i} mm .. {} mm\" = \"{} kN/m\", ", i + 1, i % 7 + 1)).collect();
    let pieces = with(BASE, &[("q = \"1 kN/m\"", &format!("q = {{ {stretches} }}")), ("\"3 m\"", "\"5 m\"")]);
    expect(&pieces, &[(7, 1, "the sheet has 4999 breaks; at most 4000 are allowed")]);
}
