-- Estimations without a study: the request as it came, the vintages that it read, what was found, and the
-- rows that it was computed from. They are erased when they are older than the retention allows.
CREATE TABLE estimate (
    id bigint GENERATED ALWAYS AS IDENTITY,
    method text NOT NULL,
    method_version text NOT NULL,
    author text NOT NULL,
    recorded timestamptz NOT NULL DEFAULT clock_timestamp(),
    request text NOT NULL,
    pins json NOT NULL,
    report json NOT NULL,
    sample json NOT NULL,
    CONSTRAINT estimate_pk PRIMARY KEY (id)
);
CREATE INDEX estimate_recorded_index ON estimate (recorded);
