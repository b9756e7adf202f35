//! The server: binds, dispatches, logs and stops.

use std::collections::BTreeMap;
use std::net::{SocketAddr, TcpListener};
use std::sync::Arc;
use std::time::{Duration, Instant};

use actix_web::body::BoxBody;
use actix_web::dev::{Server, ServerHandle};
use actix_web::http::StatusCode;
use actix_web::http::header::{HeaderName, HeaderValue, TRANSFER_ENCODING};
use actix_web::web::{self, Payload};
use actix_web::{App, HttpRequest, HttpResponse, HttpServer, guard};
use anyhow::Context as _;
use tracing::Instrument as _;

use super::call::Call;
use super::problem::Problem;
use super::route::{Method, Route};
use super::state::Shared;
use super::turn::OneTurnMore;
use crate::service::Database;
use crate::service::receiving::Limits;
use crate::service::tokens::{self, Admission, Gate, Principal, Role};
use crate::service::{estimates, uploads};

const REQUEST_ID: HeaderName = HeaderName::from_static("x-request-id");

/// How long requests under way may take to end when the server stops.
const GRACE_SECONDS: u64 = 20;

/// How long a body that was answered before it had come is read on and thrown away: many clients send all of
/// it before they look at the answer.
const UNREAD: Duration = Duration::from_secs(30);

/// How often old refused uploads and old estimates are looked for.
const SWEEP: Duration = Duration::from_secs(3600);

/// How to serve.
#[derive(Clone, Copy, Debug)]
pub struct Options {
    /// Address to listen on.
    pub listen: SocketAddr,
    /// Threads that answer requests.
    pub workers: usize,
    /// Bounds on what one upload may cost.
    pub limits: Limits,
    /// Days that refused uploads are kept.
    pub refused_days: u32,
    /// Days that estimates are kept.
    pub estimate_days: u32,
}

/// A bound server, not yet running.
pub struct Application {
    server: Server,
    shared: Arc<Shared>,
    address: SocketAddr,
    refused_days: u32,
}

impl Application {
    /// Binds the address and prepares the server on an open database.
    ///
    /// # Errors
    /// The address is taken; or it is not a loopback address and no token is valid.
    pub async fn build(options: Options, database: Database) -> anyhow::Result<Self> {
        let existing = {
            let mut connection = database.connection().await?;
            tokens::existing(&mut connection)
                .await
                .map_err(|fault| anyhow::anyhow!("the tokens cannot be read: {fault:?}"))?
        };
        let loopback = options.listen.ip().is_loopback();
        if !existing.valid && !loopback {
            anyhow::bail!(
                "{} can be reached from other machines and no token is valid; make one first: realterms \
                 token create --name NAME --role administer",
                options.listen
            );
        }
        let listener = TcpListener::bind(options.listen).with_context(|| {
            format!(
                "cannot listen on {} (setting REALTERMS_LISTEN)",
                options.listen
            )
        })?;
        let address = listener.local_addr()?;
        if !existing.ever {
            tracing::warn!(address = %address, "no token was ever made: everybody on this machine may do everything");
        } else if !existing.valid {
            tracing::warn!(
                address = %address,
                "every token was revoked and nobody is let in: make one with realterms token create"
            );
        }
        let shared = Arc::new(Shared {
            database,
            gate: Gate::new(loopback),
            limits: options.limits,
            estimate_days: options.estimate_days,
        });
        let for_workers = Arc::clone(&shared);
        let server = HttpServer::new(move || {
            let shared = Arc::clone(&for_workers);
            App::new()
                .app_data(web::Data::from(Arc::clone(&shared)))
                .configure(|config| mount(config, &super::ROUTES))
                .default_service(web::route().to(no_such_path))
        })
        .workers(options.workers)
        .shutdown_timeout(GRACE_SECONDS)
        .client_disconnect_timeout(UNREAD)
        .disable_signals()
        .listen(listener)?
        .run();
        Ok(Self {
            server,
            shared,
            address,
            refused_days: options.refused_days,
        })
    }

    /// The address it listens on.
    #[must_use]
    pub fn address(&self) -> SocketAddr {
        self.address
    }

    /// A handle that stops it.
    #[must_use]
    pub fn handle(&self) -> ServerHandle {
        self.server.handle()
    }

    /// Serves until it is stopped; requests under way end first.
    ///
    /// # Errors
    /// The server failed.
    pub async fn run_until_stopped(self) -> anyhow::Result<()> {
        let shared = Arc::clone(&self.shared);
        let days = self.refused_days;
        let sweeper = tokio::spawn(async move {
            let mut ticks = tokio::time::interval(SWEEP);
            loop {
                ticks.tick().await;
                match uploads::erase_old_refused(&shared.database, days).await {
                    Ok(0) => {}
                    Ok(count) => tracing::info!(uploads = count, "erased old refused uploads"),
                    Err(fault) => {
                        tracing::warn!(error = %fault, "old refused uploads stay for now")
                    }
                }
                match estimates::erase_old(&shared.database, shared.estimate_days).await {
                    Ok(0) => {}
                    Ok(count) => tracing::info!(estimates = count, "erased old estimates"),
                    Err(fault) => tracing::warn!(error = %fault, "old estimates stay for now"),
                }
            }
        });
        let outcome = self.server.await;
        sweeper.abort();
        let _ = sweeper.await;
        // Workers that are still ending may hold the database a moment longer.
        self.shared.database.disconnect().await;
        if let Ok(shared) = Arc::try_unwrap(self.shared) {
            shared.database.close().await;
        }
        Ok(outcome?)
    }
}

/// Mounts one resource a path, with an answer to methods that it does not have.
fn mount(config: &mut web::ServiceConfig, routes: &'static [Route]) {
    let mut by_path: BTreeMap<&str, Vec<&'static Route>> = BTreeMap::new();
    for route in routes {
        by_path.entry(route.path).or_default().push(route);
    }
    for (path, routes) in by_path {
        let mut resource = web::resource(path);
        let mut allowed = Vec::new();
        for route in routes {
            allowed.push(route.method.as_str());
            let guard = match route.method {
                Method::Get => {
                    allowed.push("HEAD");
                    guard::Any(guard::Get()).or(guard::Head())
                }
                Method::Post => guard::Any(guard::Post()),
                Method::Put => guard::Any(guard::Put()),
                Method::Delete => guard::Any(guard::Delete()),
            };
            resource = resource.route(web::route().guard(guard).to(
                move |request: HttpRequest, payload: Payload, shared: web::Data<Shared>| {
                    dispatch(route, request, payload, shared.into_inner())
                },
            ));
        }
        let allow = allowed.join(", ");
        config.service(
            resource.default_service(web::route().to(move |request: HttpRequest| {
                let allow = allow.clone();
                async move {
                    let problem = Problem::new(
                        StatusCode::METHOD_NOT_ALLOWED,
                        "method_not_allowed",
                        format!(
                            "{} is not for {}; allowed: {allow}",
                            request.method(),
                            request.path()
                        ),
                    )
                    .with_header("Allow", allow);
                    finish(
                        &request,
                        &request_id(&request),
                        Instant::now(),
                        Err(problem),
                    )
                }
            })),
        );
    }
}

async fn no_such_path(request: HttpRequest) -> HttpResponse {
    let problem = Problem::new(
        StatusCode::NOT_FOUND,
        "not_found",
        format!(
            "there is nothing at {}; /openapi.json lists what there is",
            request.path()
        ),
    );
    finish(
        &request,
        &request_id(&request),
        Instant::now(),
        Err(problem),
    )
}

/// Runs one operation: who calls, may they, are the parameters known, then the handler.
async fn dispatch(
    route: &'static Route,
    request: HttpRequest,
    payload: Payload,
    shared: Arc<Shared>,
) -> HttpResponse {
    let started = Instant::now();
    let request_id = request_id(&request);
    let span = tracing::info_span!("request", request.id = %request_id, operation = route.name);
    let outcome = async {
        let principal = admit(route, &request, &shared).await?;
        let call = Call::new(shared, route, request.clone(), payload, principal)?;
        (route.handler)(call).await
    }
    .instrument(span)
    .await;
    finish(&request, &request_id, started, outcome)
}

async fn admit(
    route: &Route,
    request: &HttpRequest,
    shared: &Shared,
) -> Result<Principal, Problem> {
    let Some(role) = route.role else {
        return Ok(Principal {
            name: "anybody".to_owned(),
            role: Role::Read,
        });
    };
    let bearer = request
        .headers()
        .get("Authorization")
        .and_then(|v| v.to_str().ok())
        .and_then(|v| v.split_once(' '))
        .filter(|(scheme, _)| scheme.eq_ignore_ascii_case("Bearer"))
        .map(|(_, token)| token.trim());
    let unauthorised = |code: &'static str, detail: &str| {
        Err(Problem::new(StatusCode::UNAUTHORIZED, code, detail)
            .with_header("WWW-Authenticate", "Bearer realm=\"realterms\""))
    };
    match shared.gate.admit(&shared.database, bearer).await? {
        Admission::Admitted(principal) if principal.role >= role => {
            if bearer.is_none() {
                refuse_foreign_page(request)?;
            }
            Ok(principal)
        }
        Admission::Admitted(principal) => Err(Problem::new(
            StatusCode::FORBIDDEN,
            "role_too_low",
            format!(
                "this needs the role {}, and the token '{}' has {}",
                role.as_str(),
                principal.name,
                principal.role.as_str()
            ),
        )),
        Admission::TokenMissing => unauthorised(
            "token_missing",
            "a token is needed: send the header Authorization: Bearer TOKEN",
        ),
        Admission::TokenUnknown => {
            unauthorised("token_unknown", "the token is not known or was revoked")
        }
    }
}

/// Without tokens nothing but the address guards the service, and a browser on the same machine reaches
/// it: a page from elsewhere may send a form here, and its own name may be made to mean this address.
/// Browsers state the page's origin, which then differs from the host asked for, or ask for a host that
/// is no loopback name.
fn refuse_foreign_page(request: &HttpRequest) -> Result<(), Problem> {
    let header = |name: &str| request.headers().get(name).and_then(|v| v.to_str().ok());
    let Some(host) = header("Host") else {
        return Ok(());
    };
    let name = host.rsplit_once(':').map_or(host, |(name, port)| {
        if port.bytes().all(|b| b.is_ascii_digit()) {
            name
        } else {
            host
        }
    });
    let local = name.eq_ignore_ascii_case("localhost")
        || name
            .trim_matches(['[', ']'])
            .parse::<std::net::IpAddr>()
            .is_ok_and(|ip| ip.is_loopback());
    let same = header("Origin")
        .is_none_or(|origin| origin.split_once("://").is_some_and(|(_, at)| at == host));
    if local && same {
        return Ok(());
    }
    let (what, found) = if same {
        ("asks for the host", host)
    } else {
        ("comes from a page of", header("Origin").unwrap_or_default())
    };
    Err(Problem::new(
        StatusCode::FORBIDDEN,
        "foreign_page",
        format!(
            "the request {what} {found}; without a token only programs of this machine are answered: \
             make one with realterms token create and send it"
        ),
    ))
}

/// Numbers, logs and completes an answer.
fn finish(
    request: &HttpRequest,
    request_id: &str,
    started: Instant,
    outcome: Result<HttpResponse, Problem>,
) -> HttpResponse {
    let duration_ms = started.elapsed().as_secs_f64() * 1000.0;
    let (method, path) = (request.method().as_str(), request.path());
    let mut response = match outcome {
        Ok(response) => {
            let status = response.status().as_u16();
            tracing::info!(request.id = %request_id, method, path, status, duration_ms, "answered");
            response
        }
        Err(problem) => {
            let (status, code) = (problem.status.as_u16(), problem.code);
            match problem.internal_reason() {
                Some(reason) => tracing::error!(
                    request.id = %request_id, method, path, status, code, duration_ms, reason, "failed"
                ),
                None => tracing::info!(
                    request.id = %request_id, method, path, status, code, duration_ms,
                    detail = problem.detail, "refused"
                ),
            }
            problem.answer(request_id)
        }
    };
    if let Ok(value) = HeaderValue::from_str(request_id) {
        response.headers_mut().insert(REQUEST_ID, value);
    }
    if request.headers().contains_key(TRANSFER_ENCODING) {
        response = response.map_body(|_, body| BoxBody::new(OneTurnMore::new(body)));
    }
    response
}

/// The client's number for the request if it is a sane one, else a new one.
fn request_id(request: &HttpRequest) -> String {
    request
        .headers()
        .get(&REQUEST_ID)
        .and_then(|v| v.to_str().ok())
        .filter(|id| {
            (1..=64).contains(&id.len())
                && id
                    .bytes()
                    .all(|b| b.is_ascii_alphanumeric() || b == b'-' || b == b'_')
        })
        .map_or_else(|| uuid::Uuid::now_v7().to_string(), str::to_owned)
}
