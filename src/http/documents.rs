//! `/v1/preparations` and `/v1/studies`.

use actix_web::HttpResponse;
use actix_web::http::StatusCode;
use actix_web::http::header;

use super::call::Call;
use super::problem::Problem;
use super::respond::{Media, location};
use super::route::{
    Answer, Form, Method, Parameter, Route, Success, empty, json, list, object, optional, paging,
    text,
};
use super::series::{moment, moment_parameters};
use crate::finding::Finding;
use crate::preparation::Plan;
use crate::service::documents::{self, DocumentKind, Precondition};
use crate::service::preparations::{self, PreparationRun};
use crate::service::studies::{self, StudyRun};
use crate::service::tokens::Role;
use crate::service::{DocumentView, RunLine};

const PUT_HEADERS: &[(&str, &str)] = &[
    (
        "If-Match",
        "entity tags of versions of which one must be current",
    ),
    ("If-None-Match", "* where nothing may be there yet"),
];
const DELETE_HEADERS: &[(&str, &str)] = &[(
    "If-Match",
    "entity tags of versions of which one must be current",
)];

fn version_parameters() -> Vec<Parameter> {
    vec![optional(
        "version",
        Form::Integer {
            least: 1,
            most: 1_000_000_000,
        },
        "a version; the newest unless given",
    )]
}

fn run_parameters() -> Vec<Parameter> {
    let mut parameters = version_parameters();
    parameters.extend(moment_parameters());
    parameters
}

fn run_text_parameters() -> Vec<Parameter> {
    vec![
        optional("format", Form::OneOf(vec!["json", "text"]), "json or text"),
        optional(
            "with_unreliable",
            Form::Flag,
            "print unreliable rates in the text, marked, instead of the reasons alone",
        ),
    ]
}

fn put_successes() -> Vec<Success> {
    vec![
        json::<DocumentView>(200, "a new version, or the same text again").header("ETag"),
        json::<DocumentView>(201, "created")
            .header("ETag")
            .header("Location"),
    ]
}

/// The routes that both kinds of documents share.
macro_rules! document_routes {
    ($kind:expr, $base:literal, $plural:literal, $singular:literal, put: $put_problems:expr) => {
        vec![
            Route {
                method: Method::Get,
                path: $base,
                name: concat!("list_", $plural),
                summary: concat!("The ", $plural, " by name, each in its newest version"),
                role: Some(Role::Read),
                parameters: paging,
                headers: &[],
                body: &[],
                successes: || vec![list::<DocumentView>(200, "a page")],
                problems: &[],
                handler: |call| {
                    Box::pin(async move {
                        let database = &call.shared.database;
                        let page = documents::list(database, $kind, call.after(), call.limit());
                        call.page(&page.await?)
                    })
                },
            },
            Route {
                method: Method::Put,
                path: concat!($base, "/{name}"),
                name: concat!("put_", $singular),
                summary: concat!("Store a ", $singular, " after checking it"),
                role: Some(Role::Contribute),
                parameters: Vec::new,
                headers: PUT_HEADERS,
                body: &[("application/json", object)],
                successes: put_successes,
                problems: $put_problems,
                handler: |call| {
                    Box::pin(async move {
                        let mut call = call;
                        let body = call.document().await?;
                        let precondition = precondition(&call)?;
                        let (view, created) = documents::put(
                            &call.shared.database,
                            $kind,
                            call.segment("name"),
                            &body,
                            &precondition,
                            &call.principal.name,
                        )
                        .await?;
                        document(&call, &view, created)
                    })
                },
            },
            Route {
                method: Method::Get,
                path: concat!($base, "/{name}"),
                name: concat!("get_", $singular),
                summary: concat!("A ", $singular),
                role: Some(Role::Read),
                parameters: version_parameters,
                headers: &[("If-None-Match", "an entity tag that the client has")],
                body: &[],
                successes: || {
                    vec![
                        json::<DocumentView>(200, "the document").header("ETag"),
                        empty(304, "the client has it").header("ETag"),
                    ]
                },
                problems: &[404],
                handler: |call| {
                    Box::pin(async move {
                        let (name, version) = (call.segment("name"), call.integer("version"));
                        let view =
                            documents::get(&call.shared.database, $kind, name, version).await?;
                        let tag = tag(&call, view.version);
                        if call.has(&tag) {
                            return Ok(call.not_modified(&tag));
                        }
                        document(&call, &view, false)
                    })
                },
            },
            Route {
                method: Method::Delete,
                path: concat!($base, "/{name}"),
                name: concat!("delete_", $singular),
                summary: concat!("Delete a ", $singular, "; its runs stay"),
                role: Some(Role::Contribute),
                parameters: Vec::new,
                headers: DELETE_HEADERS,
                body: &[],
                successes: || vec![empty(204, "deleted")],
                problems: &[404, 412],
                handler: |call| {
                    Box::pin(async move {
                        let precondition = precondition(&call)?;
                        let author = &call.principal.name;
                        let name = call.segment("name");
                        let database = &call.shared.database;
                        documents::delete(database, $kind, name, &precondition, author).await?;
                        Ok(HttpResponse::NoContent().finish())
                    })
                },
            },
            Route {
                method: Method::Get,
                path: concat!($base, "/{name}/runs"),
                name: concat!("list_", $singular, "_runs"),
                summary: concat!("Runs of a ", $singular, ", newest first"),
                role: Some(Role::Read),
                parameters: paging,
                headers: &[],
                body: &[],
                successes: || vec![list::<RunLine>(200, "a page")],
                problems: &[404],
                handler: |call| {
                    Box::pin(async move {
                        let (database, name) = (&call.shared.database, call.segment("name"));
                        let page =
                            documents::runs(database, $kind, name, call.after(), call.limit());
                        call.page(&page.await?)
                    })
                },
            },
        ]
    };
}

pub(super) fn routes() -> Vec<Route> {
    let mut routes = document_routes!(
        DocumentKind::Preparation,
        "/v1/preparations",
        "preparations",
        "preparation",
        put: &[409, 412, 422]
    );
    routes.extend(document_routes!(
        DocumentKind::Study,
        "/v1/studies",
        "studies",
        "study",
        put: &[412, 422]
    ));
    routes.extend([
        Route {
            method: Method::Get,
            path: "/v1/preparations/{name}/plan",
            name: "plan_preparation",
            summary: "What a preparation would do: each step with its unit, without numbers",
            role: Some(Role::Read),
            parameters: Vec::new,
            headers: &[],
            body: &[],
            successes: || vec![json::<Plan>(200, "the plan")],
            problems: &[404, 422],
            handler: |call| {
                Box::pin(async move {
                    let plan = preparations::plan(&call.shared.database, call.segment("name"));
                    call.json(StatusCode::OK, &plan.await?)
                })
            },
        },
        Route {
            method: Method::Post,
            path: "/v1/preparations/{name}/runs",
            name: "run_preparation",
            summary: "Evaluate a preparation and store its outputs as series with lineage",
            role: Some(Role::Contribute),
            parameters: run_parameters,
            headers: &[],
            body: &[],
            successes: || vec![json::<PreparationRun>(201, "the run").header("Location")],
            problems: &[404, 409, 422],
            handler: |call| {
                Box::pin(async move {
                    let (database, name) = (&call.shared.database, call.segment("name"));
                    let author = &call.principal.name;
                    let version = call.integer("version");
                    let moment = moment(&call);
                    let run = preparations::run(database, name, version, &moment, author).await?;
                    let mut response = call.json(StatusCode::CREATED, &run)?;
                    location(
                        &mut response,
                        &format!("/v1/preparations/{name}/runs/{}", run.id),
                    );
                    Ok(response)
                })
            },
        },
        Route {
            method: Method::Get,
            path: "/v1/preparations/{name}/runs/{id}",
            name: "get_preparation_run",
            summary: "A run: the vintages it read, and each output's steps and notes",
            role: Some(Role::Read),
            parameters: Vec::new,
            headers: &[],
            body: &[],
            successes: || vec![json::<PreparationRun>(200, "the run")],
            problems: &[404],
            handler: |call| {
                Box::pin(async move {
                    let id = call.number("id", "run")?;
                    let (database, name) = (&call.shared.database, call.segment("name"));
                    let run = preparations::get_run(database, name, id).await?;
                    call.json(StatusCode::OK, &run)
                })
            },
        },
        Route {
            method: Method::Post,
            path: "/v1/studies/{name}/runs",
            name: "run_study",
            summary: "Estimate demand and the growth that the balance of payments allows",
            role: Some(Role::Contribute),
            parameters: || {
                let mut parameters = run_parameters();
                parameters.extend(run_text_parameters());
                parameters
            },
            headers: &[],
            body: &[],
            successes: || {
                vec![
                    json::<StudyRun>(201, "the run")
                        .or("text/plain", text)
                        .header("Location"),
                ]
            },
            problems: &[404, 406, 422],
            handler: |call| {
                Box::pin(async move {
                    let media = call.media(&[Media::Json, Media::Text])?;
                    let (database, name) = (&call.shared.database, call.segment("name"));
                    let author = &call.principal.name;
                    let version = call.integer("version");
                    let moment = moment(&call);
                    let run = studies::run(database, name, version, &moment, author).await?;
                    let mut response = study_run(&call, StatusCode::CREATED, media, &run)?;
                    location(
                        &mut response,
                        &format!("/v1/studies/{name}/runs/{}", run.id),
                    );
                    Ok(response)
                })
            },
        },
        Route {
            method: Method::Get,
            path: "/v1/studies/{name}/runs/{id}",
            name: "get_study_run",
            summary: "A run of a study, as JSON or as a text for a person",
            role: Some(Role::Read),
            parameters: run_text_parameters,
            headers: &[],
            body: &[],
            successes: || vec![json::<StudyRun>(200, "the run").or("text/plain", text)],
            problems: &[404, 406],
            handler: |call| {
                Box::pin(async move {
                    let media = call.media(&[Media::Json, Media::Text])?;
                    let id = call.number("id", "run")?;
                    let (database, name) = (&call.shared.database, call.segment("name"));
                    let run = studies::get_run(database, name, id).await?;
                    study_run(&call, StatusCode::OK, media, &run)
                })
            },
        },
    ]);
    routes
}

fn study_run(call: &Call, status: StatusCode, media: Media, run: &StudyRun) -> Answer {
    match media {
        Media::Text => {
            let text = studies::text(run, call.flag("with_unreliable"));
            Ok(call.body(status, media, None, text.into_bytes()))
        }
        Media::Json | Media::Csv | Media::Latex => call.json(status, run),
    }
}

fn tag(call: &Call, version: i32) -> String {
    call.tag(&format!("v{version}"), Media::Json)
}

fn document(call: &Call, view: &DocumentView, created: bool) -> Answer {
    let status = if created {
        StatusCode::CREATED
    } else {
        StatusCode::OK
    };
    let mut response = call.json(status, view)?;
    if let Ok(value) = header::HeaderValue::from_str(&tag(call, view.version)) {
        response.headers_mut().insert(header::ETAG, value);
    }
    if created {
        location(&mut response, call.request.path());
    }
    Ok(response)
}

fn precondition(call: &Call) -> Result<Precondition, Problem> {
    let absent = match call.header("If-None-Match") {
        None => false,
        Some("*") => true,
        Some(other) => {
            let message = "If-None-Match must be * where a document is written";
            let finding = Finding::error("bad_header", message)
                .at_parameter("If-None-Match")
                .found(other)
                .expected("*");
            return Err(Problem::bad_request(message, vec![finding]));
        }
    };
    let tags = call.header("If-Match");
    let present = tags.is_some_and(|tags| tags.trim() == "*");
    let matches = tags.filter(|_| !present).map(|tags| {
        // A version is the same in whatever coding the client got it.
        let version = |tag: &str| {
            let tag = tag.trim().strip_prefix("\"v")?.strip_suffix('"')?;
            tag.split('-').next()?.parse().ok()
        };
        tags.split(',').filter_map(version).collect()
    });
    Ok(Precondition {
        matches,
        present,
        absent,
    })
}
