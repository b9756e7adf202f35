//! The service as tests see it: the same application that `serve` runs, on a port and a database of its
//! own. Every answer is checked against the `OpenAPI` document.

use std::collections::BTreeSet;
use std::io::Read as _;
use std::net::{Ipv4Addr, SocketAddr};
use std::sync::Mutex;

use realterms::config::Settings;
use realterms::http::Application;
use realterms::service::tokens::Role;
use reqwest::Method;
use reqwest::header::HeaderMap;
use serde_json::Value;

use super::contract::{self, Met};
use super::db::TestDb;
use super::wire::Wire;

/// A running service; its database goes with it.
pub(crate) struct TestApp {
    pub(crate) base: String,
    pub(crate) db: TestDb,
    pub(crate) address: SocketAddr,
    /// The parts of the `OpenAPI` document that answers of this service have met.
    pub(crate) met: Mutex<BTreeSet<Met>>,
    client: reqwest::Client,
    server: tokio::task::JoinHandle<anyhow::Result<()>>,
    handle: actix_web::dev::ServerHandle,
    token: Option<String>,
}

/// An answer, its body read.
#[derive(Debug)]
pub(crate) struct Answer {
    pub(crate) status: u16,
    pub(crate) headers: HeaderMap,
    pub(crate) bytes: Vec<u8>,
}

impl Answer {
    /// Reads a response to its end.
    pub(crate) async fn of(response: reqwest::Response) -> Self {
        Self {
            status: response.status().as_u16(),
            headers: response.headers().clone(),
            bytes: response
                .bytes()
                .await
                .expect("the body comes whole")
                .to_vec(),
        }
    }

    /// The body without its coding.
    pub(crate) fn plain(&self) -> Vec<u8> {
        let Some(coding) = self.header("content-encoding") else {
            return self.bytes.clone();
        };
        assert_eq!(coding, "gzip");
        let mut plain = Vec::new();
        flate2::read::GzDecoder::new(self.bytes.as_slice())
            .read_to_end(&mut plain)
            .expect("the body is gzip");
        plain
    }

    /// The body as text.
    pub(crate) fn text(&self) -> String {
        String::from_utf8(self.plain()).expect("the body is text")
    }

    /// The body as JSON; `null` where it is none.
    pub(crate) fn json(&self) -> Value {
        serde_json::from_slice(&self.plain()).unwrap_or(Value::Null)
    }

    /// A value inside the body, by JSON pointer.
    pub(crate) fn at(&self, pointer: &str) -> Value {
        self.json().pointer(pointer).cloned().unwrap_or(Value::Null)
    }

    /// The one error of a problem.
    #[track_caller]
    pub(crate) fn error(&self) -> Value {
        let errors = self.at("/errors");
        let errors = errors.as_array().expect("a list");
        assert_eq!(errors.len(), 1, "{errors:?}");
        errors[0].clone()
    }

    /// A header as text.
    pub(crate) fn header(&self, name: &str) -> Option<&str> {
        self.headers.get(name).and_then(|v| v.to_str().ok())
    }

    /// Fails unless the status is this one, showing the beginning of the body.
    #[track_caller]
    pub(crate) fn expect(self, status: u16) -> Self {
        assert_eq!(
            self.status,
            status,
            "{}",
            String::from_utf8_lossy(&self.bytes[..self.bytes.len().min(2000)])
        );
        self
    }
}

impl TestApp {
    /// Starts the service with shipped settings.
    pub(crate) async fn start() -> Self {
        Self::start_with(|_| {}).await
    }

    /// Starts the service with changed settings.
    pub(crate) async fn start_with(change: impl FnOnce(&mut Settings)) -> Self {
        Self::start_on(TestDb::create(), change).await
    }

    /// Starts the service with changed settings on a database that the test has prepared.
    pub(crate) async fn start_on(db: TestDb, change: impl FnOnce(&mut Settings)) -> Self {
        let mut settings = Settings {
            listen: SocketAddr::from((Ipv4Addr::LOCALHOST, 0)),
            ..Settings::default()
        };
        settings.workers = std::num::NonZeroUsize::new(1);
        change(&mut settings);
        let application = Application::build(settings.serving(), db.open().await)
            .await
            .expect("the service starts");
        let mut address = application.address();
        if address.ip().is_unspecified() {
            address.set_ip(Ipv4Addr::LOCALHOST.into());
        }
        Self {
            base: format!("http://{address}"),
            db,
            address,
            met: Mutex::default(),
            client: reqwest::Client::builder()
                .no_proxy()
                .build()
                .expect("a client starts"),
            handle: application.handle(),
            server: tokio::spawn(application.run_until_stopped()),
            token: None,
        }
    }

    /// Makes a token and uses it from now on.
    pub(crate) async fn token(&mut self, name: &str, role: Role) -> String {
        let secret = self.db.token(name, role).await;
        self.token = Some(secret.clone());
        secret
    }

    /// Uses this token from now on, or none.
    pub(crate) fn use_token(&mut self, token: Option<&str>) {
        self.token = token.map(str::to_owned);
    }

    pub(crate) async fn get(&self, path: &str) -> Answer {
        self.send(Method::GET, path, &[], None).await
    }

    pub(crate) async fn delete(&self, path: &str) -> Answer {
        self.send(Method::DELETE, path, &[], None).await
    }

    pub(crate) async fn post(&self, path: &str, body: impl Into<Vec<u8>>) -> Answer {
        self.send(Method::POST, path, &[], Some(body.into())).await
    }

    /// Puts a JSON document.
    pub(crate) async fn put(&self, path: &str, body: &str) -> Answer {
        let headers = [("Content-Type", "application/json")];
        self.send(Method::PUT, path, &headers, Some(body.into()))
            .await
    }

    /// Sends a raw file: `query` is everything behind `?`.
    pub(crate) async fn upload(&self, query: &str, body: impl Into<Vec<u8>>) -> Answer {
        let path = format!("/v1/uploads?{query}");
        let headers = [("Content-Type", "text/csv")];
        self.send(Method::POST, &path, &headers, Some(body.into()))
            .await
    }

    /// All entries of a list, page by page along its links.
    pub(crate) async fn pages(&self, path: &str) -> Vec<Value> {
        let mut entries = Vec::new();
        let mut next = Some(path.to_owned());
        while let Some(path) = next {
            let page = self.get(&path).await.expect(200);
            let list = page.json();
            let list = list.as_array().expect("a list");
            assert!(!list.is_empty() || entries.is_empty(), "an empty last page");
            entries.extend(list.iter().cloned());
            next = page.header("link").map(|link| {
                let target = link.strip_prefix('<').and_then(|l| l.split_once('>'));
                target.expect("a target").0.to_owned()
            });
        }
        entries
    }

    /// Sends any request and checks request and answer against the `OpenAPI` document.
    pub(crate) async fn send(
        &self,
        method: Method,
        path: &str,
        headers: &[(&str, &str)],
        body: Option<Vec<u8>>,
    ) -> Answer {
        let mut request = self
            .client
            .request(method.clone(), format!("{}{path}", self.base));
        for (name, value) in headers {
            request = request.header(*name, *value);
        }
        if let Some(token) = &self.token {
            request = request.bearer_auth(token);
        }
        let sent = body.clone();
        if let Some(body) = body {
            request = request.body(body);
        }
        let answer = Answer::of(request.send().await.expect("the service answers")).await;
        let met = contract::check(&method, path, headers, sent.as_deref(), &answer);
        self.met.lock().expect("no panic").extend(met);
        answer
    }

    /// Begins a request on a connection of its own, to be written and read by hand: the head goes out.
    pub(crate) async fn wire(
        &self,
        method: Method,
        path: &str,
        headers: &[(&str, &str)],
    ) -> Wire<'_> {
        Wire::open(self, method, path, headers).await
    }

    /// Asks the service to stop; ready when it has.
    pub(crate) fn begin_stop(&self) -> impl Future<Output = ()> + use<> {
        self.handle.stop(true)
    }

    /// Values of a series by period, as the service answers them.
    pub(crate) async fn values(&self, key: &str, query: &str) -> Vec<(String, Option<f64>)> {
        let path = format!("/v1/series/{key}/observations?{query}");
        let answer = self.get(&path).await.expect(200);
        let observations = answer.at("/observations");
        let rows = observations.as_array().expect("a list").iter();
        rows.map(|o| {
            (
                o["period"].as_str().expect("a text").to_owned(),
                o["value"].as_f64(),
            )
        })
        .collect()
    }

    /// Stops the service and waits for its end.
    pub(crate) async fn stop(self) {
        self.handle.stop(true).await;
        self.server.await.expect("no panic").expect("a clean end");
    }
}
