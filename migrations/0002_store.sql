-- Tokens, currencies, uploads, series with their segments and vintages, documents and runs.
-- Conventions: every constraint is named; SQL within PostgreSQL 14; nothing is updated in place
-- except the state and report of an upload and the revocation of a token.

CREATE TABLE token (
    id bigint GENERATED ALWAYS AS IDENTITY,
    name text NOT NULL,
    role text NOT NULL,
    hash bytea NOT NULL,
    created timestamptz NOT NULL DEFAULT clock_timestamp(),
    revoked timestamptz,
    CONSTRAINT token_pk PRIMARY KEY (id),
    CONSTRAINT token_hash_unique UNIQUE (hash),
    CONSTRAINT token_role_known CHECK (role IN ('read', 'contribute', 'administer'))
);
CREATE UNIQUE INDEX token_name_unique ON token (name) WHERE revoked IS NULL;

CREATE TABLE currency (
    code text NOT NULL,
    name text NOT NULL,
    areas text[] NOT NULL,
    recorded timestamptz NOT NULL DEFAULT clock_timestamp(),
    CONSTRAINT currency_pk PRIMARY KEY (code),
    CONSTRAINT currency_code_form CHECK (code ~ '^[A-Z]{3}$')
);

-- One row a committed transaction that touched series; `revision` is drawn under one advisory lock
-- that is held to the commit, so that no reader ever sees a revision appear below one it knows.
CREATE TABLE change (
    revision bigint NOT NULL,
    recorded timestamptz NOT NULL,
    action text NOT NULL,
    upload_id bigint,
    run_id bigint,
    author text NOT NULL,
    CONSTRAINT change_pk PRIMARY KEY (revision),
    CONSTRAINT change_action_known CHECK (action IN ('land', 'accept', 'withdraw', 'run'))
);

CREATE TABLE upload (
    id bigint GENERATED ALWAYS AS IDENTITY,
    kind text NOT NULL,
    state text NOT NULL,
    sha256 bytea NOT NULL,
    byte_count bigint NOT NULL,
    compression text NOT NULL,
    parameters jsonb NOT NULL,
    released date NOT NULL,
    title text NOT NULL,
    publisher text NOT NULL,
    note text NOT NULL,
    author text NOT NULL,
    recorded timestamptz NOT NULL,
    landed_revision bigint,
    withdrawn_revision bigint,
    report json NOT NULL,
    CONSTRAINT upload_pk PRIMARY KEY (id),
    CONSTRAINT upload_state_known
        CHECK (state IN ('receiving', 'landed', 'held', 'refused', 'withdrawn'))
);
CREATE INDEX upload_sha256_index ON upload (sha256);

-- Raw bytes as they came, each part compressed with zstd on its own.
CREATE TABLE upload_part (
    upload_id bigint NOT NULL,
    number integer NOT NULL,
    bytes bytea NOT NULL,
    CONSTRAINT upload_part_pk PRIMARY KEY (upload_id, number),
    CONSTRAINT upload_part_upload_fk FOREIGN KEY (upload_id) REFERENCES upload (id) ON DELETE CASCADE
);
ALTER TABLE upload_part ALTER COLUMN bytes SET STORAGE EXTERNAL;

CREATE TABLE upload_reject (
    upload_id bigint NOT NULL,
    number integer NOT NULL,
    reject jsonb NOT NULL,
    CONSTRAINT upload_reject_pk PRIMARY KEY (upload_id, number),
    CONSTRAINT upload_reject_upload_fk FOREIGN KEY (upload_id) REFERENCES upload (id) ON DELETE CASCADE
);

-- Identity. '' stands for "all", or for the area's own money in `currency`.
CREATE TABLE series (
    id bigint GENERATED ALWAYS AS IDENTITY,
    frequency text NOT NULL,
    area text NOT NULL,
    measure text NOT NULL,
    partner text NOT NULL,
    product text NOT NULL,
    currency text NOT NULL,
    source text NOT NULL,
    adjustment text NOT NULL,
    CONSTRAINT series_pk PRIMARY KEY (id),
    -- The only index on places of the key: beside a shorter one, the planner, which knows nothing yet of
    -- rows that the same transaction wrote, would take that and filter all series of an area.
    CONSTRAINT series_key_unique
        UNIQUE (area, measure, frequency, partner, product, currency, source, adjustment),
    CONSTRAINT series_frequency_known CHECK (frequency IN ('A', 'S', 'Q', 'M', 'W', 'D'))
);

-- A stretch of a series with one unit (price basis, reference period, own money).
CREATE TABLE segment (
    id bigint GENERATED ALWAYS AS IDENTITY,
    series_id bigint NOT NULL,
    number integer NOT NULL,
    unit jsonb NOT NULL,
    CONSTRAINT segment_pk PRIMARY KEY (id),
    CONSTRAINT segment_series_fk FOREIGN KEY (series_id) REFERENCES series (id),
    CONSTRAINT segment_number_unique UNIQUE (series_id, number),
    CONSTRAINT segment_unit_unique UNIQUE (series_id, unit)
);

-- What one upload says about one segment; replayed when an earlier or later one is withdrawn.
-- `lines` and `provenance` are run-length lists, coded by the series room.
CREATE TABLE fragment (
    upload_id bigint NOT NULL,
    segment_id bigint NOT NULL,
    start_period integer NOT NULL,
    "values" double precision[] NOT NULL,
    status bytea NOT NULL,
    lines bytea NOT NULL,
    CONSTRAINT fragment_pk PRIMARY KEY (segment_id, upload_id),
    CONSTRAINT fragment_upload_fk FOREIGN KEY (upload_id) REFERENCES upload (id),
    CONSTRAINT fragment_segment_fk FOREIGN KEY (segment_id) REFERENCES segment (id)
);
CREATE INDEX fragment_upload_index ON fragment (upload_id, segment_id);

-- The state of a segment as released on a date and known from a revision on.
CREATE TABLE vintage (
    segment_id bigint NOT NULL,
    released date NOT NULL,
    revision bigint NOT NULL,
    start_period integer NOT NULL,
    observation_count integer NOT NULL,
    new_count integer NOT NULL,
    revised_count integer NOT NULL,
    emptied_count integer NOT NULL,
    "values" double precision[] NOT NULL,
    status bytea NOT NULL,
    provenance bytea NOT NULL,
    CONSTRAINT vintage_pk PRIMARY KEY (segment_id, released, revision),
    CONSTRAINT vintage_segment_fk FOREIGN KEY (segment_id) REFERENCES segment (id),
    CONSTRAINT vintage_change_fk FOREIGN KEY (revision) REFERENCES change (revision)
        DEFERRABLE INITIALLY DEFERRED,
    CONSTRAINT vintage_lengths_agree
        CHECK (cardinality("values") = length(status))
);
CREATE INDEX vintage_revision_index ON vintage (revision);

-- Preparations and studies: text with versions; the newest version is current.
CREATE TABLE document (
    kind text NOT NULL,
    name text NOT NULL,
    version integer NOT NULL,
    body text NOT NULL,
    deleted boolean NOT NULL DEFAULT false,
    author text NOT NULL,
    recorded timestamptz NOT NULL DEFAULT clock_timestamp(),
    CONSTRAINT document_pk PRIMARY KEY (kind, name, version),
    CONSTRAINT document_kind_known CHECK (kind IN ('preparation', 'study'))
);

-- A run pins the document's version and the vintage of every input.
CREATE TABLE run (
    id bigint GENERATED ALWAYS AS IDENTITY,
    kind text NOT NULL,
    name text NOT NULL,
    version integer NOT NULL,
    method_version text NOT NULL,
    author text NOT NULL,
    recorded timestamptz NOT NULL DEFAULT clock_timestamp(),
    pins json NOT NULL,
    result json NOT NULL,
    CONSTRAINT run_pk PRIMARY KEY (id),
    CONSTRAINT run_document_fk FOREIGN KEY (kind, name, version) REFERENCES document (kind, name, version)
);
CREATE INDEX run_document_index ON run (kind, name, id);

ALTER TABLE change
    ADD CONSTRAINT change_upload_fk FOREIGN KEY (upload_id) REFERENCES upload (id),
    ADD CONSTRAINT change_run_fk FOREIGN KEY (run_id) REFERENCES run (id);

-- The text of a period from its frequency and ordinal, as the API prints it.
CREATE FUNCTION period_text(frequency text, ordinal integer) RETURNS text
    LANGUAGE sql IMMUTABLE STRICT PARALLEL SAFE
AS $$
    SELECT CASE frequency
        WHEN 'A' THEN lpad(ordinal::text, 4, '0')
        WHEN 'S' THEN lpad((ordinal / 2)::text, 4, '0') || '-S' || (ordinal % 2 + 1)
        WHEN 'Q' THEN lpad((ordinal / 4)::text, 4, '0') || '-Q' || (ordinal % 4 + 1)
        WHEN 'M' THEN lpad((ordinal / 12)::text, 4, '0') || '-' || lpad((ordinal % 12 + 1)::text, 2, '0')
        WHEN 'W' THEN to_char(date '0001-01-01' + ordinal * 7, 'IYYY"-W"IW')
        WHEN 'D' THEN to_char(date '0001-01-01' + ordinal - 1, 'YYYY-MM-DD')
    END
$$;

-- Current observations, one row each, for people with an SQL prompt. Missing values are NULL.
CREATE VIEW observation AS
SELECT s.frequency, s.area, s.measure, s.partner, s.product, s.currency, s.source, s.adjustment,
    g.number AS segment, v.released, v.revision,
    period_text(s.frequency, v.start_period + o.position::integer - 1) AS period,
    CASE WHEN o.value = 'NaN' THEN NULL ELSE o.value END AS value,
    chr(get_byte(v.status, o.position::integer - 1)) AS status
FROM series s
JOIN segment g ON g.series_id = s.id
JOIN LATERAL (
    SELECT * FROM vintage w
    WHERE w.segment_id = g.id
    ORDER BY w.released DESC, w.revision DESC
    LIMIT 1
) v ON true
CROSS JOIN LATERAL unnest(v."values") WITH ORDINALITY AS o (value, position)
WHERE chr(get_byte(v.status, o.position::integer - 1)) <> '-';
