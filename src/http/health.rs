//! `/healthz`, `/readyz`, `/openapi.json`.

use actix_web::http::StatusCode;
use serde::Serialize;
use utoipa::ToSchema;

use super::openapi;
use super::respond::Media;
use super::route::{Method, Route, json, object};
use crate::service;

/// Answer of the health checks.
#[derive(Clone, Debug, Serialize, ToSchema)]
pub(super) struct Health {
    /// `ok`.
    status: &'static str,
    /// Version of the program.
    version: &'static str,
}

const OK: Health = Health {
    status: "ok",
    version: env!("CARGO_PKG_VERSION"),
};

pub(super) fn routes() -> Vec<Route> {
    vec![
        Route {
            method: Method::Get,
            path: "/healthz",
            name: "healthz",
            summary: "Whether the process answers",
            role: None,
            parameters: Vec::new,
            headers: &[],
            body: &[],
            successes: || vec![json::<Health>(200, "it does")],
            problems: &[],
            handler: |call| Box::pin(async move { call.json(StatusCode::OK, &OK) }),
        },
        Route {
            method: Method::Get,
            path: "/readyz",
            name: "readyz",
            summary: "Whether the database answers too",
            role: None,
            parameters: Vec::new,
            headers: &[],
            body: &[],
            successes: || vec![json::<Health>(200, "it does")],
            problems: &[503],
            handler: |call| {
                Box::pin(async move {
                    service::ready(&call.shared.database).await?;
                    call.json(StatusCode::OK, &OK)
                })
            },
        },
        Route {
            method: Method::Get,
            path: "/openapi.json",
            name: "openapi",
            summary: "This document",
            role: None,
            parameters: Vec::new,
            headers: &[],
            body: &[],
            successes: || {
                vec![super::route::Success {
                    status: 200,
                    description: "the document",
                    content: vec![("application/json", object)],
                    headers: vec![],
                }]
            },
            problems: &[],
            handler: |call| {
                Box::pin(async move {
                    let document = openapi::document().as_bytes().to_vec();
                    Ok(call.body(StatusCode::OK, Media::Json, None, document))
                })
            },
        },
    ]
}
