//! Records read again: `recheck` and `compare`.

use assert_cmd::Command;
use serde_json::Value;
use std::fs;
use std::path::Path;

const WALL: &str = r#"
[given]
k = { against = "T", file = "k.csv" }
[span]
x = ["0 m", "0.3 m"]
[unknowns]
T = { unit = "degC", guess = "50 degC" }
[equations]
e = "(k*T')' = 0"
[conditions]
a = "T(0 m) = 20 degC"
b = "T(0.3 m) = HOT degC"
[report]
flux = "-k(0 m)*T'(0 m) in W/m^2"
middle = "T(0.15 m) in degC"
"#;

fn run(arguments: &[&str]) -> (i32, String, String) {
    let output = Command::cargo_bin("spanwise").expect("built").args(arguments).output().expect("it runs");
    let text = |bytes: &[u8]| String::from_utf8(bytes.to_vec()).expect("UTF-8");
    (output.status.code().expect("not killed"), text(&output.stdout), text(&output.stderr))
}

fn record(folder: &Path, name: &str, hot: &str) -> String {
    fs::write(folder.join("k.csv"), "T [degC],k [W/(m K)]\n0,0.8\n50,0.9\n120,1.3\n").expect("written");
    let sheet = folder.join(format!("{name}.toml"));
    fs::write(&sheet, WALL.replace("HOT", hot)).expect("written");
    let record = folder.join(name).display().to_string();
    let (code, _, err) = run(&["solve", &sheet.display().to_string(), "--record", &record]);
    assert_eq!((code, err.as_str()), (0, ""));
    record
}

/// Every file of a record, changed in one place.
fn damage(record: &str, file: &str, change: impl Fn(&str) -> String) {
    let path = Path::new(record).join(file);
    let text = fs::read_to_string(&path).expect("there");
    let changed = change(&text);
    assert_ne!(text, changed, "{file} is the same");
    fs::write(&path, changed).expect("written");
}

#[test]
fn a_sound_record_agrees_and_a_changed_digit_is_found() {
    let folder = tempfile::tempdir().expect("a folder");
    let sound = record(folder.path(), "sound", "95");
    // The record stands for itself: the data file beside the sheet is not needed.
    fs::remove_file(folder.path().join("k.csv")).expect("there");
    let (code, out, _) = run(&["recheck", &sound]);
    assert_eq!(code, 0, "{out}");
    assert!(out.contains("all 2 numbers agree within their bars") && out.contains("files are as they were written"));

    // One digit of one number, the twelfth.
    let json: Value =
        serde_json::from_str(&fs::read_to_string(Path::new(&sound).join("record.json")).expect("there")).expect("JSON");
    let value = json["quantities"][0]["value"].to_string();
    let at = value.char_indices().filter(|(_, c)| c.is_ascii_digit()).nth(11).expect("digits").0;
    let other = if &value[at..=at] == "5" { "6" } else { "5" };
    let changed = format!("{}{other}{}", &value[..at], &value[at + 1..]);
    damage(&sound, "record.json", |text| text.replacen(&value, &changed, 1));
    let (code, out, _) = run(&["recheck", &sound]);
    assert_eq!(code, 1, "{out}");
    assert!(out.contains("CHANGED   record.json") && out.contains("DIFFERS   flux"), "{out}");
    // Even with a digest made to fit, the number does not.
    let content = fs::read(Path::new(&sound).join("record.json")).expect("there");
    let digest = spanwise::record::digests::digest(&content);
    damage(&sound, "digests.json", |text| {
        let mut json: Value = serde_json::from_str(text).expect("JSON");
        json["files"]["record.json"] = Value::String(digest.clone());
        json.to_string()
    });
    let (code, out, _) = run(&["recheck", &sound, "--json"]);
    let report: Value = serde_json::from_str(&out).expect("JSON");
    assert_eq!((code, report["status"].as_str()), (1, Some("differs")));
    assert_eq!(report["numbers"][0]["verdict"], "differs");
    assert_eq!(report["numbers"][1]["verdict"], "agrees");
    assert!(report["files"].as_array().expect("a list").iter().all(|f| f["state"] == "unchanged"));
}

#[test]
fn changed_sheets_data_and_files_are_found() {
    let folder = tempfile::tempdir().expect("a folder");
    for (file, old, new) in
        [("sheet.toml", "95 degC", "96 degC"), ("data/01-k.csv", "1.3", "1.4"), ("solution.csv", "x [m]", "x [mm]")]
    {
        let record = record(folder.path(), "one", "95");
        damage(&record, file, |text| text.replacen(old, new, 1));
        let (code, out, _) = run(&["recheck", &record]);
        assert_eq!(code, 1, "{out}");
        assert!(out.contains(&format!("CHANGED   {file}")), "{out}");
        assert_eq!(out.contains("DIFFERS"), file != "solution.csv", "{out}");
    }
    let gone = record(folder.path(), "gone", "95");
    fs::remove_file(Path::new(&gone).join("record.html")).expect("there");
    let (code, out, _) = run(&["recheck", &gone]);
    assert!(code == 1 && out.contains("MISSING   record.html"), "{out}");
    // What is no record is said to be none, whatever it holds.
    for text in ["", "{", "[]", "{\"program\": \"spanwise\"}", "\u{0}"] {
        fs::write(Path::new(&gone).join("record.json"), text).expect("written");
        let (code, _, err) = run(&["recheck", &gone]);
        assert!(code == 2 && err.contains("is not a record"), "{err}");
    }
    // A list of digests cannot reach outside the folder.
    let reach = record(folder.path(), "reach", "95");
    damage(&reach, "digests.json", |text| text.replace("\"data/01-k.csv\"", "\"../k.csv\""));
    let (code, _, err) = run(&["recheck", &reach]);
    assert!(code == 2 && err.contains("k.csv"), "{err}");
}

#[test]
fn two_records_side_by_side() {
    let folder = tempfile::tempdir().expect("a folder");
    let (a, b, c) =
        (record(folder.path(), "a", "95"), record(folder.path(), "b", "95"), record(folder.path(), "c", "95.5"));
    let (code, out, _) = run(&["compare", &a, &b]);
    assert!(code == 0 && out.contains("all 2 numbers agree"), "{out}");
    let (code, out, _) = run(&["compare", &a, &c, "--json"]);
    let report: Value = serde_json::from_str(&out).expect("JSON");
    assert_eq!((code, report["status"].as_str()), (1, Some("differs")));
    let flux = &report["numbers"][0];
    let [x, y] = ["first", "second"].map(|k| flux[k]["value"].as_f64().expect("a number"));
    assert!((flux["difference"].as_f64().expect("a number") - (y - x)).abs() < 1e-12);
    assert!(flux["bars"].as_f64().expect("a number") > 1e3);
    assert_eq!(run(&["compare", &a, "nowhere"]).0, 2);
}
