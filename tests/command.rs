//! The command as a user runs it: streams, exit codes, files.

use assert_cmd::Command;
use serde_json::Value;
use std::fs;
use std::path::Path;

const SHAFT: &str = "examples/sheets/agitator-shaft.toml";

fn spanwise(arguments: &[&str]) -> Command {
    let mut command = Command::cargo_bin("spanwise").expect("the program is built");
    command.args(arguments);
    command
}

struct Ran {
    code: i32,
    out: String,
    err: String,
}

fn run(command: &mut Command) -> Ran {
    let output = command.output().expect("the program runs");
    let text = |bytes: &[u8]| String::from_utf8(bytes.to_vec()).expect("UTF-8");
    Ran { code: output.status.code().expect("not killed"), out: text(&output.stdout), err: text(&output.stderr) }
}

#[test]
fn solve_prints_numbers_with_uncertain_digits() {
    let ran = run(&mut spanwise(&["solve", SHAFT]));
    assert_eq!((ran.code, ran.err.as_str()), (0, ""));
    assert!(ran.out.contains("torque at the locked end            1216.849 903 612 4"), "{}", ran.out);
    assert!(ran.out.contains("N m"), "{}", ran.out);
}

#[test]
fn json_follows_the_contract() {
    let ran = run(&mut spanwise(&["solve", SHAFT, "--json"]));
    assert_eq!(ran.code, 0);
    let json: Value = serde_json::from_str(&ran.out).expect("JSON");
    assert_eq!(json["status"], "solved");
    assert_eq!(json["warnings"], Value::Array(Vec::new()));
    let first = &json["quantities"][0];
    assert_eq!(first["name"], "torque at the locked end");
    assert_eq!(first["unit"], "N m");
    let (value, error) = (first["value"].as_f64().expect("a value"), first["error"].as_f64().expect("a bar"));
    assert!((value - 1_216.849_903_612_467).abs() <= error && error < 1e-10);
    assert_eq!(json["sha256"].as_str().map(str::len), Some(64));
}

#[test]
fn standard_input_is_a_sheet() {
    let text = fs::read_to_string(SHAFT).expect("the sheet is there");
    let ran = run(spanwise(&["solve", "-"]).write_stdin(text));
    assert_eq!(ran.code, 0);
    assert!(ran.out.contains("twist at the step"));
}

#[test]
fn check_solves_nothing() {
    let ran = run(&mut spanwise(&["check", SHAFT]));
    assert_eq!(ran.code, 0);
    assert!(ran.out.contains("order 2, 3 conditions, linear; nothing was solved"), "{}", ran.out);
    assert!(ran.out.contains("Q(L) = -kt*phi(L)"), "{}", ran.out);
    let json: Value = serde_json::from_str(&run(&mut spanwise(&["check", SHAFT, "--json"])).out).expect("JSON");
    assert_eq!(json["problem"]["coordinate"], "x");
}

#[test]
fn faults_have_line_column_caret_and_hint() {
    let sheet = "[given]\nL = \"2 m\"\n[span]\nx = [\"0 m\", \"L\"]\n[unknowns]\nT = \"degC\"\n[equations]\ne = \"T'' = 0\"\n\
                 [conditions]\na = \"T(0 m) = 20 degC\"\nb = \"T(l) = 30 degC\"\n[report]\nq = \"T(1 m) in mm\"\n";
    let ran = run(spanwise(&["solve", "-", "--json"]).write_stdin(sheet));
    assert_eq!(ran.code, 2);
    assert!(ran.err.contains("`l` is not defined") && ran.err.contains("did you mean `L`?"), "{}", ran.err);
    assert!(ran.err.contains("-:11:8"), "{}", ran.err);
    assert!(ran.err.contains("2 faults"), "{}", ran.err);
    let json: Value = serde_json::from_str(&ran.out).expect("JSON");
    assert_eq!(json["status"], "failed");
    assert_eq!((json["faults"][0]["line"].as_u64(), json["faults"][0]["column"].as_u64()), (Some(11), Some(8)));
    assert_eq!(json["faults"][1]["code"], "dimension");
}

#[test]
fn a_problem_without_solution_is_explained() {
    let sheet = "[span]\nx = [\"0 m\", \"3 m\"]\n[unknowns]\ny = \"mm\"\n[given]\nEI = \"2 MN m^2\"\nM = \"EI*y''\"\nV = \"M'\"\n\
                 [equations]\nbending = \"V' = -5 kN/m\"\n[conditions]\nleft = [\"M(0 m) = 0\", \"V(0 m) = 0\"]\n\
                 right = [\"M(3 m) = 0\", \"V(3 m) = 0\"]\n[report]\nsag = \"y(1 m)\"\n";
    let ran = run(spanwise(&["solve", "-", "--json"]).write_stdin(sheet));
    assert_eq!(ran.code, 1, "{}", ran.err);
    assert!(ran.err.contains("the load has no reaction"), "{}", ran.err);
    assert!(ran.err.contains("nothing holds y against translation"), "{}", ran.err);
    let json: Value = serde_json::from_str(&ran.out).expect("JSON");
    assert_eq!(json["status"], "failed");
    assert_eq!(json["quantities"][0]["value"], Value::Null);
    assert!(json["quantities"][0]["reason"].as_str().is_some_and(|r| r.contains("no reaction")));
}

#[test]
fn an_accuracy_that_cannot_be_met_is_said() {
    // One wave number a billionth beside a resonance, fourteen digits asked.
    let sheet = "[accuracy]\nrelative = 1e-14\n[span]\nx = [\"0\", \"1\"]\n[unknowns]\ny = \"1\"\n[equations]\n\
                 e = \"y'' + (3.14159265459)^2*y = 0\"\n[conditions]\na = \"y(0) = 0\"\nb = \"y(1) = 1\"\n\
                 [report]\nm = \"y(0.5)\"\n";
    let ran = run(spanwise(&["solve", "-", "--json"]).write_stdin(sheet));
    assert_eq!(ran.code, 1, "{} {}", ran.out, ran.err);
    let json: Value = serde_json::from_str(&ran.out).expect("JSON");
    assert_eq!(json["status"], "inaccurate");
    assert!(json["quantities"][0]["reason"].as_str().is_some_and(|r| r.contains("bar")));
}

#[test]
fn the_record_is_complete_and_readable() {
    let folder = tempfile::tempdir().expect("a folder");
    let record = folder.path().join("deep/record");
    let ran = run(&mut spanwise(&["solve", SHAFT, "--record", record.to_str().expect("UTF-8")]));
    assert_eq!((ran.code, ran.err.as_str()), (0, ""));
    let page = fs::read_to_string(record.join("record.html")).expect("a page");
    assert!(page.contains("agitator") && page.contains("<svg") && !page.contains("<script"));
    let json: Value =
        serde_json::from_str(&fs::read_to_string(record.join("record.json")).expect("JSON")).expect("JSON");
    assert_eq!(json["status"], "solved");
    let csv = fs::read_to_string(record.join("solution.csv")).expect("a table");
    let mut lines = csv.lines();
    assert_eq!(lines.next(), Some("x [m],phi [mrad],Q [N m],tau [MPa]"));
    let columns: Vec<usize> = lines.map(|l| l.split(',').filter(|c| c.parse::<f64>().is_ok()).count()).collect();
    assert!(columns.len() > 50 && columns.iter().all(|c| *c == 4));
    assert!(fs::read_dir(record.join("plots")).expect("plots").count() >= 5);
    no_remains(&record);
}

fn no_remains(folder: &Path) {
    for entry in fs::read_dir(folder).expect("a folder").flatten() {
        assert!(!entry.file_name().to_string_lossy().starts_with(".record-"), "a temporary file was left");
    }
}

#[test]
fn a_folder_that_cannot_be_written_leaves_nothing() {
    let folder = tempfile::tempdir().expect("a folder");
    // A file where a folder is needed: fails for every user.
    let blocked = folder.path().join("record");
    fs::write(&blocked, "in the way").expect("written");
    let ran = run(&mut spanwise(&["solve", SHAFT, "--record", blocked.join("inside").to_str().expect("UTF-8")]));
    assert_eq!(ran.code, 2);
    assert!(ran.err.contains("the record cannot be written") && ran.err.contains("hint:"), "{}", ran.err);
    assert_eq!(fs::read_to_string(&blocked).expect("untouched"), "in the way");
    // A folder where one of the files should go: the others must not appear either.
    let half = folder.path().join("half");
    fs::create_dir_all(half.join("solution.csv/taken")).expect("made");
    let ran = run(&mut spanwise(&["solve", SHAFT, "--record", half.to_str().expect("UTF-8")]));
    assert_eq!(ran.code, 2, "{}", ran.err);
    let names: Vec<_> = fs::read_dir(&half).expect("there").flatten().map(|e| e.file_name()).collect();
    assert_eq!(names, ["solution.csv"], "{names:?}");
}

#[test]
fn files_that_are_no_sheets() {
    let folder = tempfile::tempdir().expect("a folder");
    let path = |name: &str| folder.path().join(name).to_str().expect("UTF-8").to_owned();
    let missing = run(&mut spanwise(&["solve", &path("missing.toml")]));
    assert_eq!(missing.code, 2);
    assert!(missing.err.contains("cannot be read") && missing.err.contains("hint: check the name"), "{}", missing.err);
    let unreadable = run(&mut spanwise(&["solve", folder.path().to_str().expect("UTF-8")]));
    assert_eq!(unreadable.code, 2);
    fs::write(path("latin.toml"), b"title = \"ok\"\nnote = \"M\xfcll\"\n").expect("written");
    let latin = run(&mut spanwise(&["solve", &path("latin.toml")]));
    assert_eq!(latin.code, 2);
    assert!(latin.err.contains("not UTF-8 text: line 2"), "{}", latin.err);
    fs::write(path("huge.toml"), vec![b'#'; 10_000_000]).expect("written");
    let huge = run(&mut spanwise(&["solve", &path("huge.toml")]));
    assert_eq!(huge.code, 2);
    assert!(huge.err.contains("larger than 1000000 bytes"), "{}", huge.err);
    fs::write(path("empty.toml"), "").expect("written");
    let empty = run(&mut spanwise(&["solve", &path("empty.toml")]));
    assert_eq!(empty.code, 2);
    assert!(empty.err.contains("has no section [span]"), "{}", empty.err);
}

#[test]
fn help_version_and_colours() {
    let help = run(&mut spanwise(&["--help"]));
    assert_eq!(help.code, 0);
    assert!(help.out.contains("Example:") && help.out.contains("spanwise solve"), "{}", help.out);
    let version = run(&mut spanwise(&["--version"]));
    assert_eq!((version.code, version.out.trim()), (0, concat!("spanwise ", env!("CARGO_PKG_VERSION"))));
    assert_eq!(run(&mut spanwise(&["sovle"])).code, 2);
    let bad = "[span]\nx = 3\n";
    let plain = run(spanwise(&["solve", "-"]).write_stdin(bad));
    assert!(!plain.err.contains('\u{1b}'));
    let forced = run(spanwise(&["solve", "-", "--color", "always"]).write_stdin(bad));
    assert!(forced.err.contains('\u{1b}'));
    let no_colour = run(spanwise(&["solve", "-"]).env("NO_COLOR", "1").write_stdin(bad));
    assert!(!no_colour.err.contains('\u{1b}'));
}

#[test]
fn a_closed_pipe_is_success() {
    use std::process::{Command, Stdio};
    let program = assert_cmd::cargo::cargo_bin("spanwise");
    let mut child = Command::new(program).args(["solve", SHAFT]).stdout(Stdio::piped()).spawn().expect("runs");
    drop(child.stdout.take());
    assert_eq!(child.wait().expect("ends").code(), Some(0));
}
