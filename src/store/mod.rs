//! Everything that touches Postgres; the only user of sqlx.
