//! Checks requests and answers against the `OpenAPI` document.

use std::collections::HashMap;
use std::sync::{LazyLock, Mutex};

use jsonschema::Validator;
use reqwest::{Method, Url};
use serde_json::{Value, json};

use super::app::Answer;

/// The document as the program makes it.
pub(crate) static DOCUMENT: LazyLock<Value> = LazyLock::new(|| {
    serde_json::from_str(realterms::http::openapi::document()).expect("the document is JSON")
});

/// An operation and a status of it: path, method, status.
pub(crate) type Met = (String, String, u16);

/// Operations of the document: path, method in small letters, operation.
pub(crate) fn operations() -> impl Iterator<Item = (&'static str, &'static str, &'static Value)> {
    let paths = DOCUMENT["paths"].as_object().expect("an object");
    paths.iter().flat_map(|(path, item)| {
        let item = item.as_object().expect("an object");
        item.iter()
            .map(|(method, operation)| (path.as_str(), method.as_str(), operation))
    })
}

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

/// Fails unless the answer, and for a success the request, is as the document says. Answers which part of the
/// document was met.
#[track_caller]
pub(crate) fn check(
    method: &Method,
    target: &str,
    headers: &[(&str, &str)],
    body: Option<&[u8]>,
    answer: &Answer,
) -> Option<Met> {
    let at = format!("{method} {target} {}", answer.status);
    general(&at, method, answer);
    let path = target.split_once('?').map_or(target, |(path, _)| path);
    let Some((template, item)) = template(path) else {
        assert_eq!(answer.status, 404, "{at}: a path outside the document");
        return None;
    };
    let name = match method.as_str() {
        "HEAD" => "get".to_owned(),
        other => other.to_lowercase(),
    };
    let Some(operation) = item.get(&name) else {
        assert_eq!(answer.status, 405, "{at}: a method outside the document");
        assert!(answer.headers.contains_key("allow"), "{at}: no Allow");
        return None;
    };
    let response = &operation["responses"][answer.status.to_string()];
    assert!(
        !response.is_null(),
        "{at}: not a documented status: {}",
        String::from_utf8_lossy(&answer.bytes)
    );
    for (name, header) in response["headers"].as_object().into_iter().flatten() {
        match answer.header(name) {
            None => assert_ne!(header["required"], true, "{at}: no header {name}"),
            Some(value) => validate(&at, "header", &header["schema"], &json!(value)),
        }
    }
    if method != Method::HEAD {
        response_body(&at, template, &name, response, answer);
    }
    if answer.status < 400 {
        request(&at, template, &name, operation, target, headers, body);
    }
    Some((template.to_owned(), name, answer.status))
}

/// What holds for every answer, whatever the document says.
#[track_caller]
fn general(at: &str, method: &Method, answer: &Answer) {
    let id = answer.header("x-request-id");
    assert!(id.is_some(), "{at}: no X-Request-Id");
    if let Some(link) = answer.header("link") {
        let target = link
            .strip_prefix('<')
            .and_then(|l| l.strip_suffix(">; rel=\"next\""));
        let well = target.is_some_and(|t| t.starts_with('/') && t.contains("after="));
        assert!(well, "{at}: the header Link is {link}");
    }
    if method == Method::HEAD {
        assert!(answer.bytes.is_empty(), "{at}: a body after HEAD");
        return;
    }
    if let Some(length) = answer.header("content-length") {
        assert_eq!(length, answer.bytes.len().to_string(), "{at}");
    }
    if answer.status < 400 {
        return;
    }
    let media = answer.header("content-type").unwrap_or_default();
    assert_eq!(media, "application/problem+json", "{at}");
    let problem = answer.json();
    let schema = json!({ "$ref": "#/components/schemas/Problem" });
    validate(at, "problem", &schema, &problem);
    assert_eq!(problem["status"], answer.status, "{at}");
    assert_eq!(problem["request_id"].as_str(), id, "{at}");
    let code = problem["code"].as_str().expect("a text");
    assert_eq!(problem["type"], format!("/problems/{code}"), "{at}");
    assert!(!problem["detail"].as_str().expect("a text").is_empty());
}

fn media(header: &str) -> &str {
    header.split(';').next().unwrap_or_default().trim()
}

#[track_caller]
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

#[track_caller]
fn request(
    at: &str,
    template: &str,
    method: &str,
    operation: &Value,
    target: &str,
    headers: &[(&str, &str)],
    body: Option<&[u8]>,
) {
    let parameters = operation["parameters"].as_array().expect("a list");
    let named = |place: &str, name: &str| {
        parameters.iter().find(|p| {
            p["in"] == place
                && p["name"]
                    .as_str()
                    .is_some_and(|n| n.eq_ignore_ascii_case(name))
        })
    };
    let url = Url::parse(&format!("http://service{target}")).expect("a URL was sent");
    for (name, value) in url.query_pairs() {
        let parameter = named("query", &name).unwrap_or_else(|| {
            panic!("{at}: accepted the parameter {name}, which is not documented")
        });
        let schema = &parameter["schema"];
        let value = match schema["type"].as_str() {
            Some("integer" | "boolean") => serde_json::from_str(&value).unwrap_or(json!(value)),
            _ => json!(value),
        };
        let name = format!("{template} {method} ?{name}");
        validate(at, &name, schema, &value);
    }
    for parameter in parameters
        .iter()
        .filter(|p| p["in"] == "query" && p["required"] == true)
    {
        let name = parameter["name"].as_str().expect("a text");
        assert!(
            url.query_pairs().any(|(n, _)| n == name),
            "{at}: accepted without {name}"
        );
    }
    for (name, _) in headers {
        // OpenAPI keeps the first three out of the parameters; the others are common to all operations.
        let general = [
            "accept",
            "authorization",
            "content-type",
            "accept-encoding",
            "x-request-id",
            "host",
            "origin",
        ];
        assert!(
            general.contains(&name.to_lowercase().as_str()) || named("header", name).is_some(),
            "{at}: accepted the header {name}, which is not documented"
        );
    }
    let Some(content) = operation.pointer("/requestBody/content") else {
        assert!(
            body.is_none_or(<[u8]>::is_empty),
            "{at}: accepted a body, which is not documented"
        );
        return;
    };
    let kind = headers
        .iter()
        .find(|(name, _)| name.eq_ignore_ascii_case("content-type"))
        .map_or("", |(_, value)| media(value));
    let schema = &content.get(kind).unwrap_or(&content["*/*"])["schema"];
    assert!(
        !schema.is_null(),
        "{at}: accepted a body of type '{kind}', which is not documented"
    );
    if content.get("application/json").is_some() {
        let body: Value = serde_json::from_slice(body.unwrap_or_default()).expect("JSON was sent");
        validate(at, &format!("{template} {method} request"), schema, &body);
    }
}

/// A validator of a schema whose references point into the document.
pub(crate) fn validator(schema: &Value) -> Validator {
    let mut whole = schema.clone();
    whole["components"] = DOCUMENT["components"].clone();
    jsonschema::draft202012::options()
        .should_validate_formats(true)
        .build(&whole)
        .expect("the schema is one")
}

/// Fails unless the value suits the schema, which is always the same for the same name.
#[track_caller]
fn validate(at: &str, name: &str, schema: &Value, value: &Value) {
    static VALIDATORS: LazyLock<Mutex<HashMap<String, Validator>>> = LazyLock::new(Mutex::default);
    let mut validators = VALIDATORS
        .lock()
        .unwrap_or_else(std::sync::PoisonError::into_inner);
    let validator = validators
        .entry(name.to_owned())
        .or_insert_with(|| validator(schema));
    let faults: Vec<String> = validator
        .iter_errors(value)
        .map(|e| format!("{} at {}", e, e.instance_path()))
        .collect();
    drop(validators);
    assert!(faults.is_empty(), "{at}: {faults:#?}\n{value:#}");
}
