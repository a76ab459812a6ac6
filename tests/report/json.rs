//! `set.json` keeps its contract.

use super::sample;
use serde_json::Value;
use stagewright::report::{SCHEMA, SCHEMA_VERSION, set_json};

/// Checks `value` against the part of JSON Schema (draft 2020-12) that our schema uses; says where it fails.
/// A keyword it doesn't know is an error, so the schema can't outgrow this reader unnoticed.
fn complaints(value: &Value, schema: &Value, root: &Value, at: &str, out: &mut Vec<String>) {
    let said = |what: String| format!("{at}: {what}");
    let rules = schema.as_object().unwrap();
    for (key, rule) in rules {
        match key.as_str() {
            "$schema" | "$defs" | "title" | "description" => {}
            "$ref" | "properties" | "items" => {} // below: they recurse
            "const" if value != rule => out.push(said(format!("{value} is not {rule}"))),
            "enum" if !rule.as_array().unwrap().contains(value) => {
                out.push(said(format!("{value} is not one of {rule}")))
            }
            "const" | "enum" => {}
            "type" => {
                let names = rule.as_array().cloned().unwrap_or_else(|| vec![rule.clone()]);
                let fits = |name: &Value| match name.as_str().unwrap() {
                    "object" => value.is_object(),
                    "array" => value.is_array(),
                    "string" => value.is_string(),
                    "number" => value.is_number(),
                    "integer" => value.is_i64() || value.is_u64(),
                    "null" => value.is_null(),
                    other => panic!("type {other} is not known here"),
                };
                if !names.iter().any(fits) {
                    out.push(said(format!("{value} is no {rule}")));
                }
            }
            "required" => {
                for name in rule.as_array().unwrap() {
                    if value.get(name.as_str().unwrap()).is_none() {
                        out.push(said(format!("{name} is missing")));
                    }
                }
            }
            "additionalProperties" => {
                for (name, inner) in value.as_object().into_iter().flatten() {
                    let named = rules.get("properties").is_some_and(|p| p.get(name).is_some());
                    if !named && rule == &Value::Bool(false) {
                        out.push(format!("{at}: {name} is not in the schema"));
                    } else if !named {
                        complaints(inner, rule, root, &format!("{at}/{name}"), out);
                    }
                }
            }
            "minimum" => {
                if value.as_f64().is_some_and(|x| x < rule.as_f64().unwrap()) {
                    out.push(said(format!("{value} is below {rule}")));
                }
            }
            "maximum" => {
                if value.as_f64().is_some_and(|x| x > rule.as_f64().unwrap()) {
                    out.push(said(format!("{value} is above {rule}")));
                }
            }
            "minItems" => {
                if value.as_array().is_some_and(|x| (x.len() as u64) < rule.as_u64().unwrap()) {
                    out.push(said(format!("fewer than {rule} items")));
                }
            }
            "maxItems" => {
                if value.as_array().is_some_and(|x| (x.len() as u64) > rule.as_u64().unwrap()) {
                    out.push(said(format!("more than {rule} items")));
                }
            }
            "pattern" => {
                if value.as_str().is_some_and(|text| !matches_pattern(text, rule.as_str().unwrap())) {
                    out.push(said(format!("{value} does not match {rule}")));
                }
            }
            other => panic!("keyword {other} is not known here"),
        }
    }
    if let Some(target) = rules.get("$ref") {
        let inner = root.pointer(target.as_str().unwrap().strip_prefix('#').unwrap()).unwrap();
        complaints(value, inner, root, at, out);
    }
    for (name, rule) in rules.get("properties").and_then(Value::as_object).into_iter().flatten() {
        if let Some(inner) = value.get(name) {
            complaints(inner, rule, root, &format!("{at}/{name}"), out);
        }
    }
    if let Some(rule) = rules.get("items") {
        for (k, inner) in value.as_array().into_iter().flatten().enumerate() {
            complaints(inner, rule, root, &format!("{at}/{k}"), out);
        }
    }
}

/// The four patterns of the schema, each read by hand.
fn matches_pattern(text: &str, pattern: &str) -> bool {
    let lower_hex = |t: &str| t.bytes().all(|b| b.is_ascii_digit() || (b'a'..=b'f').contains(&b));
    match pattern {
        "^#[0-9a-f]{6}$" => text.len() == 7 && text.starts_with('#') && lower_hex(&text[1..]),
        "^[0-9a-f]{64}$" => text.len() == 64 && lower_hex(text),
        "^[a-z0-9-]+$" => {
            !text.is_empty()
                && text.bytes().all(|b| b.is_ascii_lowercase() || b.is_ascii_digit() || b == b'-')
        }
        "^[0-9]+\\.[0-9]+\\.[0-9]+" => {
            text.split('.').take(3).filter(|part| part.starts_with(|c: char| c.is_ascii_digit())).count() == 3
        }
        other => panic!("pattern {other} is not known here"),
    }
}

fn problems(text: &str) -> Vec<String> {
    let schema: Value = serde_json::from_str(SCHEMA).unwrap();
    let mut out = Vec::new();
    complaints(&serde_json::from_str(text).unwrap(), &schema, &schema, "", &mut out);
    out
}

#[test]
fn a_set_keeps_the_schema() {
    assert_eq!(problems(&set_json(&sample::set())), Vec::<String>::new());
}

#[test]
fn the_schema_refuses_what_breaks_the_contract() {
    let good: Value = serde_json::from_str(&set_json(&sample::set())).unwrap();
    let broken = |path: &str, value: Value| {
        let mut v = good.clone();
        *v.pointer_mut(path).unwrap() = value;
        problems(&v.to_string())
    };
    assert_eq!(broken("/verdict", "fine".into()).len(), 1);
    assert_eq!(broken("/stages/0/tau", 1.5.into()).len(), 1);
    assert_eq!(broken("/stages/0/sha256/stl", "0F".into()).len(), 1);
    assert_eq!(broken("/stages/1/placement/2", Value::Array(vec![1.0.into()])).len(), 1);
    assert_eq!(broken("/schema_version", 2.into()).len(), 1);
    assert_eq!(broken("/stages/0/skin", Value::Object(serde_json::Map::new())).len(), 4);
}

#[test]
fn keys_come_in_the_order_of_the_contract() {
    let text = set_json(&sample::set());
    let places: Vec<usize> = [
        "schema_version",
        "version",
        "title",
        "job",
        "stages",
        "index",
        "tau",
        "files",
        "sha256",
        "placement",
        "skin",
        "solid",
        "findings",
        "failures",
    ]
    .iter()
    .map(|key| text.find(&format!("\"{key}\":")).unwrap())
    .collect();
    assert!(places.is_sorted(), "{places:?}");
}

#[test]
fn numbers_read_back_exactly_and_zero_has_one_sign() {
    let mut set = sample::set();
    set.stages[0].solid.volume_mm3 = 0.1 + 0.2;
    let text = set_json(&set);
    let value: Value = serde_json::from_str(&text).unwrap();
    assert_eq!(
        value.pointer("/stages/0/solid/volume_mm3").unwrap().as_f64().unwrap().to_bits(),
        (0.1_f64 + 0.2).to_bits()
    );
    assert!(
        !text.contains(" -0.0") && !text.contains("[-0.0"),
        "the sample holds -0.0 in a matrix, a place and the direction"
    );
}

#[test]
fn what_is_not_a_number_is_null_and_still_keeps_the_schema() {
    let mut set = sample::set();
    set.stages[0].skin.min_radius_mm = f64::INFINITY;
    set.stages[0].findings[1].value = f64::NAN;
    set.stages[1].solid.bbox_mm[0][2] = f64::NEG_INFINITY;
    set.failures.push((3, 0.5, "the grid would need 90 GiB".into()));
    let text = set_json(&set);
    assert_eq!(problems(&text), Vec::<String>::new());
    let value: Value = serde_json::from_str(&text).unwrap();
    assert!(value.pointer("/stages/0/skin/min_radius_mm").unwrap().is_null());
    assert_eq!(value["verdict"], "fail");
    assert!(!text.contains("inf") && !text.contains("NaN"));
}

#[test]
fn any_title_survives() {
    let mut set = sample::set();
    set.job.title = "../\"<script>\u{1}\u{2028}\\".into();
    let value: Value = serde_json::from_str(&set_json(&set)).unwrap();
    assert_eq!(value["title"].as_str().unwrap(), set.job.title);
    assert_eq!(value["schema_version"], SCHEMA_VERSION);
}

#[test]
fn totals_and_the_worst_verdict_are_those_of_the_stages() {
    let value: Value = serde_json::from_str(&set_json(&sample::set())).unwrap();
    assert_eq!(value["totals"]["mass_g"], serde_json::json!(50.276 + 50.276));
    assert_eq!(value["totals"]["stages"], 2);
    assert_eq!(value["verdict"], "caution");
}
