//! Faulty sheets: exact place, kind and message.

use spanwise::sheet::{self, Fault};

/// A sheet without fault; each case replaces one part of it.
const WALL: &str = r#"title = "Wall"
[given]
L = "0.3 m"
k = "0.8 W/(m K)"
h = "12 W/(m^2 K)"
Ta = "5 degC"
q = "-k*T'"
[span]
x = ["0 m", "L"]
[unknowns]
T = "degC"
[equations]
conduction = "(k*T')' = 0"
[conditions]
inside = "T(0 m) = 20 degC"
outside = "q(L) = h*(T(L) - Ta)"
[report]
flux = "q(0 m) in W/m^2"
"#;

/// What is replaced, by what, and line, column, code and message of the one fault that follows.
#[rustfmt::skip]
const CASES: &[(&str, &str, usize, usize, &str, &str)] = &[
    // not TOML
    (r#"L = "0.3 m""#, r#"L = 0.3 m"#, 3, 5, "toml", r#"not TOML: string values must be quoted, expected literal string"#),
    // unknown key
    (r#"T = "degC""#, r#"T = { unit = "degC", guest = "3" }"#, 11, 22, "unknown key", r#"`guest` says nothing about an unknown"#),
    // undefined
    (r#"h*(T(L) - Ta)"#, r#"H*(T(L) - Ta)"#, 16, 19, "unknown name", r#"`H` is not defined"#),
    // cyclic
    (r#"k = "0.8 W/(m K)""#, r#"k = "2*c"
c = "k/2""#, 5, 6, "cyclic names", r#"`k` is defined by way of itself: `k` -> `c` -> `k`"#),
    // unit unknown
    (r#"0.8 W/(m K)"#, r#"0.8 Watt/(m K)"#, 4, 10, "syntax", r#"an operator is missing before `Watt`"#),
    // dims
    (r#"h*(T(L) - Ta)"#, r#"h*(T(L) - Ta) + k*T(L)"#, 16, 19, "dimension", r#"`h*(T(L) - Ta)` is W/m^2 (heat flux) but `k*T(L)` is W/m (power per length)"#),
    // equation dims
    (r#"(k*T')' = 0"#, r#"(k*T')' = h"#, 13, 15, "dimension", r#"`(k*T')'` is W/m^3 (power per volume) but `h` is W/(m^2 K) (heat transfer coefficient)"#),
    // equation count
    (r#"[conditions]"#, r#"twice = "T'' = 0"
[conditions]"#, 14, 1, "equation count", r#"2 equations for 1 unknown function"#),
    // condition count
    (r#"inside = "T(0 m) = 20 degC"
"#, r#""#, 15, 1, "condition count", r#"2 conditions are needed (order 2), 1 given: 0 at x = 0 m, 1 at x = 0.3 m"#),
    // too many conditions
    (r#"[report]"#, r#"more = "T'(0 m) = 0"
[report]"#, 17, 1, "condition count", r#"2 conditions are needed (order 2), 3 given: 2 at x = 0 m, 1 at x = 0.3 m"#),
    // gap
    (r#"k = "0.8 W/(m K)""#, r#"k = { "0 m .. 0.1 m" = "1 W/(m K)", "0.2 m .. 0.3 m" = "2 W/(m K)" }"#, 4, 38, "piece", r#"`k` has a gap between two pieces"#),
    // overlap
    (r#"k = "0.8 W/(m K)""#, r#"k = { "0 m .. 0.2 m" = "1 W/(m K)", "0.1 m .. 0.3 m" = "2 W/(m K)" }"#, 4, 38, "piece", r#"pieces of `k` overlap"#),
    // piece outside
    (r#"k = "0.8 W/(m K)""#, r#"k = { "0 m .. 0.4 m" = "1 W/(m K)", else = "2 W/(m K)" }"#, 4, 15, "outside", r#"this piece ends at 0.4 m, outside the span"#),
    // backwards piece
    (r#"k = "0.8 W/(m K)""#, r#"k = { "0.2 m .. 0.1 m" = "1 W/(m K)", else = "2 W/(m K)" }"#, 4, 8, "piece", r#"a piece of `k` runs backwards"#),
    // break outside
    (r#"x = ["0 m", "L"]"#, r#"x = ["0 m", "L"]
breaks = ["0.5 m"]"#, 10, 11, "outside", r#"the break at 0.5 m lies outside the span"#),
    // condition outside
    (r#"T(0 m) = 20 degC"#, r#"T(-1 m) = 20 degC"#, 15, 13, "outside", r#"this point, -1 m, lies outside the span"#),
    // stepped
    (r#"k = "0.8 W/(m K)""#, r#"k = { "0 m .. 0.1 m" = "0.8 W/(m K)", else = "2 W/(m K)" }
zz = "1""#, 14, 15, "stepped datum", r#"`k` steps at 0.1 m but stands outside the derivative: write (k*T')'"#),
    // difference in degC
    (r#"flux = "q(0 m) in W/m^2""#, r#"fall = "T(0 m) - T(L) in degC""#, 18, 26, "temperature difference", r#"this is no absolute temperature: it cannot be printed in degC"#),
    // bare varying
    (r#"q(L) = h"#, r#"q = h"#, 16, 12, "varies", r#"`q` varies along the span"#),
    // span backwards
    (r#"x = ["0 m", "L"]"#, r#"x = ["L", "0 m"]"#, 9, 6, "span", r#"the span runs backwards: its first end is not below its second"#),
    // empty report
    (r#"flux = "q(0 m) in W/m^2"
"#, r#""#, 17, 2, "empty section", r#"[report] is empty"#),
    // division by zero
    (r#"L = "0.3 m""#, r#"z = 0
L = "0.3 m / z""#, 4, 14, "division by zero", r#"division by zero: `z` is 0"#),
    // nan
    (r#"k = "0.8 W/(m K)""#, r#"k = "sqrt(-1)*0.8 W/(m K)""#, 4, 6, "not finite", r#"`k` is not finite"#),
    // toml nan
    (r#"k = "0.8 W/(m K)""#, r#"k = nan"#, 4, 5, "not finite", r#"nan is not a number to calculate with"#),
    // value in equation
    (r#"(k*T')' = 0"#, r#"(k*T')' = h*(T(0 m) - Ta)/L"#, 13, 28, "nonlocal", r#"a value at a point cannot stand here: it is known only from the solution"#),
    // inf
    (r#"x = ["0 m", "L"]"#, r#"x = ["0 m", "inf"]"#, 9, 14, "not yet", r#"`inf`: infinite spans are not part of this version"#),
    // eigen
    (r#"[report]"#, r#"[eigen]
parameter = "lambda"
[report]"#, 17, 2, "not yet", r#"`eigen`: eigenproblems are not part of this version"#),
    // until
    (r#"x = ["0 m", "L"]"#, r#"x = ["0 m", "L"]
until = "T = 0""#, 10, 1, "not yet", r#"`until`: marching to an event is not part of this version"#),
    // complex
    (r#"title = "Wall""#, r#"title = "Wall"
complex = true"#, 2, 1, "not yet", r#"`complex`: complex sheets are not part of this version"#),
    // sweep
    (r#"[report]"#, r#"[sweep]
L = ["1 m"]
[report]"#, 17, 2, "not yet", r#"`sweep`: sweeps over data are not part of this version"#),
    // measured
    (r#"k = "0.8 W/(m K)""#, r#"k = { against = "T", points = [] }"#, 4, 31, "measured", r#"`k` needs at least two points"#),
    // comma
    (r#"0.8 W/(m K)"#, r#"0,8 W/(m K)"#, 4, 7, "syntax", r#"a comma cannot stand here"#),
    // a small letter for a capital, a prime forgotten
    (r#"T(L) - Ta"#, r#"T(l) - Ta"#, 16, 24, "unknown name", r#"`l` is not defined"#),
    (r#"(k*T')' = 0"#, r#"(k*T')' = k*T"#, 13, 15, "dimension", r#"`(k*T')'` is W/m^3 (power per volume) but `k*T` is W/m (power per length)"#),
    (r#"(k*T')' = 0"#, r#"k*T' = 0"#, 16, 1, "condition count", r#"1 condition is needed (order 1), 2 given: 1 at x = 0 m, 1 at x = 0.3 m"#),
    // what is no state cannot jump
    (r#"[report]"#, r#"step = "jump(T^2, 0.1 m) = 0"
[report]"#, 17, 8, "release", r#"`T^2` is not one of the continuous quantities of this problem"#),
    // later features
    (r#"q(0 m) in W/m^2"#, r#"fold(1)"#, 18, 9, "not yet", r#"`fold`: paths are not part of this version"#),
    // data that are infinite inside the span, whatever hides them
    (r#"(k*T')' = 0"#, r#"(k*T')' = 1 W/m^2/(x - 0.1 m)"#, 13, 14, "division by zero", r#"division by zero at x = 0.1 m: the data are infinite there"#),
    (r#"(k*T')' = 0"#, r#"(k*T')' = 1 W/m/(x - 0.1 m)^2"#, 13, 14, "division by zero", r#"division by zero at x = 0.1 m: the data are infinite there"#),
    (r#"(k*T')' = 0"#, r#"(k*T')' = 1 W/m^3*tan(10 1/m*x)"#, 13, 14, "division by zero", r#"division by zero at x = 0.15708 m: the data are infinite there"#),
    (r#"0.8 W/(m K)"#, r#"0.8 W/(m K)/(1 - 5 1/m*x)"#, 13, 14, "division by zero", r#"division by zero at x = 0.2 m: the data are infinite there"#),
    // not a number by name; three limits of a piece
    (r#"12 W/(m^2 K)"#, r#"nan"#, 5, 6, "not finite", r#"nan is not a number to calculate with"#),
    (r#"k = "0.8 W/(m K)""#, r#"k = { "0 m .. 0.1 m .. L" = "1 W/(m K)", else = "2 W/(m K)" }"#, 4, 21, "piece", r#"a stretch has two limits"#),
];

fn faults(text: &str) -> Vec<Fault> {
    match sheet::read(text) {
        Ok(_) => Vec::new(),
        Err(faults) => faults,
    }
}

/// The wall with one part replaced.
fn altered(part: &str, by: &str) -> String {
    assert!(WALL.contains(part), "{part} is not in the sheet");
    let text = WALL.replacen(part, by, 1);
    // The stepped datum is a fault only outside the derivative.
    if by.contains("zz = ") { text.replace("(k*T')' = 0", "k*T'' = 0") } else { text }
}

#[test]
fn the_wall_itself_has_no_fault() {
    assert_eq!(faults(WALL), []);
}

#[test]
fn every_fault_has_its_place_and_message() {
    let mut wrong = Vec::new();
    for (part, by, line, column, code, message) in CASES {
        let found = faults(&altered(part, by));
        let fits = matches!(&found[..], [f] if (f.line, f.column, f.code, f.message.as_str()) == (*line, *column, *code, *message));
        if !fits {
            wrong.push(format!("{by}: {found:#?}"));
        }
    }
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
}

#[test]
fn smooth_insists_on_a_stepped_factor_outside_the_derivative() {
    let stepped =
        altered("k = \"0.8 W/(m K)\"", "k = { \"0 m .. 0.1 m\" = \"0.8 W/(m K)\", else = \"2 W/(m K)\" }\nzz = \"1\"");
    assert_eq!(faults(&stepped).len(), 1);
    let insisted = stepped.replace("x = [\"0 m\", \"L\"]", "x = [\"0 m\", \"L\"]\nsmooth = [\"T'\"]");
    assert_eq!(faults(&insisted), []);
}

#[test]
fn all_faults_come_in_one_pass_in_the_order_of_the_sheet() {
    let text = WALL
        .replace("12 W/(m^2 K)", "12 Wat/(m^2 K)")
        .replace("h*(T(L) - Ta)", "k*(T(L) - Ta)")
        .replace("T(0 m) = 20", "T(1 m) = 20")
        .replace("[report]", "[report]\nfall = \"T(0 m) - T(L) in degC\"")
        .replace("(k*T')' = 0", "(k*T)' = zeta");
    let found: Vec<(usize, &str)> = faults(&text).iter().map(|f| (f.line, f.code)).collect();
    let lines: Vec<usize> = found.iter().map(|f| f.0).collect();
    assert!(lines.windows(2).all(|w| w[0] <= w[1]), "{found:?}");
    for line in [5, 13, 16, 18] {
        assert!(lines.contains(&line), "no fault in line {line}: {found:?}");
    }
}

#[test]
fn six_faults_are_six_faults() {
    let text = WALL
        .replace("12 W/(m^2 K)", "12 Wat/(m^2 K)")
        .replace("-k*T'", "-kk*T'")
        .replace("(k*T')' = 0", "(k*T')' = k")
        .replace("T(0 m) = 20", "T(1 m) = 20")
        .replace("[report]", "[report]\nfall = \"T(0 m) - T(L) in degC\"\nnone = \"sin(L)\"");
    let found: Vec<(usize, &str)> = faults(&text).iter().map(|f| (f.line, f.code)).collect();
    let expected = [
        (5, "syntax"),
        (7, "unknown name"),
        (13, "dimension"),
        (15, "outside"),
        (18, "temperature difference"),
        (19, "dimension"),
    ];
    assert_eq!(found, expected);
}

#[test]
fn formulas_that_grow_without_end_are_refused_once() {
    let chain: String = (1..40).map(|i| format!("a{i} = \"(a{0}*sin(a{0}))'*1 m\"\n", i - 1)).collect();
    let text = altered("[span]", &format!("a0 = \"T/(1 K)\"\n{chain}[span]"));
    let found: Vec<(&str, String)> = faults(&text).into_iter().map(|f| (f.code, f.message)).collect();
    assert_eq!(found, [("too large", "the formulas of this sheet grow too large when expanded".to_owned())]);
}

#[test]
fn brackets_without_end_and_sheets_without_end() {
    let deep = altered("20 degC", &format!("{}20 degC{}", "(".repeat(10_000), ")".repeat(10_000)));
    let found = faults(&deep);
    assert_eq!(found.len(), 1, "{found:?}");
    assert_eq!((found[0].line, found[0].code), (15, "syntax"));
    let huge = format!("{WALL}# {}", "x".repeat(10_000_000));
    let found = faults(&huge);
    assert_eq!((found.len(), found[0].code), (1, "too large"));
}

#[test]
fn columns_count_characters_behind_escapes_and_greek_letters() {
    let escaped = altered("q(L) = h*(T(L) - Ta)", r"q(L)\u0020= \u0068*(T(L) - Tb)");
    let found = faults(&escaped);
    assert_eq!((found[0].line, found[0].message.as_str()), (16, "`Tb` is not defined"));
    assert_eq!(found[0].column, escaped.lines().nth(15).map_or(0, |l| l.find("Tb").map_or(0, |c| c + 1)));
    let greek =
        altered("h = \"12 W/(m^2 K)\"", "\"α\" = \"12 W/(m^2 K)\"").replace("= h*(T(L) - Ta)", "= α*α*(T(L) - Ta)");
    let found = faults(&greek);
    assert_eq!((found[0].line, found[0].column, found[0].code), (16, 12, "dimension"), "{found:?}");
}
