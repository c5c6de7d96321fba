//! A JSON Schema of the sheet, for editors: keys are completed and checked while they are typed.

use serde_json::{Map, Value, json};

/// What may stand for a formula: a text, or a number.
fn formula(about: &str) -> Value {
    json!({ "type": ["string", "number"], "description": about })
}

fn text(about: &str) -> Value {
    json!({ "type": "string", "description": about })
}

fn yes(about: &str) -> Value {
    json!({ "type": "boolean", "description": about })
}

/// One value, or a list of such.
fn or_list(one: Value, about: &str) -> Value {
    json!({ "description": about, "anyOf": [one.clone(), { "type": "array", "items": one, "minItems": 1 }] })
}

/// A table with the keys given and no others.
fn closed(about: &str, keys: Value, required: &[&str]) -> Value {
    json!({ "type": "object", "description": about, "properties": keys, "additionalProperties": false, "required": required })
}

/// A table with keys of the user's own.
fn named(about: &str, entry: Value) -> Value {
    json!({ "type": "object", "description": about, "additionalProperties": entry })
}

fn pair(about: &str) -> Value {
    json!({ "type": "array", "description": about, "items": { "type": ["string", "number"] }, "minItems": 2, "maxItems": 2 })
}

/// A datum: a formula, pieces of the span, or measured data.
fn datum() -> Value {
    let measured = closed(
        "measured data, read between their points",
        json!({
            "against": text("what they are measured against: the coordinate, an unknown, a datum"),
            "points": {
                "type": "array", "minItems": 2, "description": "pairs [place, value], ascending",
                "items": pair("[\"20 degC\", \"15.1 W/(m K)\"]"),
            },
            "file": text("file of comma-separated values beside the sheet; its first line names columns and units"),
            "columns": pair("names of the two columns of the file"),
            "through": { "enum": ["smooth", "straight"], "description": "how the values run between the points" },
        }),
        &["against"],
    );
    let pieces = json!({
        "type": "object", "description": "by pieces of the span",
        "properties": { "else": formula("everywhere else") },
        "patternProperties": { "\\.\\.": formula("value on this piece") },
        "additionalProperties": false,
    });
    json!({ "anyOf": [formula("a value with its unit, \"3.2 m\", or a formula"), measured, pieces] })
}

fn sections() -> Value {
    let unknown = closed(
        "an unknown",
        json!({
            "unit": text("unit; \"1\" for a pure number"),
            "guess": formula("where to start, for a nonlinear problem"),
            "above": formula("it stays above this value"),
            "below": formula("it stays below this value"),
            "constant": yes("one number to find, not a function"),
        }),
        &["unit"],
    );
    let whole = |about: &str| json!({ "type": "integer", "minimum": 1, "description": about });
    let axis = closed(
        "values of one datum",
        json!({
            "from": formula("first"), "to": formula("last"), "count": whole("how many"),
            "spacing": { "enum": ["even", "log"], "description": "how they lie" },
        }),
        &["from", "to", "count"],
    );
    json!({
        "title": text("what is calculated"),
        "note": text("what the reader should know"),
        "complex": yes("complex numbers; i is the imaginary unit"),
        "given": named("data and named expressions", datum()),
        "span": {
            "type": "object", "description": "the coordinate and its ends: x = [\"0 m\", \"L\"]",
            "properties": {
                "breaks": or_list(formula("a place"), "further breaks"),
                "smooth": or_list(text("T'"), "what is continuous although a datum steps"),
                "until": text("\"y = 0\": where a marched problem ends"),
            },
            "additionalProperties": pair("first and last end"),
        },
        "unknowns": named("what is sought: name = unit", json!({ "anyOf": [text("unit"), unknown] })),
        "equations": named("name = \"left = right\", one for each unknown function", text("left = right")),
        "conditions": named("equations between values at points, jump(..), release(..)", or_list(text("left = right"), "conditions")),
        "report": named("label = \"formula in unit\"", formula("formula in unit")),
        "accuracy": closed(
            "what is asked of the numbers",
            json!({ "relative": { "type": "number", "minimum": 1e-14, "maximum": 1e-2,
                                  "description": "error allowed, relative to each number" } }),
            &[],
        ),
        "cases": named("load cases", named("data changed in this case", datum())),
        "eigen": closed(
            "an eigenproblem",
            json!({
                "parameter": text("name of the eigenvalue"),
                "unit": text("unit to show it in"),
                "lowest": whole("so many, from the lowest"),
                "between": pair("all between two values"),
                "near": formula("those nearest to a value"),
                "count": whole("how many"),
                "largest_real": whole("so many, by the real part"),
                "largest": text("so many, by a formula: \"im(lambda)\""),
                "pairs": whole("so many conjugate pairs"),
                "modes": { "type": "array", "items": whole("number of a mode"), "description": "only these" },
                "normalise": text("\"integral(rho*A*y^2) = 1\""),
            }),
            &["parameter"],
        ),
        "solutions": named("a search for several solutions: up_to = 4", json!({})),
        "path": closed(
            "a parameter to follow",
            json!({
                "parameter": text("name of a datum, or of an unknown constant"),
                "from": formula("its value at the start"),
                "to": formula("its value at the end"),
                "points": { "type": "integer", "minimum": 2, "maximum": 1000, "description": "evenly spaced values" },
                "through_folds": yes("go on where the parameter turns back"),
            }),
            &["parameter", "from", "to"],
        ),
        "sweep": named(
            "data to vary",
            json!({ "anyOf": [axis, { "type": "array", "items": { "type": ["string", "number"] }, "minItems": 1 }] }),
        ),
    })
}

/// The schema.
pub fn schema() -> Value {
    let mut schema = Map::new();
    schema.insert("$schema".into(), "https://json-schema.org/draft/2020-12/schema".into());
    schema.insert("title".into(), "Calculation sheet".into());
    schema
        .insert("description".into(), "A problem along one coordinate in the user's own equations, with units".into());
    schema.insert("type".into(), "object".into());
    schema.insert("properties".into(), sections());
    schema.insert("additionalProperties".into(), false.into());
    schema.insert("required".into(), json!(["span", "unknowns", "equations"]));
    Value::Object(schema)
}
