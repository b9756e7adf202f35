-- Everything of ours lives in one schema, so that a shared PostgreSQL keeps it apart and a dump
-- takes it whole. The program makes the schema first: the table of migrations lives in it too.
CREATE SCHEMA IF NOT EXISTS realterms;
COMMENT ON SCHEMA realterms IS 'Realterms: raw files, series and their vintages, documents, results';
