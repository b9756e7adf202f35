//! Answers: negotiation, entity tags, coding, pages.

use std::io::Write as _;

use actix_web::HttpResponse;
use actix_web::http::StatusCode;
use actix_web::http::header;
use flate2::Compression;
use flate2::write::GzEncoder;
use serde::Serialize;

use super::call::Call;
use super::problem::Problem;
use super::route::Answer;
use crate::service::Page;

/// Bodies below this are not worth compressing.
const GZIP_FROM: usize = 1400;

/// A representation that a client may get.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Media {
    Json,
    Csv,
    Text,
    Latex,
}

impl Media {
    pub(super) fn as_str(self) -> &'static str {
        match self {
            Self::Json => "application/json",
            Self::Csv => "text/csv",
            Self::Text => "text/plain",
            Self::Latex => "application/x-latex",
        }
    }

    fn content_type(self) -> &'static str {
        match self {
            Self::Json => "application/json",
            Self::Csv => "text/csv; charset=utf-8",
            Self::Text => "text/plain; charset=utf-8",
            Self::Latex => "application/x-latex; charset=utf-8",
        }
    }

    fn short(self) -> &'static str {
        match self {
            Self::Json => "json",
            Self::Csv => "csv",
            Self::Text => "text",
            Self::Latex => "latex",
        }
    }
}

impl Call {
    /// The representation to give: by `format`, else by `Accept`; the first offered where the client
    /// does not care.
    pub(super) fn media(&self, offered: &[Media]) -> Result<Media, Problem> {
        if let Some(name) = self.parameter("format") {
            return offered
                .iter()
                .find(|m| m.short() == name)
                .copied()
                .ok_or_else(|| {
                    Problem::bad_request(format!("there is no format '{name}' here"), vec![])
                });
        }
        let accept = self.header("Accept").unwrap_or_default();
        if accept.trim().is_empty() {
            return Ok(offered[0]);
        }
        let ranges = weighted(accept);
        // The most specific range that covers a type weighs it; of equal weights, a type that is named
        // wins over one that is only covered, then the first offered.
        let weight = |media: Media| {
            ranges
                .iter()
                .filter_map(|(range, weight)| Some((specificity(range, media.as_str())?, *weight)))
                .max_by_key(|(specificity, _)| *specificity)
                .map_or((0.0, 0), |(specificity, weight)| (weight, specificity))
        };
        let mut best = (0.0, 0);
        let mut chosen = None;
        for media in offered {
            let weight = weight(*media);
            if weight > best {
                (best, chosen) = (weight, Some(*media));
            }
        }
        chosen.filter(|_| best.0 > 0.0).ok_or_else(|| {
            let names: Vec<&str> = offered.iter().map(|m| m.as_str()).collect();
            Problem::new(
                StatusCode::NOT_ACCEPTABLE,
                "not_acceptable",
                format!(
                    "this can be had as {}, none of which Accept allows",
                    names.join(", ")
                ),
            )
        })
    }

    fn accepts_gzip(&self) -> bool {
        self.header("Accept-Encoding").is_some_and(|codings| {
            let mut codings = weighted(codings).into_iter();
            codings.any(|(coding, weight)| coding == "gzip" && weight > 0.0)
        })
    }

    /// A strong entity tag for a version of what is read, in this representation; the coding is part
    /// of it.
    pub(super) fn tag(&self, version: &str, media: Media) -> String {
        let coding = if self.accepts_gzip() { "-gzip" } else { "" };
        format!("\"{version}-{}{coding}\"", media.short())
    }

    /// Whether the client has this version already.
    pub(super) fn has(&self, tag: &str) -> bool {
        self.header("If-None-Match").is_some_and(|tags| {
            tags.split(',')
                .map(str::trim)
                .any(|t| t == "*" || t.trim_start_matches("W/") == tag)
        })
    }

    /// The answer to a client that has this version.
    pub(super) fn not_modified(&self, tag: &str) -> HttpResponse {
        HttpResponse::NotModified()
            .insert_header((header::ETAG, tag))
            .insert_header((header::VARY, "Accept, Accept-Encoding, Authorization"))
            .finish()
    }

    /// A body, compressed if it pays and the client agrees.
    pub(super) fn body(
        &self,
        status: StatusCode,
        media: Media,
        tag: Option<&str>,
        body: Vec<u8>,
    ) -> HttpResponse {
        let mut response = HttpResponse::build(status);
        response
            .content_type(media.content_type())
            .insert_header((header::VARY, "Accept, Accept-Encoding, Authorization"));
        if let Some(tag) = tag {
            response.insert_header((header::ETAG, tag));
        }
        if body.len() >= GZIP_FROM && self.accepts_gzip() {
            let mut encoder = GzEncoder::new(Vec::new(), Compression::fast());
            if encoder.write_all(&body).is_ok()
                && let Ok(compressed) = encoder.finish()
            {
                response.insert_header((header::CONTENT_ENCODING, "gzip"));
                return response.body(compressed);
            }
        }
        response.body(body)
    }

    /// A JSON body.
    pub(super) fn json<T: Serialize>(&self, status: StatusCode, value: &T) -> Answer {
        Ok(self.body(status, Media::Json, None, to_json(value)?))
    }

    /// A list: the items, and the next page in `Link`.
    pub(super) fn page<T: Serialize>(&self, page: &Page<T>) -> Answer {
        let mut response = self.json(StatusCode::OK, &page.items)?;
        if let Some(next) = &page.next {
            let mut pairs: Vec<String> = self
                .parameters()
                .filter(|(name, _)| *name != "after")
                .map(|(name, value)| format!("{name}={}", percent_encoded(value)))
                .collect();
            pairs.push(format!("after={}", percent_encoded(next)));
            let link = format!(
                "<{}?{}>; rel=\"next\"",
                self.request.path(),
                pairs.join("&")
            );
            if let Ok(value) = header::HeaderValue::from_str(&link) {
                response.headers_mut().insert(header::LINK, value);
            }
        }
        Ok(response)
    }
}

/// Serializes an answer, with a line end for terminals.
pub(super) fn to_json<T: Serialize>(value: &T) -> Result<Vec<u8>, Problem> {
    // Room for a series of some hundred observations, which is then not moved as it grows.
    let mut body = Vec::with_capacity(32 * 1024);
    serde_json::to_writer(&mut body, value).map_err(|e| Problem::internal(e.to_string()))?;
    body.push(b'\n');
    Ok(body)
}

/// The elements of a header such as `Accept`, in lower case, with their weights `q`.
fn weighted(header: &str) -> Vec<(String, f32)> {
    let header = header.to_ascii_lowercase();
    let element = |text: &str| {
        let mut parts = text.split(';').map(str::trim);
        let name = parts.next().unwrap_or_default().to_owned();
        let weight = parts.find_map(|p| p.strip_prefix("q="));
        (name, weight.and_then(|q| q.parse().ok()).unwrap_or(1.0))
    };
    header.split(',').map(element).collect()
}

/// How closely a media range names a media type that it covers: 2 by name, 1 by kind, 0 as anything.
fn specificity(range: &str, media: &str) -> Option<u8> {
    if range == media {
        return Some(2);
    }
    match range.strip_suffix("/*")? {
        "*" => Some(0),
        kind => media.starts_with(&format!("{kind}/")).then_some(1),
    }
}

fn percent_encoded(text: &str) -> String {
    text.bytes()
        .map(|b| match b {
            b'A'..=b'Z' | b'a'..=b'z' | b'0'..=b'9' | b'-' | b'_' | b'.' | b'~' => {
                char::from(b).to_string()
            }
            b => format!("%{b:02X}"),
        })
        .collect()
}

/// Sets `Location`.
pub(super) fn location(response: &mut HttpResponse, path: &str) {
    if let Ok(value) = header::HeaderValue::from_str(path) {
        response.headers_mut().insert(header::LOCATION, value);
    }
}
