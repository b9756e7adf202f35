//! A client of the HTTP API, as any other program could be.

use anyhow::{Context, bail};
use reqwest::header::{ACCEPT, CONTENT_TYPE};
use reqwest::{Method, StatusCode};
use serde_json::Value;

/// Sends requests to one service.
pub(super) struct Client {
    http: reqwest::Client,
    base: String,
}

impl Client {
    /// A client of the service at an address such as `http://127.0.0.1:8640`. No proxy of the
    /// environment comes between: the service is on this machine.
    pub(super) fn new(base: &str) -> anyhow::Result<Self> {
        Ok(Self {
            http: reqwest::Client::builder().no_proxy().build()?,
            base: base.to_owned(),
        })
    }

    /// Sends a JSON document and reads JSON.
    pub(super) async fn json(
        &self,
        method: Method,
        path: &str,
        body: Option<&str>,
    ) -> anyhow::Result<Value> {
        let mut request = self.http.request(method.clone(), self.base.clone() + path);
        if let Some(body) = body {
            request = request
                .header(CONTENT_TYPE, "application/json")
                .body(body.to_owned());
        }
        let text = answer(request, &method, path).await?;
        if text.is_empty() {
            return Ok(Value::Null);
        }
        serde_json::from_str(&text).with_context(|| format!("{method} {path}: not JSON"))
    }

    /// Sends a file of raw data.
    pub(super) async fn upload(&self, query: &[(&str, &str)], csv: &str) -> anyhow::Result<Value> {
        let path = "/v1/uploads";
        let request = self
            .http
            .post(self.base.clone() + path)
            .query(query)
            .header(CONTENT_TYPE, "text/csv")
            .body(csv.to_owned());
        let text = answer(request, &Method::POST, path).await?;
        serde_json::from_str(&text).context("POST /v1/uploads: not JSON")
    }

    /// Reads a resource as plain text.
    pub(super) async fn text(&self, path: &str) -> anyhow::Result<String> {
        let request = self
            .http
            .get(self.base.clone() + path)
            .header(ACCEPT, "text/plain");
        answer(request, &Method::GET, path).await
    }
}

/// The body of a success; a problem becomes an error that carries its text.
async fn answer(
    request: reqwest::RequestBuilder,
    method: &Method,
    path: &str,
) -> anyhow::Result<String> {
    let response = request
        .send()
        .await
        .with_context(|| format!("{method} {path}"))?;
    let status: StatusCode = response.status();
    let text = response
        .text()
        .await
        .with_context(|| format!("{method} {path}"))?;
    if !status.is_success() {
        bail!("{method} {path} was answered by {status}: {text}");
    }
    Ok(text)
}
