//! Checks requests and answers against the `OpenAPI` document, and remembers what was met.

use std::collections::{BTreeSet, HashMap};
use std::sync::{LazyLock, Mutex};

use jsonschema::Validator;
use reqwest::Method;
use serde_json::{Value, json};

use super::app::Answer;

/// The document as the program makes it.
pub(crate) static DOCUMENT: LazyLock<Value> = LazyLock::new(|| {
    serde_json::from_str(&realterms::http::openapi::document()).expect("the document is JSON")
});

/// Operations and statuses met so far: path, method, status.
pub(crate) static MET: Mutex<BTreeSet<(String, String, u16)>> = Mutex::new(BTreeSet::new());

/// Finds the path of the document that a request's path is an instance of.
fn template(path: &str) -> Option<(&'static str, &'static Value)> {
    let segments: Vec<&str> = path.split('/').collect();
    let paths = DOCUMENT["paths"].as_object().expect("an object");
    paths
        .iter()
        .filter(|(template, _)| {
            let parts: Vec<&str> = template.split('/').collect();
            parts.len() == segments.len()
                && parts
                    .iter()
                    .zip(&segments)
                    .all(|(p, s)| p == s || (p.starts_with('{') && !s.is_empty()))
        })
        // A literal segment wins over a named one.
        .min_by_key(|(template, _)| template.matches('{').count())
        .map(|(template, item)| (template.as_str(), item))
}

/// Fails unless the answer, and for a success the request, is as the document says.
#[track_caller]
pub(crate) fn check(
    method: &Method,
    target: &str,
    headers: &[(&str, &str)],
    body: Option<&[u8]>,
    answer: &Answer,
) {
    let at = format!("{method} {target} {}", answer.status);
    assert!(
        answer.headers.contains_key("x-request-id"),
        "{at}: no X-Request-Id"
    );
    let (path, query) = target.split_once('?').unwrap_or((target, ""));
    let Some((template, item)) = template(path) else {
        assert_eq!(answer.status, 404, "{at}: a path outside the document");
        return problem(&at, answer);
    };
    let name = match method.as_str() {
        "HEAD" => "get".to_owned(),
        other => other.to_lowercase(),
    };
    let Some(operation) = item.get(&name) else {
        assert_eq!(answer.status, 405, "{at}: a method outside the document");
        assert!(answer.headers.contains_key("allow"), "{at}: no Allow");
        return problem(&at, answer);
    };
    MET.lock()
        .expect("no panic")
        .insert((template.to_owned(), name.clone(), answer.status));
    let response = &operation["responses"][answer.status.to_string()];
    assert!(
        !response.is_null(),
        "{at}: not a documented status: {}",
        String::from_utf8_lossy(&answer.bytes)
    );
    for name in response["headers"]
        .as_object()
        .into_iter()
        .flat_map(|h| h.keys())
    {
        assert!(
            answer.headers.contains_key(name.as_str()),
            "{at}: no header {name}"
        );
    }
    if method == Method::HEAD {
        assert!(
            answer.bytes.is_empty(),
            "{at}: an answer to HEAD has no body"
        );
    } else {
        response_body(&at, template, &name, response, answer);
    }
    if (200..300).contains(&answer.status) {
        request(&at, template, &name, operation, query, headers, body);
    }
}

fn media(headers: &str) -> &str {
    headers.split(';').next().unwrap_or_default().trim()
}

fn response_body(at: &str, template: &str, method: &str, response: &Value, answer: &Answer) {
    let Some(content) = response.get("content") else {
        assert!(
            answer.bytes.is_empty(),
            "{at}: a body that the document does not have"
        );
        return;
    };
    let media = media(answer.header("content-type").unwrap_or_default());
    let schema = &content[media]["schema"];
    assert!(
        !schema.is_null(),
        "{at}: '{media}' is not a documented media type"
    );
    if media.ends_with("json") {
        let name = format!("{template} {method} {} {media}", answer.status);
        validate(at, &name, schema, &answer.json());
    }
}

fn problem(at: &str, answer: &Answer) {
    if !answer.bytes.is_empty() {
        assert_eq!(
            media(answer.header("content-type").unwrap_or_default()),
            "application/problem+json",
            "{at}"
        );
        validate(
            at,
            "problem",
            &json!({ "$ref": "#/components/schemas/Problem" }),
            &answer.json(),
        );
    }
}

fn request(
    at: &str,
    template: &str,
    method: &str,
    operation: &Value,
    query: &str,
    headers: &[(&str, &str)],
    body: Option<&[u8]>,
) {
    let parameters = operation["parameters"].as_array().expect("a list");
    let named = |place: &str, name: &str| {
        parameters
            .iter()
            .find(|p| p["in"] == place && p["name"] == name)
    };
    for pair in query.split('&').filter(|p| !p.is_empty()) {
        let (name, value) = pair.split_once('=').unwrap_or((pair, ""));
        let parameter = named("query", name).unwrap_or_else(|| {
            panic!("{at}: accepted the parameter {name}, which is not documented")
        });
        let kinds = &parameter["schema"];
        if let Some(values) = kinds["enum"].as_array() {
            assert!(
                values.iter().any(|v| v == value),
                "{at}: accepted {name}={value}"
            );
        }
        if kinds["type"] == "integer" {
            assert!(
                value.parse::<i64>().is_ok(),
                "{at}: accepted {name}={value}"
            );
        }
    }
    for parameter in parameters
        .iter()
        .filter(|p| p["in"] == "query" && p["required"] == true)
    {
        let name = parameter["name"].as_str().expect("a text");
        assert!(
            query.split('&').any(|p| p.starts_with(&format!("{name}="))),
            "{at}: accepted without {name}"
        );
    }
    let Some(content) = operation.pointer("/requestBody/content") else {
        return;
    };
    let kind = headers
        .iter()
        .find(|(name, _)| name.eq_ignore_ascii_case("content-type"))
        .map_or("", |(_, value)| media(value));
    let schema = &content[kind]["schema"];
    assert!(
        !schema.is_null(),
        "{at}: accepted a body of type '{kind}', which is not documented"
    );
    if kind == "application/json" {
        let body: Value = serde_json::from_slice(body.unwrap_or_default()).expect("JSON was sent");
        validate(at, &format!("{template} {method} request"), schema, &body);
    }
}

/// Fails unless the value suits the schema, whose references point into the document.
#[track_caller]
fn validate(at: &str, name: &str, schema: &Value, value: &Value) {
    static VALIDATORS: LazyLock<Mutex<HashMap<String, Validator>>> = LazyLock::new(Mutex::default);
    let mut validators = VALIDATORS
        .lock()
        .unwrap_or_else(std::sync::PoisonError::into_inner);
    let validator = validators.entry(name.to_owned()).or_insert_with(|| {
        let mut whole = schema.clone();
        whole["components"] = DOCUMENT["components"].clone();
        jsonschema::draft202012::new(&whole).expect("the schema is one")
    });
    let faults: Vec<String> = validator
        .iter_errors(value)
        .map(|e| format!("{} at {}", e, e.instance_path()))
        .collect();
    drop(validators);
    assert!(faults.is_empty(), "{at}: {faults:#?}\n{value:#}");
}
