//! Routes by resource, extractors, problem details, authorisation, the OpenAPI document.
