//! Routes as data: one table that drives the router, the checks of parameters and roles, the answer
//! to wrong methods, and the `OpenAPI` document.

use std::collections::BTreeMap;
use std::future::Future;
use std::pin::Pin;

use actix_web::HttpResponse;
use utoipa::ToSchema;
use utoipa::openapi::{RefOr, Schema};

use super::call::Call;
use super::problem::{Problem, ProblemView};
use crate::finding::Finding;
use crate::service::tokens::Role;
use crate::time::Date;

/// What a handler gives.
pub(super) type Answer = Result<HttpResponse, Problem>;

/// A handler with its future boxed.
pub(super) type Handler = fn(Call) -> Pin<Box<dyn Future<Output = Answer>>>;

/// Component schemas by name, as they are collected.
pub(super) type Schemas = BTreeMap<String, RefOr<Schema>>;

/// A function that adds a type to the components and gives its reference.
pub(super) type SchemaOf = fn(&mut Schemas) -> serde_json::Value;

/// Adds `T` and what it refers to, and gives a reference to it.
pub(super) fn schema<T: ToSchema>(schemas: &mut Schemas) -> serde_json::Value {
    let mut list = vec![(T::name().into_owned(), T::schema())];
    T::schemas(&mut list);
    for (name, schema) in list {
        let known = schemas.get(&name).is_none_or(|other| *other == schema);
        debug_assert!(known, "two types are called {name}");
        schemas.insert(name, schema);
    }
    serde_json::json!({ "$ref": format!("#/components/schemas/{}", T::name()) })
}

/// A list of `T`. It stands in its place, since all lists have the same name.
fn array<T: ToSchema>(schemas: &mut Schemas) -> serde_json::Value {
    serde_json::json!({ "type": "array", "items": schema::<T>(schemas) })
}

/// Plain text.
pub(super) fn text(_: &mut Schemas) -> serde_json::Value {
    serde_json::json!({ "type": "string" })
}

/// Any JSON object: a document of its own language.
pub(super) fn object(_: &mut Schemas) -> serde_json::Value {
    serde_json::json!({ "type": "object" })
}

/// What a query parameter may hold.
#[derive(Clone, Debug)]
pub(super) enum Form {
    Text,
    Date,
    Flag,
    Integer { least: i64, most: i64 },
    OneOf(Vec<&'static str>),
}

/// A query parameter.
#[derive(Clone, Debug)]
pub(super) struct Parameter {
    pub(super) name: &'static str,
    pub(super) required: bool,
    pub(super) form: Form,
    pub(super) description: &'static str,
}

/// An optional parameter.
pub(super) fn optional(name: &'static str, form: Form, description: &'static str) -> Parameter {
    Parameter {
        name,
        required: false,
        form,
        description,
    }
}

impl Parameter {
    pub(super) fn required(mut self) -> Self {
        self.required = true;
        self
    }

    /// What is wrong with a value, if anything.
    pub(super) fn fault(&self, value: &str) -> Option<Finding> {
        let expected = match &self.form {
            Form::Text => return None,
            Form::Date => {
                if value.parse::<Date>().is_ok() {
                    return None;
                }
                "a date such as 2024-06-30".to_owned()
            }
            Form::Flag => {
                if matches!(value, "true" | "false") {
                    return None;
                }
                "true or false".to_owned()
            }
            Form::Integer { least, most } => {
                if value
                    .parse::<i64>()
                    .is_ok_and(|n| (*least..=*most).contains(&n))
                {
                    return None;
                }
                format!("a whole number from {least} to {most}")
            }
            Form::OneOf(values) => {
                if values.contains(&value) {
                    return None;
                }
                values.join(", ")
            }
        };
        Some(
            Finding::error(
                "bad_parameter",
                format!("'{value}' is no value for the parameter '{}'", self.name),
            )
            .at_parameter(self.name)
            .found(value)
            .expected(expected),
        )
    }

    fn schema(&self) -> serde_json::Value {
        match &self.form {
            Form::Text => serde_json::json!({ "type": "string" }),
            Form::Date => serde_json::json!({ "type": "string", "format": "date" }),
            Form::Flag => serde_json::json!({ "type": "boolean" }),
            Form::Integer { least, most } => {
                serde_json::json!({ "type": "integer", "minimum": least, "maximum": most })
            }
            Form::OneOf(values) => serde_json::json!({ "type": "string", "enum": values }),
        }
    }
}

/// `limit` and `after` of every list.
pub(super) fn paging() -> Vec<Parameter> {
    vec![
        optional(
            "limit",
            Form::Integer {
                least: 1,
                most: 1000,
            },
            "entries a page, 100 unless given",
        ),
        optional(
            "after",
            Form::Text,
            "cursor from the header Link of the page before",
        ),
    ]
}

/// A success that a route may answer with.
#[derive(Clone)]
pub(super) struct Success {
    pub(super) status: u16,
    pub(super) description: &'static str,
    /// Media types with their schemas; none: no body.
    pub(super) content: Vec<(&'static str, SchemaOf)>,
    /// Headers that are always there, beside `X-Request-Id`.
    pub(super) headers: Vec<&'static str>,
}

/// A success with a JSON body of type `T`.
pub(super) fn json<T: ToSchema>(status: u16, description: &'static str) -> Success {
    Success {
        status,
        description,
        content: vec![("application/json", schema::<T>)],
        headers: vec![],
    }
}

/// A success with a JSON list of `T`.
pub(super) fn list<T: ToSchema>(status: u16, description: &'static str) -> Success {
    Success {
        status,
        description,
        content: vec![("application/json", array::<T>)],
        headers: vec![],
    }
}

impl Success {
    pub(super) fn or(mut self, media: &'static str, schema: SchemaOf) -> Self {
        self.content.push((media, schema));
        self
    }

    pub(super) fn header(mut self, name: &'static str) -> Self {
        self.headers.push(name);
        self
    }
}

/// A success without a body.
pub(super) fn empty(status: u16, description: &'static str) -> Success {
    Success {
        status,
        description,
        content: vec![],
        headers: vec![],
    }
}

/// Methods in use. HEAD goes with GET.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Method {
    Get,
    Post,
    Put,
    Delete,
}

impl Method {
    pub(super) fn as_str(self) -> &'static str {
        match self {
            Self::Get => "GET",
            Self::Post => "POST",
            Self::Put => "PUT",
            Self::Delete => "DELETE",
        }
    }
}

/// One operation.
pub(super) struct Route {
    pub(super) method: Method,
    pub(super) path: &'static str,
    pub(super) name: &'static str,
    pub(super) summary: &'static str,
    /// Least role; `None`: open to all.
    pub(super) role: Option<Role>,
    pub(super) parameters: fn() -> Vec<Parameter>,
    /// Request headers with a meaning of their own.
    pub(super) headers: &'static [(&'static str, &'static str)],
    /// Media types of the request body.
    pub(super) body: &'static [(&'static str, SchemaOf)],
    pub(super) successes: fn() -> Vec<Success>,
    /// Statuses of problem answers, beside those that follow from the route itself.
    pub(super) problems: &'static [u16],
    pub(super) handler: Handler,
}

impl Route {
    pub(super) fn parameters(&self) -> Vec<Parameter> {
        (self.parameters)()
    }

    /// Statuses of all problem answers. 400 can always happen, since unknown parameters are refused;
    /// 401, 403 and 503 where a role is asked for, since tokens are in the database and pages from
    /// elsewhere are refused; 408 and 413 where
    /// a body is read.
    fn problem_statuses(&self) -> Vec<u16> {
        let mut statuses = vec![400];
        match self.role {
            None => {}
            Some(_) => statuses.extend([401, 403, 503]),
        }
        if !self.body.is_empty() {
            statuses.extend([408, 413]);
        }
        statuses.extend(self.problems);
        statuses.sort_unstable();
        statuses.dedup();
        statuses
    }

    /// The operation object of this route.
    pub(super) fn operation(&self, schemas: &mut Schemas) -> serde_json::Value {
        let mut parameters: Vec<serde_json::Value> = self
            .path
            .split('/')
            .filter_map(|s| s.strip_prefix('{')?.strip_suffix('}'))
            .map(|name| {
                serde_json::json!({ "name": name, "in": "path", "required": true,
                    "schema": { "type": "string" } })
            })
            .collect();
        parameters.extend(self.parameters().iter().map(|p| {
            serde_json::json!({ "name": p.name, "in": "query", "required": p.required,
                "description": p.description, "schema": p.schema() })
        }));
        parameters.extend(self.headers.iter().map(|(name, description)| {
            serde_json::json!({ "name": name, "in": "header", "required": false,
                "description": description, "schema": { "type": "string" } })
        }));
        let mut responses = serde_json::Map::new();
        for success in (self.successes)() {
            let mut headers = headers_object(&success.headers);
            if self.parameters().iter().any(|p| p.name == "after") {
                headers["Link"] = serde_json::json!({ "required": false,
                    "description": "the next page, as rel=\"next\"; absent on the last",
                    "schema": { "type": "string" } });
            }
            let mut response = serde_json::json!({
                "description": success.description,
                "headers": headers,
            });
            if !success.content.is_empty() {
                response["content"] = content_object(&success.content, schemas);
            }
            responses.insert(success.status.to_string(), response);
        }
        for status in self.problem_statuses() {
            let (description, headers): (&str, &[&str]) = match status {
                400 => ("a parameter, a header or the syntax is wrong", &[]),
                401 => ("no valid token", &["WWW-Authenticate"]),
                403 => (
                    "the token's role is too low, or a page from elsewhere asks without one",
                    &[],
                ),
                404 => ("it does not exist", &[]),
                406 => ("Accept allows none of the media types", &[]),
                408 => ("the body comes too slowly", &[]),
                409 => ("it contradicts what is stored", &[]),
                412 => ("the precondition does not hold", &[]),
                413 => ("the body is too large", &[]),
                415 => ("the body's type or coding is not taken", &[]),
                422 => ("the content is wrong: see errors", &[]),
                503 => (
                    "the database does not answer, or is busy: then Retry-After says how long",
                    &[],
                ),
                _ => ("see the problem's detail and errors", &[]),
            };
            responses.insert(
                status.to_string(),
                serde_json::json!({
                    "description": description,
                    "headers": headers_object(headers),
                    "content": content_object(
                        &[("application/problem+json", schema::<ProblemView>)], schemas),
                }),
            );
        }
        let mut operation = serde_json::json!({
            "operationId": self.name,
            "summary": self.summary,
            "parameters": parameters,
            "responses": responses,
        });
        if let [first, ..] = self.body {
            let mut content = content_object(self.body, schemas);
            content["*/*"] = content[first.0].clone();
            operation["requestBody"] = serde_json::json!({
                "description": "Read alike whatever Content-Type says.",
                "required": true,
                "content": content,
            });
        }
        if let Some(role) = self.role {
            operation["security"] = serde_json::json!([{ "bearer": [] }, {}]);
            operation["description"] =
                serde_json::json!(format!("Role: {} or higher.", role.as_str()));
        }
        operation
    }
}

fn headers_object(names: &[&str]) -> serde_json::Value {
    let header = serde_json::json!({ "required": true, "schema": { "type": "string" } });
    std::iter::once(&"X-Request-Id")
        .chain(names)
        .map(|name| ((*name).to_owned(), header.clone()))
        .collect::<serde_json::Map<_, _>>()
        .into()
}

fn content_object(
    content: &[(&'static str, SchemaOf)],
    schemas: &mut Schemas,
) -> serde_json::Value {
    content
        .iter()
        .map(|(media, schema)| {
            (
                (*media).to_owned(),
                serde_json::json!({ "schema": schema(schemas) }),
            )
        })
        .collect::<serde_json::Map<_, _>>()
        .into()
}
