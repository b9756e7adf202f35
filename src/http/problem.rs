//! Problem details (RFC 9457): the one shape of every error answer, made in one place.

use actix_web::HttpResponse;
use actix_web::http::StatusCode;
use serde::Serialize;
use utoipa::ToSchema;

use crate::finding::Finding;
use crate::service::{Fault, UploadView};

/// An error answer as it is sent.
#[derive(Debug, Serialize, ToSchema)]
#[schema(as = Problem)]
pub(super) struct ProblemView<'a> {
    /// Stable URI reference of the kind of problem.
    #[serde(rename = "type")]
    kind: String,
    /// Short name of the HTTP status.
    title: &'a str,
    /// HTTP status.
    status: u16,
    /// What went wrong, for a person.
    detail: &'a str,
    /// Stable code for programs.
    code: &'a str,
    /// Number of the request, as in the log and the header `X-Request-Id`.
    request_id: &'a str,
    /// Where exactly, what was found and expected, and what to do.
    errors: &'a [Finding],
    /// The refused upload, with its report.
    #[serde(skip_serializing_if = "Option::is_none")]
    upload: Option<&'a UploadView>,
}

/// An error answer before it is sent.
#[derive(Clone, Debug)]
pub(super) struct Problem {
    pub(super) status: StatusCode,
    pub(super) code: &'static str,
    pub(super) detail: String,
    errors: Vec<Finding>,
    upload: Option<Box<UploadView>>,
    headers: Vec<(&'static str, String)>,
    internal: Option<Box<str>>,
}

impl Problem {
    /// A problem with this status, code and detail.
    pub(super) fn new(status: StatusCode, code: &'static str, detail: impl Into<String>) -> Self {
        Self {
            status,
            code,
            detail: detail.into(),
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
            internal: Some(reason.into()),
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

    /// The answer.
    pub(super) fn answer(&self, request_id: &str) -> HttpResponse {
        let mut response = HttpResponse::build(self.status);
        for (name, value) in &self.headers {
            response.insert_header((*name, value.as_str()));
        }
        let view = ProblemView {
            kind: format!("/problems/{}", self.code),
            title: self.status.canonical_reason().unwrap_or("Error"),
            status: self.status.as_u16(),
            detail: &self.detail,
            code: self.code,
            request_id,
            errors: &self.errors,
            upload: self.upload.as_deref(),
        };
        let mut body = serde_json::to_string(&view).unwrap_or_default();
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
                internal: Some(error.to_string().into()),
                ..Self::new(
                    StatusCode::SERVICE_UNAVAILABLE,
                    "store_unavailable",
                    "the database did not answer as it should; nothing was changed; try again",
                )
            },
            Fault::Busy => Self::new(
                StatusCode::SERVICE_UNAVAILABLE,
                "busy",
                "as many requests of this kind as may be are under way; nothing was changed; try again",
            )
            .with_header("Retry-After", "10"),
            Fault::OutcomeUnknown(error) => Self {
                internal: Some(error.to_string().into()),
                ..Self::new(
                    StatusCode::SERVICE_UNAVAILABLE,
                    "outcome_unknown",
                    "the database went away while it committed: all of this was done, or nothing; look \
                     which, or send the same again, which is safe for uploads and documents",
                )
            },
            Fault::Internal(reason) => Self::internal(reason),
        }
    }
}
