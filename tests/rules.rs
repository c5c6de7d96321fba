//! Nodes and weights against tables of many digits, exactness of the rules.

use approx::assert_relative_eq;
use spanwise::legendre::{End, Rule, gauss, lobatto, radau, values};

/// A decimal number of many digits as the sum of two `f64`.
fn parse(text: &str) -> (f64, f64) {
    let hi: f64 = text.parse().expect("a number");
    // The exact decimal expansion of hi, subtracted digit by digit.
    let lo = decimal_difference(text, hi);
    (hi, lo)
}

/// text - value, by integers in units of the text's last digit (scaled to 25 + exponent digits).
fn decimal_difference(text: &str, value: f64) -> f64 {
    // Mantissa digits and decimal exponent of the text.
    let (mantissa, exponent) = match text.split_once('e') {
        Some((m, e)) => (m, e.parse::<i32>().expect("an exponent")),
        None => (text, 0),
    };
    let point = mantissa.find('.').map_or(0, |p| (mantissa.len() - p - 1) as i32);
    let digits: String = mantissa.chars().filter(char::is_ascii_digit).collect();
    let unit = exponent - point;
    let whole: i128 = digits.parse().expect("digits");
    // The same unit for the float: `{:.p$}` prints its exact decimal expansion, cut after p digits; ten digits
    // more than the text has make the cut harmless.
    let places = (10 - unit).max(0) as usize;
    let printed: String = format!("{value:.places$}").chars().filter(char::is_ascii_digit).collect();
    let float: i128 = printed.parse().expect("digits");
    (whole * 10i128.pow(10) - float) as f64 * 10f64.powi(-(places as i32))
}

/// Distance of `found` from the table in units of the last place of the table's value.
fn ulps(found: f64, exact: (f64, f64)) -> f64 {
    if exact == (0.0, 0.0) {
        return if found == 0.0 { 0.0 } else { f64::INFINITY };
    }
    let size = exact.0.abs();
    let ulp = size.next_up() - size;
    ((found - exact.0) - exact.1).abs() / ulp
}

struct Row {
    rule: String,
    n: usize,
    index: usize,
    theta: (f64, f64),
    from_left: (f64, f64),
    weight: (f64, f64),
}

/// How the table was made is told in `tests/data/rules.py`.
fn table() -> Vec<Row> {
    let text = include_str!("data/rules.csv");
    let rows = text.lines().skip(1).map(|line| {
        let cells: Vec<&str> = line.split(',').collect();
        Row {
            rule: cells[0].to_owned(),
            n: cells[1].parse().expect("a count"),
            index: cells[2].parse().expect("an index"),
            theta: parse(cells[3]),
            from_left: parse(cells[4]),
            weight: parse(cells[5]),
        }
    });
    rows.collect()
}

#[test]
fn the_ulp_measure_sees_parts_of_an_ulp() {
    let exact = parse("1.570796326794896619231322");
    assert_eq!(exact.0, std::f64::consts::FRAC_PI_2);
    assert_relative_eq!(exact.1, 6.123_233_995_736_766e-17, max_relative = 1e-7);
    assert!((ulps(exact.0.next_up(), exact) - 0.724).abs() < 0.001);
    assert!(ulps(1.0, parse("1.000000000000000000000000")) == 0.0);
    let small = parse("1.234567890123456789012345e-7");
    assert!(ulps(small.0, small) < 0.5 && ulps(small.0.next_down(), small) > 0.5);
}

#[test]
fn nodes_and_weights_are_the_exact_ones_rounded() {
    let mut rule: Option<(String, usize, Rule, Rule)> = None;
    let (mut worst, mut rows) = ([0.0f64; 3], 0);
    for row in table() {
        if rule.as_ref().is_none_or(|(name, n, ..)| (name, *n) != (&row.rule, row.n)) {
            let pair = match row.rule.as_str() {
                "gauss" => (gauss(row.n), gauss(row.n)),
                "lobatto" => (lobatto(row.n), lobatto(row.n)),
                _ => (radau(row.n, End::Left), radau(row.n, End::Right)),
            };
            rule = Some((row.rule.clone(), row.n, pair.0.expect("n is enough"), pair.1.expect("n is enough")));
        }
        let Some((_, _, left, right)) = &rule else { unreachable!("just set") };
        let (j, mirror) = (row.index, row.n - 1 - row.index);
        let errors = [
            ulps(left.angles()[j], row.theta),
            ulps(left.from_left()[j], row.from_left).max(ulps(right.from_right()[mirror], row.from_left)),
            ulps(left.weights()[j], row.weight).max(ulps(right.weights()[mirror], row.weight)),
        ];
        let at = format!("{} n = {} j = {j}: {errors:?}", row.rule, row.n);
        assert!(errors.iter().all(|error| *error <= 0.51), "{at}");
        // s itself: half an ulp of its rounding, measured where 1 + s is exact enough to subtract 1 from.
        let s = (row.from_left.0 - 1.0) + row.from_left.1;
        assert!((left.nodes()[j] - s).abs() <= 1.2e-16, "{at}");
        assert_eq!(left.nodes()[j], -right.nodes()[mirror], "{at}");
        for (worst, error) in worst.iter_mut().zip(errors) {
            *worst = worst.max(error);
        }
        rows += 1;
    }
    println!("{rows} rows, worst ulps in angle, 1 + s, weight: {worst:.3?}");
    assert!(rows > 500);
}

/// Abramowitz & Stegun table 25.4 (Gauss) and 25.6 (Lobatto), digits from memory, confirmed with mpmath:
/// positive abscissas with weights.
#[test]
fn handbook_tables() {
    let gauss_tables: [&[(f64, f64)]; 5] = [
        &[(0.577350269189626, 1.0)],
        &[(0.0, 0.888888888888889), (0.774596669241483, 0.555555555555556)],
        &[(0.339981043584856, 0.652145154862546), (0.861136311594053, 0.347854845137454)],
        &[(0.0, 0.568888888888889), (0.538469310105683, 0.478628670499366), (0.906179845938664, 0.236926885056189)],
        &[
            (0.148874338981631, 0.295524224714753),
            (0.433395394129247, 0.269266719309996),
            (0.679409568299024, 0.219086362515982),
            (0.865063366688985, 0.149451349150581),
            (0.973906528517172, 0.066671344308688),
        ],
    ];
    for (n, table) in [2, 3, 4, 5, 10].into_iter().zip(gauss_tables) {
        compare(&gauss(n).expect("n >= 1"), table, 5.01e-16);
    }
    let lobatto_tables: [&[(f64, f64)]; 4] = [
        &[(0.0, 1.33333333), (1.0, 0.33333333)],
        &[(0.44721360, 5.0 / 6.0), (1.0, 1.0 / 6.0)],
        &[(0.0, 0.71111111), (0.65465367, 0.54444444), (1.0, 0.1)],
        &[(0.28523152, 0.55485838), (0.76505532, 0.37847496), (1.0, 0.06666667)],
    ];
    for (n, table) in [3, 4, 5, 6].into_iter().zip(lobatto_tables) {
        compare(&lobatto(n).expect("n >= 2"), table, 5.01e-9);
    }
}

fn compare(rule: &Rule, table: &[(f64, f64)], half_last_digit: f64) {
    let start = rule.len() / 2;
    assert_eq!(table.len(), rule.len() - start);
    for (j, (s, w)) in table.iter().enumerate() {
        assert!((rule.nodes()[start + j] - s).abs() <= half_last_digit, "node {s}");
        assert!((rule.weights()[start + j] - w).abs() <= half_last_digit, "weight {w}");
    }
}

/// A rule is exact to its degree and not beyond: the integral of P_k is 0 for k > 0.
#[test]
fn rules_are_exact_to_their_degree_and_no_further() {
    for n in [1, 2, 3, 4, 7, 16, 33, 100] {
        let mut rules =
            vec![(gauss(n), 2 * n - 1), (radau(n, End::Left), 2 * n - 2), (radau(n, End::Right), 2 * n - 2)];
        if n >= 2 {
            rules.push((lobatto(n), 2 * n - 3));
        }
        for (rule, degree) in rules {
            let rule = rule.expect("n is enough");
            let mut sums = vec![0.0; degree + 2];
            for (s, w) in rule.nodes().iter().zip(rule.weights()) {
                for (sum, p) in sums.iter_mut().zip(values(degree + 1, *s)) {
                    *sum += w * p;
                }
            }
            assert!((sums[0] - 2.0).abs() < 4e-15, "{:?} {n}", rule.kind());
            for (k, sum) in sums[..=degree].iter().enumerate().skip(1) {
                assert!(sum.abs() < 1e-14, "{:?} n = {n}, P_{k}: {sum:e}", rule.kind());
            }
            // The first degree too many misses by about sqrt(pi/2n): the ratio of P_2n to P_n^2 at infinity, times 2/(2n+1).
            let beyond = sums[degree + 1].abs();
            let expected = (std::f64::consts::FRAC_PI_2 / n as f64).sqrt();
            assert!((0.5..2.5).contains(&(beyond / expected)), "{:?} n = {n}: {beyond:e}", rule.kind());
        }
    }
}

/// Sum without the rounding of its own (Neumaier, Z. angew. Math. Mech. 54, 1974).
fn sum(terms: impl Iterator<Item = f64>) -> f64 {
    let (mut sum, mut lost) = (0.0f64, 0.0);
    for term in terms {
        let next = sum + term;
        lost += if sum.abs() > term.abs() { (sum - next) + term } else { (term - next) + sum };
        sum = next;
    }
    sum + lost
}

/// Integrals of 1, s^2 and s^7 (Radau: not odd term by term), to the rounding of the weights.
#[test]
fn weights_and_moments_of_long_rules_add_up() {
    for n in [49, 50, 1000, 1001, 100_000, 1_000_000] {
        for rule in [gauss(n), lobatto(n), radau(n, End::Left), radau(n, End::Right)] {
            let rule = rule.expect("n is enough");
            for (power, exact) in [(0, 2.0), (2, 2.0 / 3.0), (7, 0.0)] {
                let moment = sum(rule.nodes().iter().zip(rule.weights()).map(|(s, w)| w * s.powi(power)));
                assert!((moment - exact).abs() <= 2.0 * f64::EPSILON, "{:?} {n} s^{power}: {moment}", rule.kind());
            }
        }
    }
}
