-- The state visible from a date on may be said by an older release: withdrawing a release leaves what the
-- one before it said. Which segment of a series is current goes by the release that speaks.
ALTER TABLE vintage ADD COLUMN said date;
UPDATE vintage SET said = released;
ALTER TABLE vintage ALTER COLUMN said SET NOT NULL;

CREATE OR REPLACE VIEW observation AS
SELECT s.frequency, s.area, s.measure, s.partner, s.product, s.currency, s.source, s.adjustment,
    g.number AS segment, v.said AS released, v.revision,
    period_text(s.frequency, v.start_period + o.position::integer - 1) AS period,
    CASE WHEN o.value = 'NaN' THEN NULL ELSE o.value END AS value,
    o.status
FROM series s
JOIN segment g ON g.series_id = s.id
JOIN LATERAL (
    SELECT * FROM vintage w
    WHERE w.segment_id = g.id
    ORDER BY w.released DESC, w.revision DESC
    LIMIT 1
) v ON true
CROSS JOIN LATERAL unnest(v."values", string_to_array(convert_from(v.status, 'LATIN1'), NULL))
    WITH ORDINALITY AS o (value, status, position)
WHERE o.status <> '-';
