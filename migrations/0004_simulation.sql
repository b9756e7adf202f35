-- Simulated null distributions, so that critical values are computed once. `settings` says everything
-- that determines them (what is simulated, its size, draws, seed); rows are never updated.

CREATE TABLE simulation (
    settings text NOT NULL,
    position integer NOT NULL,
    draws bigint NOT NULL,
    quantiles double precision[] NOT NULL,
    CONSTRAINT simulation_pk PRIMARY KEY (settings, position),
    CONSTRAINT simulation_position_counts CHECK (position >= 0)
);
