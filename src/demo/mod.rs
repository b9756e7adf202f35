//! The demonstration: invented areas whose raw files travel through the HTTP API.
