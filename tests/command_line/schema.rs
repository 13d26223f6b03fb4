//! The printed schemas hold for the files that are written. The checker knows the words that the schemas use, and refuses
//! others.

use super::common::{evenpoise, folder};
use serde_json::{Value, json};
use std::fs;
use std::path::Path;

const OVERTOPPING: &str = r#"
title = "Overtopping (invented)"
[variables]
inflow = { distribution = "gumbel", mean = 40.0, sd = 9.0, unit = "m3/s" }
gate = { distribution = "beta", a = 8.0, b = 2.0 }
storms = { distribution = "poisson", mean = 3.0 }
[[correlation]]
among = ["inflow", "gate"]
score = 0.3
[target]
aim = "probability"
event = "0.05 * inflow / gate + 0.1 * storms > 7"
[tuning]
budget = 2500
"#;

pub(crate) fn schema(name: &str, folder: &Path) -> Value {
    let output = evenpoise(folder).args(["schema", name]).output().unwrap();
    assert!(output.status.success());
    serde_json::from_slice(&output.stdout).unwrap()
}

#[test]
fn written_files_keep_to_the_schemas() {
    let folder = folder();
    fs::write(folder.path().join("over.toml"), OVERTOPPING).unwrap();
    let mean =
        OVERTOPPING.replace("\"probability\"", "\"expectation\"").replace("event", "integrand").replace(" > 7", "");
    fs::write(folder.path().join("mean.toml"), mean).unwrap();
    for problem in ["sill", "over", "mean"] {
        // Any verdict will do.
        evenpoise(folder.path()).args(["tune", &format!("{problem}.toml")]).output().unwrap();
        let run = folder.path().join(format!("{problem}.run"));
        for name in ["proposal", "summary"] {
            let file: Value = serde_json::from_slice(&fs::read(run.join(format!("{name}.json"))).unwrap()).unwrap();
            check(&schema(name, folder.path()), &file, &format!("{problem} {name}"));
        }
        let rounds = fs::read_to_string(run.join("rounds.csv")).unwrap();
        let titles: Vec<&str> = rounds.lines().next().unwrap().split(',').collect();
        assert!(rounds.lines().count() > 2);
        for line in rounds.lines().skip(1) {
            let row: Value =
                titles.iter().zip(line.split(',')).map(|(title, cell)| (title.to_string(), of_cell(cell))).collect();
            check(&schema("rounds", folder.path()), &row, &format!("{problem} rounds"));
        }
    }
}

#[test]
fn the_checker_can_refuse() {
    let folder = folder();
    let proposal = schema("proposal", folder.path());
    let refuses = |value: Value| std::panic::catch_unwind(|| check(&proposal, &value, "")).is_err();
    assert!(refuses(json!({})) && refuses(json!([])) && refuses(json!({ "format": "evenpoise-proposal/2" })));
}

fn of_cell(cell: &str) -> Value {
    match cell.parse::<f64>() {
        _ if cell.is_empty() => Value::Null,
        Ok(number) if number.is_finite() => serde_json::from_str(cell).unwrap(),
        _ => json!(cell),
    }
}

/// Asserts that a value keeps to a schema.
pub(crate) fn check(schema: &Value, value: &Value, at: &str) {
    for (word, rule) in schema.as_object().unwrap() {
        match word.as_str() {
            "$schema" | "title" | "description" | "properties" | "additionalProperties" => {}
            "type" => {
                let types: Vec<&str> = match rule {
                    Value::Array(several) => several.iter().map(|one| one.as_str().unwrap()).collect(),
                    one => vec![one.as_str().unwrap()],
                };
                assert!(types.iter().any(|name| is(value, name)), "{at}: {value} is none of {types:?}");
            }
            "const" => assert_eq!(value, rule, "{at}"),
            "enum" => assert!(rule.as_array().unwrap().contains(value), "{at}: {value}"),
            "minimum" => assert!(value.as_f64().is_none_or(|x| x >= rule.as_f64().unwrap()), "{at}: {value}"),
            "exclusiveMinimum" => assert!(value.as_f64().is_none_or(|x| x > rule.as_f64().unwrap()), "{at}: {value}"),
            "minItems" => assert!(value.as_array().is_none_or(|a| a.len() as u64 >= rule.as_u64().unwrap()), "{at}"),
            "maxItems" => assert!(value.as_array().is_none_or(|a| a.len() as u64 <= rule.as_u64().unwrap()), "{at}"),
            "required" => {
                for name in rule.as_array().unwrap() {
                    let there = value.as_object().is_none_or(|object| object.contains_key(name.as_str().unwrap()));
                    assert!(there, "{at}: {name} is missing");
                }
            }
            "items" => {
                for (i, item) in value.as_array().into_iter().flatten().enumerate() {
                    check(rule, item, &format!("{at}[{i}]"));
                }
            }
            other => panic!("{at}: the schema uses {other:?}, which this checker does not know"),
        }
    }
    for (name, inner) in value.as_object().into_iter().flatten() {
        let at = format!("{at}.{name}");
        match (schema["properties"].get(name), &schema["additionalProperties"]) {
            (Some(rule), _) => check(rule, inner, &at),
            (None, Value::Bool(false)) => panic!("{at} is not in the schema"),
            (None, rule @ Value::Object(_)) => check(rule, inner, &at),
            _ => {}
        }
    }
}

fn is(value: &Value, name: &str) -> bool {
    match name {
        "null" => value.is_null(),
        "number" => value.is_number(),
        "integer" => value.is_u64() || value.is_i64(),
        "string" => value.is_string(),
        "boolean" => value.is_boolean(),
        "array" => value.is_array(),
        "object" => value.is_object(),
        other => panic!("a type {other:?}"),
    }
}
