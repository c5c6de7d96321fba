//! The JSON Schema of the sheet against every sheet of the repository.

use serde_json::{Value, json};
use spanwise::record::schema::schema;
use std::fs;
use std::path::{Path, PathBuf};

/// What a value breaks, by the keywords that the schema uses; an unknown keyword is an error.
fn broken(schema: &Value, value: &Value, at: &str, list: &mut Vec<String>) {
    let object = schema.as_object().expect("a schema is an object");
    for (keyword, rule) in object {
        match keyword.as_str() {
            "description" | "title" | "$schema" => {}
            "type" => {
                let fits = |name: &str| match name {
                    "object" => value.is_object(),
                    "array" => value.is_array(),
                    "string" => value.is_string(),
                    "number" => value.is_number(),
                    "integer" => value.is_i64(),
                    "boolean" => value.is_boolean(),
                    other => panic!("type {other}"),
                };
                let names: Vec<&str> = rule.as_array().map_or_else(
                    || vec![rule.as_str().expect("a name")],
                    |l| l.iter().filter_map(Value::as_str).collect(),
                );
                if !names.iter().any(|n| fits(n)) {
                    list.push(format!("{at}: not {names:?}"));
                }
            }
            "enum" if !rule.as_array().expect("a list").contains(value) => list.push(format!("{at}: not in {rule}")),
            "minimum" if value.as_f64().is_some_and(|v| v < rule.as_f64().expect("a number")) => {
                list.push(format!("{at}: below {rule}"));
            }
            "maximum" if value.as_f64().is_some_and(|v| v > rule.as_f64().expect("a number")) => {
                list.push(format!("{at}: above {rule}"));
            }
            "minItems" if value.as_array().is_some_and(|v| (v.len() as u64) < rule.as_u64().expect("a number")) => {
                list.push(format!("{at}: fewer than {rule}"));
            }
            "maxItems" if value.as_array().is_some_and(|v| (v.len() as u64) > rule.as_u64().expect("a number")) => {
                list.push(format!("{at}: more than {rule}"));
            }
            "enum" | "minimum" | "maximum" | "minItems" | "maxItems" => {}
            "items" => {
                for (k, item) in value.as_array().into_iter().flatten().enumerate() {
                    broken(rule, item, &format!("{at}[{k}]"), list);
                }
            }
            "anyOf" => {
                let fits = rule.as_array().expect("a list").iter().any(|one| {
                    let mut own = Vec::new();
                    broken(one, value, at, &mut own);
                    own.is_empty()
                });
                if !fits {
                    list.push(format!("{at}: fits none"));
                }
            }
            "required" => {
                for key in rule.as_array().expect("a list").iter().filter_map(Value::as_str) {
                    if value.as_object().is_some_and(|o| !o.contains_key(key)) {
                        list.push(format!("{at}: lacks {key}"));
                    }
                }
            }
            "properties" | "patternProperties" | "additionalProperties" => {}
            other => panic!("keyword {other}"),
        }
    }
    for (key, inner) in value.as_object().into_iter().flatten() {
        let at = format!("{at}.{key}");
        let own = object.get("properties").and_then(|p| p.get(key));
        let pattern = object.get("patternProperties").and_then(Value::as_object);
        // The one pattern in use is a literal text.
        let pattern = pattern.and_then(|p| p.iter().find(|(text, _)| key.contains(&text.replace('\\', ""))));
        match (own.or(pattern.map(|(_, s)| s)), object.get("additionalProperties")) {
            (Some(schema), _) => broken(schema, inner, &at, list),
            (None, Some(Value::Bool(false))) => list.push(format!("{at}: no such key")),
            (None, Some(schema)) if schema.is_object() => broken(schema, inner, &at, list),
            (None, _) => {}
        }
    }
}

fn faults(text: &str) -> Vec<String> {
    let table: toml::Table = text.parse().expect("TOML");
    let mut list = Vec::new();
    broken(&schema(), &serde_json::to_value(table).expect("JSON"), "sheet", &mut list);
    list
}

fn sheets() -> Vec<PathBuf> {
    let mut found = Vec::new();
    for folder in ["examples/sheets", "src/cli/starts"] {
        found.extend(fs::read_dir(Path::new(folder)).expect("there").map(|e| e.expect("an entry").path()));
    }
    found.retain(|path| path.extension().is_some_and(|e| e == "toml"));
    assert!(found.len() > 20);
    found
}

#[test]
fn every_sheet_fits_the_schema() {
    for path in sheets() {
        assert_eq!(faults(&fs::read_to_string(&path).expect("readable")), Vec::<String>::new(), "{}", path.display());
    }
}

#[test]
fn the_schema_finds_slips() {
    let wall = fs::read_to_string("src/cli/starts/wall.toml").expect("there");
    let slip = |old: &str, new: &str| {
        assert!(wall.contains(old), "{old}");
        faults(&wall.replacen(old, new, 1)).len()
    };
    assert_eq!(slip("[report]", "[reports]"), 1);
    assert_eq!(slip("T = \"degC\"", "T = { unit = \"degC\", guest = \"1 K\" }"), 1);
    assert_eq!(slip("T = \"degC\"", "T = { guess = \"1 K\" }"), 1);
    assert_eq!(slip("else = ", "els = "), 1);
    assert_eq!(slip("x = [\"0 m\", \"L\"]", "x = [\"0 m\"]"), 1);
    assert_eq!(slip("[report]", "[accuracy]\nrelative = 1e-20\n[report]"), 1);
    assert_eq!(slip("ho = \"25 W/(m^2 K)\"", "ho = { against = \"T\", points = [[\"1 K\"]] }"), 1);
    assert_eq!(slip("[report]", "[cases.winter]\nTo = \"-20 degC\"\n[report]"), 0);
}

#[test]
fn what_the_reader_knows_the_schema_knows() {
    let keys = schema()["properties"].clone();
    // A misspelt key is answered with a key of the schema.
    for key in keys.as_object().expect("an object").keys() {
        let text = format!("{key}x = 1\n");
        let found = spanwise::sheet::read(&text).expect_err("no such key");
        let hint = found.iter().find_map(|f| (f.code == "unknown key").then(|| f.hint.clone()).flatten());
        let known = hint
            .as_ref()
            .is_some_and(|h| keys.as_object().expect("an object").keys().any(|k| h.contains(&format!("`{k}`"))));
        assert!(known || hint.as_ref().is_some_and(|h| h.starts_with("the sections are")), "{key}: {hint:?}");
    }
    assert_eq!(keys["accuracy"]["properties"]["relative"]["minimum"], json!(1e-14));
}
