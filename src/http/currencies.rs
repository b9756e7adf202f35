//! `/v1/currencies`.

use actix_web::HttpResponse;
use actix_web::http::StatusCode;

use super::respond::location;
use super::route::{Method, Route, empty, json, list, schema};
use crate::service::CurrencyView;
use crate::service::currencies::{self, Declaration};
use crate::service::tokens::Role;

pub(super) fn routes() -> Vec<Route> {
    vec![
        Route {
            method: Method::Get,
            path: "/v1/currencies",
            name: "list_currencies",
            summary: "Currencies that users declared; those of ISO 4217 are known anyway",
            role: Some(Role::Read),
            parameters: Vec::new,
            headers: &[],
            body: &[],
            successes: || vec![list::<CurrencyView>(200, "the currencies")],
            problems: &[],
            handler: |call| {
                Box::pin(async move {
                    call.json(
                        StatusCode::OK,
                        &currencies::list(&call.shared.database).await?,
                    )
                })
            },
        },
        Route {
            method: Method::Get,
            path: "/v1/currencies/{code}",
            name: "get_currency",
            summary: "A declared currency",
            role: Some(Role::Read),
            parameters: Vec::new,
            headers: &[],
            body: &[],
            successes: || vec![json::<CurrencyView>(200, "the currency")],
            problems: &[404],
            handler: |call| {
                Box::pin(async move {
                    let view = currencies::get(&call.shared.database, call.segment("code")).await?;
                    call.json(StatusCode::OK, &view)
                })
            },
        },
        Route {
            method: Method::Put,
            path: "/v1/currencies/{code}",
            name: "put_currency",
            summary: "Declare a currency, and the areas whose own money it is",
            role: Some(Role::Contribute),
            parameters: Vec::new,
            headers: &[],
            body: &[("application/json", schema::<Declaration>)],
            successes: || {
                vec![
                    json::<CurrencyView>(200, "declared anew"),
                    json::<CurrencyView>(201, "declared").header("Location"),
                ]
            },
            problems: &[409, 422],
            handler: |call| {
                Box::pin(async move {
                    let mut call = call;
                    let body = call.document().await?;
                    let code = call.segment("code");
                    let (view, created) =
                        currencies::declare(&call.shared.database, code, &body).await?;
                    if !created {
                        return call.json(StatusCode::OK, &view);
                    }
                    let mut response = call.json(StatusCode::CREATED, &view)?;
                    location(&mut response, call.request.path());
                    Ok(response)
                })
            },
        },
        Route {
            method: Method::Delete,
            path: "/v1/currencies/{code}",
            name: "delete_currency",
            summary: "Take a declaration back",
            role: Some(Role::Contribute),
            parameters: Vec::new,
            headers: &[],
            body: &[],
            successes: || vec![empty(204, "taken back")],
            problems: &[404, 409],
            handler: |call| {
                Box::pin(async move {
                    currencies::delete(&call.shared.database, call.segment("code")).await?;
                    Ok(HttpResponse::NoContent().finish())
                })
            },
        },
    ]
}
