//! `/v1/series`.

use actix_web::http::StatusCode;

use super::call::Call;
use super::problem::Problem;
use super::respond::{Media, to_json};
use super::route::{
    self, Answer, Form, Method, Parameter, Route, empty, json, optional, paging, text,
};
use crate::series::SeriesKey;
use crate::service::lineage::{LineageView, lineage};
use crate::service::series::{self, Moment, Query};
use crate::service::tokens::Role;
use crate::service::{ObservationsView, SeriesView, VintageView};

fn list_parameters() -> Vec<Parameter> {
    let mut parameters = paging();
    for place in SeriesKey::PLACES {
        parameters.push(optional(
            place,
            Form::Text,
            "codes wanted in this place of the key, separated by commas",
        ));
    }
    parameters.push(optional(
        "words",
        Form::Text,
        "words that occur in key or unit",
    ));
    parameters
}

/// Parameters that pick a moment.
pub(super) fn moment_parameters() -> Vec<Parameter> {
    vec![
        optional(
            "as_of",
            Form::Text,
            "as released until this date, or as of revision:N",
        ),
        optional(
            "recorded_as_of",
            Form::Text,
            "as recorded here until this RFC 3339 time",
        ),
    ]
}

fn read_parameters() -> Vec<Parameter> {
    let mut parameters = moment_parameters();
    parameters.push(optional(
        "segment",
        Form::Integer {
            least: 1,
            most: 1_000_000,
        },
        "segment by number; the one released last unless given",
    ));
    parameters
}

fn observation_parameters() -> Vec<Parameter> {
    let mut parameters = read_parameters();
    parameters.extend([
        optional(
            "from",
            Form::Text,
            "first period wanted, or a longer one that begins with it",
        ),
        optional(
            "to",
            Form::Text,
            "last period wanted, or a longer one that ends with it",
        ),
        optional(
            "growth",
            Form::OneOf(series::growth_names()),
            "growth in place of levels, as a fraction",
        ),
        optional("format", Form::OneOf(vec!["json", "csv"]), "json or csv"),
    ]);
    parameters
}

fn lineage_parameters() -> Vec<Parameter> {
    let mut parameters = read_parameters();
    parameters.push(optional(
        "period",
        Form::Text,
        "one period of the series; what it rests on is told whole",
    ));
    parameters
}

/// The moment that a request asks for.
pub(super) fn moment(call: &Call) -> Moment {
    Moment {
        as_of: call.parameter("as_of").map(str::to_owned),
        recorded_as_of: call.parameter("recorded_as_of").map(str::to_owned),
        segment: call.integer("segment"),
    }
}

fn key(call: &Call) -> Result<SeriesKey, Problem> {
    Ok(series::parse_key(call.segment("key"))?)
}

pub(super) fn routes() -> Vec<Route> {
    vec![
        Route {
            method: Method::Get,
            path: "/v1/series",
            name: "list_series",
            summary: "Find series by any place of their keys and by words",
            role: Some(Role::Read),
            parameters: list_parameters,
            headers: &[],
            body: &[],
            successes: || vec![route::list::<SeriesView>(200, "a page")],
            problems: &[],
            handler: |call| Box::pin(list(call)),
        },
        Route {
            method: Method::Get,
            path: "/v1/series/{key}",
            name: "get_series",
            summary: "One series: unit, segment, span, current vintage",
            role: Some(Role::Read),
            parameters: Vec::new,
            headers: &[],
            body: &[],
            successes: || vec![json::<SeriesView>(200, "the series")],
            problems: &[404],
            handler: |call| {
                Box::pin(async move {
                    let view = series::get(&call.shared.database, &key(&call)?).await?;
                    call.json(StatusCode::OK, &view)
                })
            },
        },
        Route {
            method: Method::Get,
            path: "/v1/series/{key}/observations",
            name: "get_observations",
            summary: "Observations, as of any release or revision",
            role: Some(Role::Read),
            parameters: observation_parameters,
            headers: &[("If-None-Match", "an entity tag that the client has")],
            body: &[],
            successes: || {
                vec![
                    json::<ObservationsView>(200, "the observations")
                        .or("text/csv", text)
                        .header("ETag")
                        .header("Vary"),
                    empty(304, "the client has them").header("ETag"),
                ]
            },
            problems: &[404, 406, 422],
            handler: |call| Box::pin(observations(call)),
        },
        Route {
            method: Method::Get,
            path: "/v1/series/{key}/vintages",
            name: "list_vintages",
            summary: "The vintages with what each changed, by the release that speaks, oldest first",
            role: Some(Role::Read),
            parameters: paging,
            headers: &[],
            body: &[],
            successes: || vec![route::list::<VintageView>(200, "a page")],
            problems: &[404],
            handler: |call| {
                Box::pin(async move {
                    let (database, key) = (&call.shared.database, key(&call)?);
                    let page = series::vintages(database, &key, call.after(), call.limit());
                    call.page(&page.await?)
                })
            },
        },
        Route {
            method: Method::Get,
            path: "/v1/series/{key}/lineage",
            name: "get_lineage",
            summary: "Where observations come from: through runs, steps and their inputs down to upload and line",
            role: Some(Role::Read),
            parameters: lineage_parameters,
            headers: &[],
            body: &[],
            successes: || vec![json::<LineageView>(200, "the lineage")],
            problems: &[404],
            handler: |call| {
                Box::pin(async move {
                    let (key, moment) = (key(&call)?, moment(&call));
                    let period = call.parameter("period");
                    let view = lineage(&call.shared.database, &key, &moment, period).await?;
                    call.json(StatusCode::OK, &view)
                })
            },
        },
    ]
}

async fn list(call: Call) -> Answer {
    let split = |text: Option<&str>, at: char| -> Vec<String> {
        text.map_or_else(Vec::new, |t| {
            t.split(at)
                .map(str::trim)
                .filter(|w| !w.is_empty())
                .map(str::to_owned)
                .collect()
        })
    };
    let query = Query {
        places: SeriesKey::PLACES.map(|place| split(call.parameter(place), ',')),
        words: split(call.parameter("words"), ' '),
    };
    let page = series::list(&call.shared.database, query, call.after(), call.limit()).await?;
    call.page(&page)
}

async fn observations(call: Call) -> Answer {
    let (key, moment) = (key(&call)?, moment(&call));
    let media = call.media(&[Media::Json, Media::Csv])?;
    let database = &call.shared.database;
    if call.header("If-None-Match").is_some()
        && let Some((segment, revision)) = series::version(database, &key, &moment).await?
    {
        let tag = call.tag(&version(segment, revision), media);
        if call.has(&tag) {
            return Ok(call.not_modified(&tag));
        }
    }
    let view = series::observations(
        database,
        &key,
        &moment,
        call.parameter("from"),
        call.parameter("to"),
        call.parameter("growth"),
    )
    .await?;
    let tag = call.tag(&version(view.segment, view.revision), media);
    let body = match media {
        Media::Csv => csv_body(&view),
        Media::Json | Media::Text | Media::Latex => to_json(&view)?,
    };
    Ok(call.body(StatusCode::OK, media, Some(&tag), body))
}

fn version(segment: i32, revision: i64) -> String {
    format!("{revision}.{segment}")
}

fn csv_body(view: &ObservationsView) -> Vec<u8> {
    let mut writer = csv::Writer::from_writer(Vec::new());
    let mut rows = vec![["period".to_owned(), "value".to_owned(), "status".to_owned()]];
    rows.extend(view.observations.iter().map(|o| {
        let value = o.value.map_or_else(String::new, |v| v.to_string());
        [
            o.period.clone(),
            value,
            char::from(o.status.byte()).to_string(),
        ]
    }));
    for row in rows {
        // Writing into memory cannot fail.
        let _ = writer.write_record(&row);
    }
    writer.into_inner().unwrap_or_default()
}
