//! `/v1/uploads`, `/v1/kinds`.

use actix_web::http::StatusCode;
use actix_web::{HttpResponse, web};
use futures_util::TryStreamExt;

use super::call::Call;
use super::problem::Problem;
use super::respond::Media;
use super::route::{
    self, Answer, Form, Method, Parameter, Route, Success, empty, json, optional, paging, text,
};
use crate::finding::Finding;
use crate::intake::{self, KindSpec, Reject};
use crate::series::vintage::Scope;
use crate::service::receiving::{OnFinding, OnReject, Request, receive, too_large};
use crate::service::tokens::Role;
use crate::service::{Fault, UploadView, uploads};

/// Parameters of an upload that are no columns.
fn own_parameters() -> Vec<Parameter> {
    vec![
        optional(
            "kind",
            Form::OneOf(kind_names()),
            "what the file holds; see /v1/kinds",
        )
        .required(),
        optional(
            "released",
            Form::Date,
            "date of release by the source; today unless given",
        ),
        optional("title", Form::Text, "title of the publication"),
        optional("publisher", Form::Text, "who publishes it"),
        optional("note", Form::Text, "anything worth keeping with it"),
        optional(
            "dry_run",
            Form::Flag,
            "say what would happen and keep nothing",
        ),
        optional(
            "on_reject",
            Form::OneOf(vec!["fail", "skip"]),
            "fail (default): rejected rows refuse the file; skip: the other rows land",
        ),
        optional(
            "on_finding",
            Form::OneOf(vec!["hold", "land"]),
            "hold (default): a finding of severity error holds the upload; land: it lands",
        ),
        optional(
            "scope",
            Form::OneOf(vec!["merge", "replace"]),
            "merge (default): periods that the file does not name stay; replace: they end",
        ),
    ]
}

fn kind_names() -> Vec<&'static str> {
    intake::kinds().iter().map(|k| k.name).collect()
}

fn post_parameters() -> Vec<Parameter> {
    let mut parameters = own_parameters();
    for kind in intake::kinds() {
        for column in kind.columns {
            if column.constant_allowed && parameters.iter().all(|p| p.name != column.name) {
                parameters.push(optional(column.name, Form::Text, column.description));
            }
        }
    }
    parameters
}

fn list_parameters() -> Vec<Parameter> {
    let mut parameters = paging();
    parameters.push(optional(
        "state",
        Form::OneOf(vec!["landed", "held", "refused", "withdrawn"]),
        "only uploads in this state",
    ));
    parameters.push(optional(
        "kind",
        Form::OneOf(kind_names()),
        "only uploads of this kind",
    ));
    parameters
}

pub(super) fn routes() -> Vec<Route> {
    vec![
        Route {
            method: Method::Get,
            path: "/v1/kinds",
            name: "list_kinds",
            summary: "What each kind of upload may hold: columns, constants, measures, units",
            role: Some(Role::Read),
            parameters: Vec::new,
            headers: &[],
            body: &[],
            successes: || vec![route::list::<KindSpec>(200, "the kinds")],
            problems: &[],
            handler: |call| Box::pin(async move { call.json(StatusCode::OK, &intake::kinds()) }),
        },
        Route {
            method: Method::Get,
            path: "/v1/kinds/{kind}",
            name: "get_kind",
            summary: "One kind; as text/csv an empty template",
            role: Some(Role::Read),
            parameters: || {
                vec![optional(
                    "format",
                    Form::OneOf(vec!["json", "csv"]),
                    "json or csv",
                )]
            },
            headers: &[],
            body: &[],
            successes: || vec![json::<KindSpec>(200, "the kind").or("text/csv", text)],
            problems: &[404, 406],
            handler: |call| Box::pin(async move { get_kind(&call) }),
        },
        Route {
            method: Method::Post,
            path: "/v1/uploads",
            name: "create_upload",
            summary: "Send a raw file; plain or gzip, one row an observation, a header first",
            role: Some(Role::Contribute),
            parameters: post_parameters,
            headers: &[("Content-Encoding", "gzip, where the file is compressed")],
            body: &[("text/csv", text)],
            successes: || {
                vec![
                    json::<UploadView>(200, "a dry run, or bytes that had come before"),
                    json::<UploadView>(201, "landed").header("Location"),
                    json::<UploadView>(202, "held: stored, feeding nothing until accepted")
                        .header("Location"),
                ]
            },
            problems: &[409, 415, 422],
            handler: |call| Box::pin(create(call)),
        },
        Route {
            method: Method::Get,
            path: "/v1/uploads",
            name: "list_uploads",
            summary: "Uploads, newest first, without their reports",
            role: Some(Role::Read),
            parameters: list_parameters,
            headers: &[],
            body: &[],
            successes: || vec![route::list::<UploadView>(200, "a page")],
            problems: &[],
            handler: |call| Box::pin(list(call)),
        },
        Route {
            method: Method::Get,
            path: "/v1/uploads/{id}",
            name: "get_upload",
            summary: "One upload with its report",
            role: Some(Role::Read),
            parameters: Vec::new,
            headers: &[],
            body: &[],
            successes: || vec![json::<UploadView>(200, "the upload")],
            problems: &[404],
            handler: |call| {
                Box::pin(async move {
                    let id = call.number("id", "upload")?;
                    call.json(
                        StatusCode::OK,
                        &uploads::get(&call.shared.database, id).await?,
                    )
                })
            },
        },
        Route {
            method: Method::Delete,
            path: "/v1/uploads/{id}",
            name: "withdraw_upload",
            summary: "Withdraw: what it said no longer counts, as if it had never come",
            role: Some(Role::Contribute),
            parameters: Vec::new,
            headers: &[],
            body: &[],
            successes: || vec![json::<UploadView>(200, "the withdrawn upload")],
            problems: &[404, 409],
            handler: |call| {
                Box::pin(async move {
                    let id = call.number("id", "upload")?;
                    let author = &call.principal.name;
                    let view = uploads::withdraw(&call.shared.database, id, author).await?;
                    call.json(StatusCode::OK, &view)
                })
            },
        },
        Route {
            method: Method::Post,
            path: "/v1/uploads/{id}/accept",
            name: "accept_upload",
            summary: "Make a held upload current",
            role: Some(Role::Contribute),
            parameters: Vec::new,
            headers: &[],
            body: &[],
            successes: || vec![json::<UploadView>(200, "the landed upload")],
            problems: &[404, 409],
            handler: |call| {
                Box::pin(async move {
                    let id = call.number("id", "upload")?;
                    let author = &call.principal.name;
                    let view = uploads::accept(&call.shared.database, id, author).await?;
                    call.json(StatusCode::OK, &view)
                })
            },
        },
        Route {
            method: Method::Get,
            path: "/v1/uploads/{id}/rejects",
            name: "list_rejects",
            summary: "Rows that could not be taken, with what was found and expected; the first ten thousand",
            role: Some(Role::Read),
            parameters: paging,
            headers: &[],
            body: &[],
            successes: || vec![route::list::<Reject>(200, "a page")],
            problems: &[404],
            handler: |call| {
                Box::pin(async move {
                    let id = call.number("id", "upload")?;
                    let page =
                        uploads::rejects(&call.shared.database, id, call.after(), call.limit());
                    call.page(&page.await?)
                })
            },
        },
        Route {
            method: Method::Get,
            path: "/v1/uploads/{id}/raw",
            name: "get_raw",
            summary: "The bytes as they came",
            role: Some(Role::Read),
            parameters: Vec::new,
            headers: &[("If-None-Match", "an entity tag that the client has")],
            body: &[],
            successes: || {
                vec![
                    Success {
                        status: 200,
                        description: "the bytes",
                        content: vec![("text/csv", text), ("application/gzip", text)],
                        headers: vec!["ETag", "Content-Length"],
                    },
                    empty(304, "the client has them").header("ETag"),
                ]
            },
            problems: &[404],
            handler: |call| Box::pin(raw(call)),
        },
    ]
}

fn get_kind(call: &Call) -> Answer {
    let name = call.segment("kind").to_owned();
    let Some(kind) = intake::kinds().into_iter().find(|k| k.name == name) else {
        return Err(Problem::new(
            StatusCode::NOT_FOUND,
            "not_found",
            format!(
                "there is no kind '{name}'; there are {}",
                kind_names().join(", ")
            ),
        ));
    };
    match call.media(&[Media::Json, Media::Csv])? {
        Media::Csv => {
            let template = intake::template_csv(kind.name).unwrap_or_default();
            Ok(call.body(StatusCode::OK, Media::Csv, None, template.into_bytes()))
        }
        Media::Json | Media::Text | Media::Latex => call.json(StatusCode::OK, &kind),
    }
}

async fn create(mut call: Call) -> Answer {
    let limit = call.shared.limits.max_bytes;
    if call.declared_length().is_some_and(|n| n > limit) {
        return Err(too_large(limit).into());
    }
    let lower = |name| call.header(name).unwrap_or_default().to_ascii_lowercase();
    let kind_of_body = lower("Content-Type");
    if kind_of_body.starts_with("multipart/") {
        return Err(Problem::new(
            StatusCode::UNSUPPORTED_MEDIA_TYPE,
            "multipart_body",
            "a form with parts is not taken; send the file itself as the body: curl --data-binary \
             @FILE, not -F",
        ));
    }
    let gzip_declared = match lower("Content-Encoding").as_str() {
        "" | "identity" => false,
        "gzip" | "x-gzip" => true,
        other => {
            return Err(Problem::new(
                StatusCode::UNSUPPORTED_MEDIA_TYPE,
                "unknown_coding",
                format!("the content coding '{other}' is not understood; send plain text or gzip"),
            ));
        }
    };
    let own: Vec<&str> = own_parameters().iter().map(|p| p.name).collect();
    let columns: Vec<(String, String)> = call
        .parameters()
        .filter(|(name, _)| !own.contains(name))
        .map(|(name, value)| (name.to_owned(), value.to_owned()))
        .collect();
    let kind = call.parameter("kind").unwrap_or_default();
    let settings = intake::Settings::parse(kind, &columns).map_err(|errors| {
        let detail = errors.first().map_or("", |f| f.message.as_str()).to_owned();
        Problem::bad_request(detail, errors)
    })?;
    let or_empty = |name: &str| call.parameter(name).unwrap_or_default().to_owned();
    let request = Request {
        settings,
        gzip_declared,
        released: call.date("released"),
        title: or_empty("title"),
        publisher: or_empty("publisher"),
        note: or_empty("note"),
        author: call.principal.name.clone(),
        on_reject: match call.parameter("on_reject") {
            Some("skip") => OnReject::Skip,
            _ => OnReject::Fail,
        },
        on_finding: match call.parameter("on_finding") {
            Some("land") => OnFinding::Land,
            _ => OnFinding::Hold,
        },
        scope: match call.parameter("scope") {
            Some("replace") => Scope::Replace,
            _ => Scope::Merge,
        },
        dry_run: call.flag("dry_run"),
    };
    let Some(payload) = call.payload.take() else {
        return Err(Problem::bad_request("the body was read already", vec![]));
    };
    let view = receive(&call.shared.database, &call.shared.limits, request, payload)
        .await
        .map_err(|mut fault| {
            if let Fault::Invalid { errors, .. } = &mut fault
                && kind_of_body.starts_with("application/x-www-form-urlencoded")
            {
                let message = "the body came as a form, whose line ends may be lost";
                errors.push(
                    Finding::notice("sent_as_form", message)
                        .remedy("with curl send it by --data-binary @FILE; -d drops line ends"),
                );
            }
            fault
        })?;
    let status = if view.dry_run || view.recognised {
        StatusCode::OK
    } else if view.state == "held" {
        StatusCode::ACCEPTED
    } else {
        StatusCode::CREATED
    };
    let mut response = call.json(status, &view)?;
    if let Some(id) = view.id.filter(|_| status != StatusCode::OK) {
        super::respond::location(&mut response, &format!("/v1/uploads/{id}"));
    }
    Ok(response)
}

async fn list(call: Call) -> Answer {
    let page = uploads::list(
        &call.shared.database,
        call.parameter("state"),
        call.parameter("kind"),
        call.after(),
        call.limit(),
    );
    call.page(&page.await?)
}

async fn raw(call: Call) -> Answer {
    let id = call.number("id", "upload")?;
    let (upload, bytes) = uploads::raw(&call.shared.database, id).await?;
    let media = if upload.compression == "gzip" {
        "application/gzip"
    } else {
        "text/csv"
    };
    let tag = format!("\"{}\"", upload.sha256);
    if call.has(&tag) {
        return Ok(call.not_modified(&tag));
    }
    Ok(HttpResponse::Ok()
        .content_type(media)
        .insert_header(("ETag", tag))
        .no_chunking(u64::try_from(upload.bytes).unwrap_or_default())
        .streaming(
            bytes
                .map_ok(web::Bytes::from)
                .map_err(|fault| std::io::Error::other(format!("{fault:?}"))),
        ))
}
