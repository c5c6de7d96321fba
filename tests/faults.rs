//! Slips of the pen and the messages that follow, word for word as the command shows them.
//!
//! `tests/faults/slips.toml` lists the slips, `tests/faults/NAME.txt` holds what is shown. After a change of messages:
//! `UPDATE=1 cargo test --test faults`, then read the difference.

use assert_cmd::Command;
use serde_json::Value;
use spanwise::sheet::{self, Fault};
use std::collections::BTreeSet;
use std::fs;
use std::path::Path;
use toml::Table;

struct Slip {
    name: String,
    text: String,
}

fn slips() -> (Vec<(String, String)>, Vec<Slip>) {
    let list: Table = fs::read_to_string("tests/faults/slips.toml").expect("there").parse().expect("TOML");
    let text = |value: &toml::Value| value.as_str().expect("a text").to_owned();
    let sheets: Vec<(String, String)> =
        list["sheets"].as_table().expect("a table").iter().map(|(name, sheet)| (name.clone(), text(sheet))).collect();
    let slips = list["slip"].as_array().expect("a list").iter().map(|slip| {
        let (name, sheet) = (text(&slip["name"]), text(&slip["sheet"]));
        let (_, mut altered) = sheets.iter().find(|(n, _)| *n == sheet).cloned().expect("a sheet of the list");
        for change in slip["change"].as_array().expect("a list") {
            let (old, new) = (text(&change[0]), text(&change[1]));
            assert!(altered.contains(&old), "{name}: `{old}` is not in the sheet");
            altered = altered.replacen(&old, &new, 1);
        }
        Slip { name, text: altered }
    });
    let slips = slips.collect();
    (sheets, slips)
}

/// What `check` says about a sheet: exit code, standard output, standard error.
fn check(folder: &Path, text: &str, more: &[&str]) -> (i32, String, String) {
    fs::write(folder.join("sheet.toml"), text).expect("written");
    let mut command = Command::cargo_bin("spanwise").expect("the program is built");
    let output = command.current_dir(folder).args(["check", "sheet.toml"]).args(more).output().expect("it runs");
    let text = |bytes: &[u8]| String::from_utf8(bytes.to_vec()).expect("UTF-8");
    (output.status.code().expect("not killed"), text(&output.stdout), text(&output.stderr))
}

#[test]
fn every_slip_has_its_message() {
    let update = std::env::var_os("UPDATE").is_some();
    let folder = tempfile::tempdir().expect("a folder");
    let (sheets, slips) = slips();
    assert!(slips.len() >= 60);
    for (name, sheet) in sheets {
        let (code, _, shown) = check(folder.path(), &sheet, &[]);
        assert_eq!((code, shown.as_str()), (0, ""), "{name} is sound");
    }
    let mut wrong = Vec::new();
    let mut files = BTreeSet::new();
    for Slip { name, text } in &slips {
        let (code, out, shown) = check(folder.path(), text, &[]);
        let file = Path::new("tests/faults").join(format!("{}.txt", name.replace(' ', "-")));
        assert!(files.insert(file.clone()), "{name} comes twice");
        if update {
            fs::write(&file, &shown).expect("written");
        }
        let expected = fs::read_to_string(&file).unwrap_or_default();
        if (code, out.as_str()) != (2, "") || shown != expected {
            wrong.push(format!("== {name}: exit code {code}\n{shown}-- expected\n{expected}"));
        }
    }
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
    for entry in fs::read_dir("tests/faults").expect("a folder") {
        let path = entry.expect("an entry").path();
        let stale = path.extension().is_some_and(|e| e == "txt") && !files.contains(&path);
        assert!(!stale, "{} belongs to no slip", path.display());
    }
}

#[test]
fn the_json_says_the_same() {
    let folder = tempfile::tempdir().expect("a folder");
    for Slip { name, text } in slips().1.iter().step_by(4) {
        let (code, out, shown) = check(folder.path(), text, &["--json"]);
        let json: Value = serde_json::from_str(&out).expect("JSON");
        let faults = json["faults"].as_array().expect("a list");
        assert!(code == 2 && !faults.is_empty(), "{name}");
        for fault in faults {
            assert_eq!(fault["file"], "sheet.toml");
            assert!(fault["code"].as_str().is_some_and(|c| !c.is_empty()));
            let message = fault["message"].as_str().expect("a message");
            assert!(shown.contains(message), "{name}: {message}");
            let place = format!("sheet.toml:{}:{}", fault["line"], fault["column"]);
            assert!(shown.contains(&place), "{name}: {place}\n{shown}");
            if let Some(hint) = fault["hint"].as_str() {
                assert!(shown.contains(hint), "{name}: {hint}");
            }
        }
    }
}

fn faults(text: &str) -> Vec<Fault> {
    sheet::read(text).err().unwrap_or_default()
}

fn wall() -> String {
    slips().0.into_iter().find(|(name, _)| name == "wall").expect("a wall").1
}

/// The wall with one part replaced.
fn altered(part: &str, by: &str) -> String {
    let wall = wall();
    assert!(wall.contains(part), "{part} is not in the sheet");
    wall.replacen(part, by, 1)
}

#[test]
fn smooth_insists_on_a_stepped_factor_outside_the_derivative() {
    let pieces = "k = { \"0 m .. 0.1 m\" = \"0.8 W/(m K)\", else = \"2 W/(m K)\" }";
    let stepped = altered("k = \"0.8 W/(m K)\"", pieces).replace("(k*T')' = 0", "k*T'' = 0");
    assert_eq!(faults(&stepped).len(), 1);
    let insisted = stepped.replace("x = [\"0 m\", \"L\"]", "x = [\"0 m\", \"L\"]\nsmooth = [\"T'\"]");
    assert_eq!(faults(&insisted), []);
}

#[test]
fn all_faults_come_in_one_pass_in_the_order_of_the_sheet() {
    let text = wall()
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
fn formulas_that_grow_without_end_are_refused_once() {
    let chain: String = (1..40).map(|i| format!("a{i} = \"(a{0}*sin(a{0}))'*1 m\"\n", i - 1)).collect();
    let text = altered("[span]", &format!("a0 = \"T/(1 K)\"\n{chain}[span]"));
    let found: Vec<(&str, String)> = faults(&text).into_iter().map(|f| (f.code, f.message)).collect();
    assert_eq!(found, [("too large", "the formulas of this sheet grow too large when expanded".to_owned())]);
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
