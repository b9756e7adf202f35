//! Problem details (RFC 9457): the one shape of every error answer, made in one place.

use actix_web::HttpResponse;
use actix_web::http::StatusCode;
use serde::Serialize;
use utoipa::ToSchema;

use crate::finding::Finding;
use crate::service::{Fault, UploadView};

/// An error answer.
#[derive(Clone, Debug, Serialize, ToSchema)]
pub struct Problem {
    /// Stable URI reference of the kind of problem.
    #[serde(rename = "type")]
    pub kind: String,
    /// Short name of the HTTP status.
    pub title: String,
    /// HTTP status.
    pub status: u16,
    /// What went wrong, for a person.
    pub detail: String,
    /// Stable code for programs.
    pub code: String,
    /// Number of the request, as in the log and the header `X-Request-Id`.
    pub request_id: String,
    /// Where exactly, what was found and expected, and what to do.
    pub errors: Vec<Finding>,
    /// The refused upload, with its report.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub upload: Option<Box<UploadView>>,
    #[serde(skip)]
    headers: Vec<(&'static str, String)>,
    /// For the log alone.
    #[serde(skip)]
    internal: Option<String>,
}

impl Problem {
    /// A problem with this status, code and detail.
    pub(super) fn new(status: StatusCode, code: &str, detail: impl Into<String>) -> Self {
        Self {
            kind: format!("/problems/{code}"),
            title: status.canonical_reason().unwrap_or("Error").to_owned(),
            status: status.as_u16(),
            detail: detail.into(),
            code: code.to_owned(),
            request_id: String::new(),
            errors: Vec::new(),
            upload: None,
            headers: Vec::new(),
            internal: None,
        }
    }

    /// A malformed request: parameters, headers or syntax.
    pub(super) fn bad_request(detail: impl Into<String>, errors: Vec<Finding>) -> Self {
        Self::new(StatusCode::BAD_REQUEST, "bad_request", detail).with_errors(errors)
    }

    /// A fault of the program; the reason is for the log alone.
    pub(super) fn internal(reason: String) -> Self {
        Self {
            internal: Some(reason),
            ..Self::new(
                StatusCode::INTERNAL_SERVER_ERROR,
                "internal",
                "an error of the program; the log has it under the request's number",
            )
        }
    }

    pub(super) fn with_errors(mut self, errors: Vec<Finding>) -> Self {
        self.errors = errors;
        self
    }

    pub(super) fn with_header(mut self, name: &'static str, value: impl Into<String>) -> Self {
        self.headers.push((name, value.into()));
        self
    }

    /// What only the log may say.
    pub(super) fn internal_reason(&self) -> Option<&str> {
        self.internal.as_deref()
    }

    /// The answer; `request_id` goes into the body.
    pub(super) fn answer(mut self, request_id: &str) -> HttpResponse {
        request_id.clone_into(&mut self.request_id);
        let status = StatusCode::from_u16(self.status).unwrap_or(StatusCode::INTERNAL_SERVER_ERROR);
        let mut response = HttpResponse::build(status);
        for (name, value) in &self.headers {
            response.insert_header((*name, value.as_str()));
        }
        let mut body = serde_json::to_string(&self).unwrap_or_default();
        body.push('\n');
        response.content_type("application/problem+json").body(body)
    }
}

impl From<Fault> for Problem {
    fn from(fault: Fault) -> Self {
        match fault {
            Fault::BadRequest { detail, errors } => Self::bad_request(detail, errors),
            Fault::Invalid {
                code,
                detail,
                errors,
            } => Self::new(StatusCode::UNPROCESSABLE_ENTITY, code, detail).with_errors(errors),
            Fault::Refused {
                detail,
                errors,
                upload,
            } => Self {
                upload: Some(upload),
                ..Self::new(StatusCode::UNPROCESSABLE_ENTITY, "upload_refused", detail)
                    .with_errors(errors)
            },
            Fault::NotFound { what } => Self::new(
                StatusCode::NOT_FOUND,
                "not_found",
                format!("there is no {what}"),
            ),
            Fault::Conflict { code, detail } => Self::new(StatusCode::CONFLICT, code, detail),
            Fault::PreconditionFailed { detail } => Self::new(
                StatusCode::PRECONDITION_FAILED,
                "precondition_failed",
                detail,
            ),
            Fault::TooLarge { detail, errors } => {
                Self::new(StatusCode::PAYLOAD_TOO_LARGE, "too_large", detail).with_errors(errors)
            }
            Fault::TooSlow { detail } => Self::new(StatusCode::REQUEST_TIMEOUT, "too_slow", detail),
            Fault::Store(error) => Self {
                internal: Some(error.to_string()),
                ..Self::new(
                    StatusCode::SERVICE_UNAVAILABLE,
                    "store_unavailable",
                    "the database did not answer as it should; nothing was changed; try again",
                )
            },
            Fault::Internal(reason) => Self::internal(reason),
        }
    }
}
