//! Routes by resource, problem details, authorisation, the `OpenAPI` document.
//!
//! Every operation is a row of one table (`route::Route`); the table drives the router, the checks of
//! parameters and roles, the answers to wrong methods and the `OpenAPI` document. Start at
//! [`Application`].

mod application;
mod call;
mod currencies;
mod documents;
mod estimates;
mod health;
pub mod openapi;
mod problem;
mod respond;
mod route;
mod series;
mod state;
mod turn;
mod uploads;

pub use application::{Application, Options};

use std::sync::LazyLock;

/// The table of all operations.
static ROUTES: LazyLock<Vec<route::Route>> = LazyLock::new(routes);

fn routes() -> Vec<route::Route> {
    let mut routes = health::routes();
    routes.extend(uploads::routes());
    routes.extend(series::routes());
    routes.extend(documents::routes());
    routes.extend(estimates::routes());
    routes.extend(currencies::routes());
    routes
}
