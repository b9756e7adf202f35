//! One request as handlers see it: who calls, with which parameters, and what they accept.

use std::collections::BTreeMap;
use std::sync::Arc;

use actix_web::http::StatusCode;
use actix_web::http::header::HeaderMap;
use actix_web::web::Payload;
use actix_web::{HttpRequest, web};
use futures_util::StreamExt;

use super::problem::Problem;
use super::route::{Form, Parameter, Route};
use super::state::Shared;
use crate::finding::Finding;
use crate::service::Fault;
use crate::service::tokens::Principal;
use crate::time::Date;

/// Largest document body.
const DOCUMENT_BYTES: usize = 1 << 20;

/// A request that has passed authorisation and the check of its parameters.
pub(super) struct Call {
    pub(super) shared: Arc<Shared>,
    pub(super) request: HttpRequest,
    pub(super) payload: Option<Payload>,
    pub(super) principal: Principal,
    parameters: BTreeMap<String, String>,
}

impl Call {
    /// Checks query parameters against the route's list.
    pub(super) fn new(
        shared: Arc<Shared>,
        route: &Route,
        request: HttpRequest,
        payload: Payload,
        principal: Principal,
    ) -> Result<Self, Problem> {
        let known = route.parameters();
        #[expect(
            clippy::disallowed_types,
            reason = "this is the one place that reads queries"
        )]
        let pairs = web::Query::<Vec<(String, String)>>::from_query(request.query_string())
            .map_err(|e| {
                Problem::bad_request(format!("the query string cannot be read: {e}"), vec![])
            })?;
        let mut parameters = BTreeMap::new();
        let mut faults = Vec::new();
        faults.extend(
            request
                .match_info()
                .iter()
                .find_map(|(name, v)| nul(name, v)),
        );
        for (name, value) in pairs.into_inner() {
            match known.iter().find(|p| p.name == name) {
                None => faults.push(unknown_parameter(&name, &known)),
                Some(parameter) => {
                    faults.extend(nul(&name, &value).or_else(|| parameter.fault(&value)));
                    if parameters.insert(name.clone(), value).is_some() {
                        faults.push(
                            Finding::error(
                                "repeated_parameter",
                                format!("'{name}' is given twice"),
                            )
                            .at_parameter(name)
                            .remedy("give it once"),
                        );
                    }
                }
            }
        }
        for parameter in known.iter().filter(|p| p.required) {
            if !parameters.contains_key(parameter.name) {
                faults.push(
                    Finding::error(
                        "missing_parameter",
                        format!("the parameter '{}' is required", parameter.name),
                    )
                    .at_parameter(parameter.name)
                    .expected(if let Form::OneOf(values) = &parameter.form {
                        values.join(", ")
                    } else {
                        parameter.description.to_owned()
                    }),
                );
            }
        }
        if !faults.is_empty() {
            let detail = faults
                .iter()
                .map(|f| f.message.as_str())
                .collect::<Vec<_>>()
                .join("; ");
            return Err(Problem::bad_request(detail, faults));
        }
        Ok(Self {
            shared,
            request,
            payload: Some(payload),
            principal,
            parameters,
        })
    }

    /// A path segment.
    pub(super) fn segment(&self, name: &str) -> &str {
        self.request.match_info().get(name).unwrap_or_default()
    }

    /// A path segment that must be a number, else nothing can be there.
    pub(super) fn number(&self, name: &str, what: &str) -> Result<i64, Problem> {
        let text = self.segment(name);
        text.parse().map_err(|_| {
            Problem::new(
                StatusCode::NOT_FOUND,
                "not_found",
                format!("there is no {what} '{text}': its name is a number"),
            )
        })
    }

    /// A query parameter.
    pub(super) fn parameter(&self, name: &str) -> Option<&str> {
        self.parameters.get(name).map(String::as_str)
    }

    /// All query parameters by name.
    pub(super) fn parameters(&self) -> impl Iterator<Item = (&str, &str)> {
        self.parameters
            .iter()
            .map(|(n, v)| (n.as_str(), v.as_str()))
    }

    /// A query parameter that the route declares as a flag.
    pub(super) fn flag(&self, name: &str) -> bool {
        self.parameter(name) == Some("true")
    }

    /// A query parameter that the route declares as an integer.
    pub(super) fn integer(&self, name: &str) -> Option<i64> {
        self.parameter(name).and_then(|v| v.parse().ok())
    }

    /// A query parameter that the route declares as a date.
    pub(super) fn date(&self, name: &str) -> Option<Date> {
        self.parameter(name).and_then(|v| v.parse().ok())
    }

    /// Entries a page of a list: `limit`, 100 unless given.
    pub(super) fn limit(&self) -> i64 {
        self.integer("limit").unwrap_or(100)
    }

    /// Cursor of a list: `after`.
    pub(super) fn after(&self) -> Option<&str> {
        self.parameter("after")
    }

    pub(super) fn headers(&self) -> &HeaderMap {
        self.request.headers()
    }

    /// A header as text.
    pub(super) fn header(&self, name: &str) -> Option<&str> {
        self.headers().get(name).and_then(|v| v.to_str().ok())
    }

    /// Bytes of the body, where the client says.
    pub(super) fn declared_length(&self) -> Option<u64> {
        self.header("Content-Length").and_then(|n| n.parse().ok())
    }

    /// Reads a document body whole. It has to come within the patience for slow bodies.
    pub(super) async fn document(&mut self) -> Result<String, Problem> {
        let limits = self.shared.limits;
        let bytes = tokio::time::timeout(limits.patience, self.document_bytes())
            .await
            .map_err(|_| Fault::TooSlow {
                detail: format!(
                    "the document did not come within {} seconds; nothing was done",
                    limits.patience.as_secs()
                ),
            })??;
        if bytes.trim_ascii().is_empty() {
            let detail = "the body is empty; send the document, a JSON object";
            return Err(Problem::bad_request(detail, vec![]));
        }
        String::from_utf8(bytes)
            .map_err(|_| Problem::bad_request("the body is not UTF-8 text", vec![]))
    }

    async fn document_bytes(&mut self) -> Result<Vec<u8>, Problem> {
        let too_large = || {
            Problem::new(
                StatusCode::PAYLOAD_TOO_LARGE,
                "too_large",
                format!("a document may have at most {DOCUMENT_BYTES} bytes"),
            )
        };
        if self
            .declared_length()
            .is_some_and(|n| n > DOCUMENT_BYTES as u64)
        {
            return Err(too_large());
        }
        let mut bytes = Vec::new();
        let Some(mut payload) = self.payload.take() else {
            return Ok(bytes);
        };
        while let Some(chunk) = payload.next().await {
            let chunk = chunk.map_err(|e| {
                Problem::bad_request(format!("the body could not be read: {e}"), vec![])
            })?;
            if bytes.len() + chunk.len() > DOCUMENT_BYTES {
                return Err(too_large());
            }
            bytes.extend_from_slice(&chunk);
        }
        Ok(bytes)
    }
}

/// A NUL character, which the database cannot keep in a text.
fn nul(name: &str, value: &str) -> Option<Finding> {
    value.contains('\0').then(|| {
        Finding::error("nul_character", format!("'{name}' holds a NUL character"))
            .at_parameter(name)
            .expected("text without %00")
    })
}

fn unknown_parameter(name: &str, known: &[Parameter]) -> Finding {
    let names: Vec<&str> = known.iter().map(|p| p.name).collect();
    let expected = if names.is_empty() {
        "no parameters".to_owned()
    } else {
        names.join(", ")
    };
    Finding::error(
        "unknown_parameter",
        format!("there is no parameter '{name}' here"),
    )
    .at_parameter(name)
    .found(name)
    .expected(expected)
    .remedy("check the spelling; nothing was done")
}
