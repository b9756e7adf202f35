//! The `OpenAPI` 3.1 document, made from the table of routes.

use std::sync::LazyLock;

use super::route::{Route, Schemas};

static DOCUMENT: LazyLock<String> = LazyLock::new(|| {
    let mut text = serde_json::to_string_pretty(&value(&super::ROUTES)).unwrap_or_default();
    text.push('\n');
    text
});

/// The document as pretty-printed JSON with a final line break.
#[must_use]
pub fn document() -> &'static str {
    &DOCUMENT
}

fn value(routes: &[Route]) -> serde_json::Value {
    let mut schemas = Schemas::new();
    let mut paths = serde_json::Map::new();
    for route in routes {
        let operation = route.operation(&mut schemas);
        let item = paths
            .entry(route.path)
            .or_insert_with(|| serde_json::json!({}));
        item[route.method.as_str().to_lowercase()] = operation;
    }
    serde_json::json!({
        "openapi": "3.1.0",
        "info": {
            "title": "Realterms",
            "version": env!("CARGO_PKG_VERSION"),
            "summary": "From raw trade, price and income files to the growth rate that the balance \
                of payments allows",
            "description": "Errors are problem details (RFC 9457). HEAD is answered wherever GET is. \
                A wrong method is answered with 405 and Allow. A request's X-Request-Id of at most \
                64 letters, digits, - and _ is kept.",
            "license": { "name": "MIT", "identifier": "MIT" },
        },
        "paths": paths,
        "components": {
            "schemas": schemas,
            "securitySchemes": { "bearer": { "type": "http", "scheme": "bearer" } },
        },
    })
}
