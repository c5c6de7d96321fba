//! Sheets that follow a parameter.

use spanwise::record::build::Origin;
use spanwise::record::outcome::{Outcome, PathRow, Status};
use spanwise::record::{self, json, path};
use spanwise::sheet;

fn followed(text: &str) -> Outcome {
    let sheet = sheet::read(text).unwrap_or_else(|faults| panic!("{faults:#?}"));
    let found = sheet.follow(None).expect("a path is asked");
    path::followed(&sheet, &found, Origin { source: "test.toml", text }, false)
}

fn example(name: &str) -> String {
    std::fs::read_to_string(format!("examples/sheets/{name}.toml")).expect("an example")
}

fn faults(text: &str) -> Vec<String> {
    sheet::read(text).err().unwrap_or_default().into_iter().map(|f| f.message).collect()
}

/// Value and bar.
fn number(row: &PathRow, name: &str) -> (f64, f64) {
    let q = row.quantities.iter().find(|q| q.name == name).expect("asked");
    (q.value.expect("a value"), q.error)
}

fn holds((value, error): (f64, f64), exact: f64, relative: f64) {
    assert!((value - exact).abs() <= error, "{value} against {exact}, bar {error}");
    assert!(error <= relative * exact.abs(), "bar {error} of {value}");
}

/// Frank-Kamenetskii's layer. Reference: closed form ln cosh, evaluated with 40 digits.
#[test]
fn the_self_heating_layer_has_its_critical_thickness_and_both_states() {
    let text = example("self-heating-layer");
    let outcome = followed(&text);
    assert_eq!(outcome.status, Status::Solved, "{:?}", outcome.reason);
    let path = outcome.path.as_ref().expect("a path");
    assert_eq!(path.folds.len(), 1);
    let fold = &path.folds[0];
    holds((fold.parameter.value.expect("a value"), fold.parameter.error), 0.499_329_625_296_609_7, 1e-12);
    holds(number(fold, "centre temperature rise"), 11.311_792_448_151_584, 1e-11);
    let [first, last] = [&path.points[0], &path.points[path.points.len() - 1]];
    assert_eq!((first.branch, last.branch), (0, 1));
    assert_eq!((first.parameter.value, last.parameter.value), (Some(0.4), Some(0.4)));
    holds(number(first, "centre temperature rise"), 3.721_137_375_253_005, 1e-11);
    holds(number(last, "centre temperature rise"), 25.309_181_167_720_06, 1e-11);
    for row in path.points.iter().chain(&path.folds) {
        holds(number(row, "critical half thickness"), 0.499_329_625_296_609_7, 1e-12);
        holds(number(row, "margin"), 24.832_406_324_152_42, 1e-11);
    }
}

/// Deflection of the shallow arch for a given thrust H in closed form; what the load must be then is a quadratic equation.
/// Returns both loads, in N/m.
fn arch_loads(thrust: f64) -> [f64; 2] {
    let (l, ea, ei, f) = (2.4, 65e6, 13e3, 0.055);
    let p = std::f64::consts::PI / l;
    let k = (thrust / ei).sqrt();
    let a = thrust * f / (thrust - ei * p * p);
    // Slopes of the three shapes: arch, its sine part, the part of a unit load.
    let arch = |x: f64| f * p * (p * x).cos();
    let sine = |x: f64| a * p * (p * x).cos();
    let unit = |x: f64| (x - l / 2.0 - (k * (x - l / 2.0)).sin() / (k * (k * l / 2.0).cos())) / thrust;
    let simpson = |g: &dyn Fn(f64) -> f64| {
        let n = 2000;
        let h = l / f64::from(n);
        let weight = |j: i32| if j == 0 || j == n { 1.0 } else { f64::from(2 + 2 * (j % 2)) };
        (0..=n).map(|j| weight(j) * g(h * f64::from(j))).sum::<f64>() * h / 3.0
    };
    let c2 = simpson(&|x| -0.5 * unit(x).powi(2));
    let c1 = simpson(&|x| (arch(x) - sine(x)) * unit(x));
    let c0 = simpson(&|x| arch(x) * sine(x) - 0.5 * sine(x).powi(2)) - thrust * l / ea;
    let root = (c1 * c1 - 4.0 * c2 * c0).sqrt();
    let both = [(-c1 + root) / (2.0 * c2), (-c1 - root) / (2.0 * c2)];
    [both[0].min(both[1]), both[0].max(both[1])]
}

#[test]
fn the_shallow_arch_snaps_through_and_back() {
    let outcome = followed(&example("shallow-arch"));
    assert_eq!(outcome.status, Status::Solved, "{:?}", outcome.reason);
    let path = outcome.path.as_ref().expect("a path");
    assert_eq!(path.folds.len(), 2);
    assert_eq!(path.points.last().and_then(|p| p.parameter.value), Some(12.0));
    // The snap load is the largest of the upper loads over all thrusts, the other the smallest of the lower ones.
    for (fold, which, sign) in [(&path.folds[0], 1, 1.0), (&path.folds[1], 0, -1.0)] {
        let (mut low, mut high) = (50e3, 75e3);
        for _ in 0..100 {
            let (a, b) = (low + (high - low) / 3.0, high - (high - low) / 3.0);
            if sign * arch_loads(a)[which] > sign * arch_loads(b)[which] { high = b } else { low = a }
        }
        let exact = arch_loads(0.5 * (low + high))[which] / 1e3;
        let value = fold.parameter.value.expect("a value");
        // Simpson's rule and the search leave some 1e-12.
        assert!((value - exact).abs() <= fold.parameter.error + 1e-11 * exact, "{value} {exact}");
        assert!(fold.parameter.error <= 1e-11 * value);
    }
    // Everywhere on the path the load belongs to the thrust.
    for point in path.points.iter().filter(|p| number(p, "thrust").0 > 30.0) {
        let q = point.parameter.value.expect("a value");
        let loads = arch_loads(1e3 * number(point, "thrust").0);
        assert!(loads.iter().any(|load| (load / 1e3 - q).abs() < 1e-9), "{q} {loads:?}");
    }
}

/// A sheet of Bratu's problem; the closed form gives y'(0) = 4 a tanh(a), p = 8 a^2/cosh(a)^2.
fn bratu(path: &str, report: &str) -> String {
    format!(
        "[given]\np = 1\nspare = 2\nend = 1\n[span]\nx = [0, \"end\"]\n[unknowns]\ny = \"1\"\n[equations]\n\
         heat = \"y'' + p*exp(y) = 0\"\n[conditions]\nends = [\"y(0) = 0\", \"y(end) = 0\"]\n{path}\n[report]\n\
         slope = \"y'(0)\"\n{report}\n"
    )
}

#[test]
fn a_fold_before_the_end_is_the_verdict() {
    let outcome = followed(&bratu("[path]\nparameter = \"p\"\nfrom = 3\nto = 4\npoints = 5", "middle = \"y(1/2)\""));
    assert_eq!(outcome.status, Status::Failed);
    let reason = outcome.reason.as_deref().expect("a reason");
    assert!(reason.contains("p = 4 was not reached") && reason.contains("fold at p = 3.513 830 719 125"), "{reason}");
    assert!(outcome.quantities.iter().all(|q| q.value.is_none() && q.reason.is_some()));
    let path = outcome.path.as_ref().expect("a path");
    assert_eq!(path.points.len(), 3, "3, 3.25, 3.5 come before the fold");
    let document: serde_json::Value = serde_json::from_str(&json::document(&outcome, "", "", true)).expect("JSON");
    assert_eq!(document["status"], "failed");
    assert_eq!(document["path"]["points"][2]["parameter"]["value"], 3.5);
    assert!(document["path"]["folds"][0]["quantities"][1]["value"].is_number());
}

#[test]
fn a_start_without_solution_is_said() {
    let outcome = followed(&bratu("[path]\nparameter = \"p\"\nfrom = 4\nto = 5", ""));
    assert_eq!(outcome.status, Status::Failed);
    assert!(outcome.reason.as_deref().is_some_and(|r| r.contains("at the start of the path")), "{:?}", outcome.reason);
    assert!(outcome.path.is_none());
}

#[test]
fn folds_can_be_combined_and_missed() {
    let path = "[path]\nparameter = \"p\"\nfrom = 3\nto = 4\nthrough_folds = true\npoints = 3";
    let outcome = followed(&bratu(path, "twice = \"2*fold(1)\"\nshare = \"y(1/2)/fold(1)\"\nsecond = \"fold(2)\""));
    let [_, twice, share, second] = &outcome.quantities[..] else { panic!("four numbers") };
    holds((twice.value.expect("a value"), twice.error), 7.027_661_438_250_322, 1e-12);
    // Last point: upper state at p = 3, a = 1.7220..: y(1/2) = 2 ln cosh(a).
    let (mut low, mut high) = (1.2f64, 3.0f64);
    for _ in 0..100 {
        let a: f64 = 0.5 * (low + high);
        if 8.0 * (a / a.cosh()).powi(2) > 3.0 { low = a } else { high = a }
    }
    holds((share.value.expect("a value"), share.error), 2.0 * low.cosh().ln() / 3.513_830_719_125_161, 1e-11);
    assert!(second.value.is_none());
    assert_eq!(second.reason.as_deref(), Some("there is no fold 2: the path has only one fold"));
    assert_eq!(outcome.status, Status::Inaccurate);
}

#[test]
fn an_unknown_constant_can_be_the_parameter() {
    let text = "[span]\nx = [0, 1]\n[unknowns]\ny = \"1\"\np = { unit = \"1\", constant = true }\n[equations]\n\
                heat = \"y'' + p*exp(y) = 0\"\n[conditions]\nends = [\"y(0) = 0\", \"y(1) = 0\"]\n[path]\n\
                parameter = \"p\"\nfrom = 3\nto = 3.5\npoints = 2\n[report]\nslope = \"y'(0)\"\np = \"p\"\n";
    let outcome = followed(text);
    assert_eq!(outcome.status, Status::Solved, "{:?}", outcome.reason);
    assert_eq!(outcome.quantities[1].value, Some(3.5));
}

/// A beam-column is linear for every axial force: no steps are needed. Amplification of the mid-span deflection under an
/// even load: 24 (sec u - 1 - u^2/2) / (5 u^4), u = (L/2) sqrt(N/EI): Timoshenko & Gere, Theory of Elastic Stability, eq. 1-23 (from memory).
#[test]
fn a_problem_linear_at_every_value_is_solved_point_by_point() {
    let text = "[given]\nL = \"4 m\"\nEI = \"850 kN m^2\"\nq = \"2 kN/m\"\nN = \"0 kN\"\n[span]\nx = [\"0 m\", \"L\"]\n\
                [unknowns]\nw = \"mm\"\n[equations]\nbending = \"(EI*w'')'' + N*w'' = q\"\n[conditions]\n\
                left = [\"w(0 m) = 0\", \"w''(0 m) = 0\"]\nright = [\"w(L) = 0\", \"w''(L) = 0\"]\n[path]\n\
                parameter = \"N\"\nfrom = \"0 kN\"\nto = \"500 kN\"\npoints = 6\n[report]\nsag = \"w(L/2) in mm\"\n";
    let outcome = followed(text);
    assert_eq!(outcome.status, Status::Solved, "{:?}", outcome.reason);
    let path = outcome.path.as_ref().expect("a path");
    assert_eq!(path.points.len(), 6);
    for point in &path.points {
        let n = point.parameter.value.expect("a value");
        let u = (n / 850.0).sqrt() * 2.0;
        let factor = if n == 0.0 { 1.0 } else { 24.0 / 5.0 * (1.0 / u.cos() - 1.0 - u * u / 2.0) / u.powi(4) };
        let exact = 5.0 * 2.0 * 256.0 / (384.0 * 850.0) * 1e3 * factor;
        let (value, error) = number(point, "sag");
        assert!(
            (value - exact).abs() <= error + 1e-13 * exact && error <= 1e-11 * exact,
            "{n} {value} {exact} {error}"
        );
    }
}

#[test]
fn senseless_paths_are_refused_each_in_one_sentence() {
    let path = |lines: &str| bratu(&format!("[path]\n{lines}"), "");
    let ends = "from = 1\nto = 2";
    for (text, wanted) in [
        (path(&format!("parameter = \"delta\"\n{ends}")), "`delta` is not among the data of this sheet"),
        (path(&format!("parameter = \"spare\"\n{ends}")), "nothing depends on `spare`"),
        (path(&format!("parameter = \"end\"\n{ends}")), "`end` moves an end or a break of the span"),
        (path(ends), "[path] lacks `parameter`"),
        (path("parameter = \"p\"\nfrom = 1"), "[path] lacks `to`"),
        (path("parameter = \"p\"\nfrom = 1\nto = \"2 m\""), "`2 m` is m (length) but 1 (pure number) is needed here"),
        (path("parameter = \"p\"\nfrom = 2\nto = 2"), "the path ends where it begins"),
        (path(&format!("parameter = \"p\"\npoints = 1\n{ends}")), "a path has 2 to 1000 points"),
        (path(&format!("parameter = \"p\"\nsteps = 5\n{ends}")), "`steps` says nothing about a path"),
        (path(&format!("parameter = \"p\"\nthrough_folds = 1\n{ends}")), "a number cannot stand here"),
        (bratu("", "f = \"fold(1)\""), "the sheet has no [path]"),
        (
            bratu(&format!("[path]\nparameter = \"p\"\n{ends}"), "f = \"fold(0)\""),
            "`fold` takes the number of the fold",
        ),
        (
            bratu(&format!("[path]\nparameter = \"p\"\n{ends}"), "").replace("y(0) = 0", "y(0) = fold(1)"),
            "it belongs into [report]",
        ),
    ] {
        let found = faults(&text);
        assert!(found.iter().any(|m| m.contains(wanted)), "{wanted}: {found:?}");
        assert_eq!(found.len(), 1, "{wanted}: {found:?}");
    }
}

#[test]
fn the_record_shows_the_path() {
    let outcome = followed(&example("self-heating-layer"));
    let files = record::files(&outcome, "0", "0");
    let find = |name: &str| {
        let (_, bytes) = files.iter().find(|(n, _)| n == name).unwrap_or_else(|| panic!("{name} is missing"));
        String::from_utf8(bytes.clone()).expect("text")
    };
    let page = find("record.html");
    assert!(page.contains("Path of a") && page.contains("fold 1"));
    let plot = find("plots/path-01-centre-temperature-rise.svg");
    assert!(plot.contains("11.312 at 0.4993"), "the fold is marked");
    find("plots/path-history.svg");
    let table = find("path.csv");
    assert_eq!(table.lines().count(), 1 + outcome.path.as_ref().map_or(0, |p| p.points.len() + p.folds.len()));
    assert!(table.lines().any(|l| l.starts_with("1,0.49932962529")), "{table}");
    let text = record::text::results(&outcome);
    assert!(text.contains("fold 1   0.499 329 625 296"), "{text}");
}
