-- Everything of Realterms lives in a schema of its own, so that it can share a database.
CREATE SCHEMA IF NOT EXISTS realterms;
