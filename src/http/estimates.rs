//! `/v1/estimates`.

use actix_web::HttpResponse;
use actix_web::http::StatusCode;

use super::call::Call;
use super::respond::{Media, location};
use super::route::{
    Answer, Form, Method, Parameter, Route, Success, empty, json, list, object, optional, paging,
    text,
};
use super::series::{moment, moment_parameters};
use crate::service::estimates::{self, EstimateLine, EstimateView};
use crate::service::tokens::Role;

fn format_parameter() -> Parameter {
    let forms = Form::OneOf(vec!["json", "text", "latex"]);
    optional("format", forms, "json, text, or latex: tables for a paper")
}

fn report(success: Success) -> Success {
    success
        .or("text/plain", text)
        .or("application/x-latex", text)
}

pub(super) fn routes() -> Vec<Route> {
    vec![
        Route {
            method: Method::Get,
            path: "/v1/estimates",
            name: "list_estimates",
            summary: "Estimates that are still kept, newest first",
            role: Some(Role::Read),
            parameters: paging,
            headers: &[],
            body: &[],
            successes: || vec![list::<EstimateLine>(200, "a page")],
            problems: &[],
            handler: |call| {
                Box::pin(async move {
                    let (database, days) = (&call.shared.database, call.shared.estimate_days);
                    let page = estimates::list(database, call.after(), call.limit(), days);
                    call.page(&page.await?)
                })
            },
        },
        Route {
            method: Method::Post,
            path: "/v1/estimates",
            name: "create_estimate",
            summary: "Estimate an equation by a method, from stored series or numbers of the request",
            role: Some(Role::Contribute),
            parameters: || {
                let mut parameters = moment_parameters();
                parameters.push(format_parameter());
                parameters
            },
            headers: &[],
            body: &[("application/json", object)],
            successes: || {
                vec![report(
                    json::<EstimateView>(201, "the estimate").header("Location"),
                )]
            },
            problems: &[406, 422],
            handler: |call| {
                Box::pin(async move {
                    let mut call = call;
                    let media = call.media(MEDIA)?;
                    let body = call.document().await?;
                    let (database, days) = (&call.shared.database, call.shared.estimate_days);
                    let author = &call.principal.name;
                    let view =
                        estimates::create(database, &body, &moment(&call), author, days).await?;
                    let mut response = estimate(&call, StatusCode::CREATED, media, &view)?;
                    location(&mut response, &format!("/v1/estimates/{}", view.id));
                    Ok(response)
                })
            },
        },
        Route {
            method: Method::Get,
            path: "/v1/estimates/{id}",
            name: "get_estimate",
            summary: "An estimate, as JSON, as a table for a person, or as LaTeX",
            role: Some(Role::Read),
            parameters: || vec![format_parameter()],
            headers: &[],
            body: &[],
            successes: || vec![report(json::<EstimateView>(200, "the estimate"))],
            problems: &[404, 406],
            handler: |call| {
                Box::pin(async move {
                    let media = call.media(MEDIA)?;
                    let id = call.number("id", "estimate")?;
                    let days = call.shared.estimate_days;
                    let view = estimates::get(&call.shared.database, id, days).await?;
                    estimate(&call, StatusCode::OK, media, &view)
                })
            },
        },
        Route {
            method: Method::Get,
            path: "/v1/estimates/{id}/sample.csv",
            name: "get_estimate_sample",
            summary: "The rows that an estimate was computed from, so that any statistics program can \
                repeat it; lines that begin with # say how",
            role: Some(Role::Read),
            parameters: || {
                let about = "true unless given; false leaves out the lines that begin with #";
                vec![optional("comments", Form::Flag, about)]
            },
            headers: &[],
            body: &[],
            successes: || {
                vec![Success {
                    content: vec![("text/csv", text)],
                    ..empty(200, "the rows: period, then one column a variable")
                }]
            },
            problems: &[404],
            handler: |call| {
                Box::pin(async move {
                    let id = call.number("id", "estimate")?;
                    let comments = call.parameter("comments") != Some("false");
                    let csv = estimates::sample(&call.shared.database, id, comments).await?;
                    Ok(call.body(StatusCode::OK, Media::Csv, None, csv.into_bytes()))
                })
            },
        },
        Route {
            method: Method::Delete,
            path: "/v1/estimates/{id}",
            name: "delete_estimate",
            summary: "Erase an estimate before its time",
            role: Some(Role::Contribute),
            parameters: Vec::new,
            headers: &[],
            body: &[],
            successes: || vec![empty(204, "erased")],
            problems: &[404],
            handler: |call| {
                Box::pin(async move {
                    let id = call.number("id", "estimate")?;
                    estimates::delete(&call.shared.database, id).await?;
                    Ok(HttpResponse::NoContent().finish())
                })
            },
        },
    ]
}

const MEDIA: &[Media] = &[Media::Json, Media::Text, Media::Latex];

fn estimate(call: &Call, status: StatusCode, media: Media, view: &EstimateView) -> Answer {
    let page = match media {
        Media::Text => estimates::text(view),
        Media::Latex => estimates::latex(view),
        Media::Json | Media::Csv => return call.json(status, view),
    };
    Ok(call.body(status, media, None, page.into_bytes()))
}
