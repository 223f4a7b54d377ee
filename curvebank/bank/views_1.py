"""Schema 1 as SQL text: the read contract. Plain SQLite reads these views, nothing to install.

``released_point`` unpacks little-endian float32 with integer arithmetic: sign, exponent and mantissa of IEEE 754 binary32.
"""

VIEWS = """
CREATE VIEW revision_state AS
SELECT revision.id AS revision_id, revision.pump_id, revision.number,
  CASE (SELECT kind FROM event WHERE revision_id = revision.id AND kind IN ('saved', 'submitted', 'released', 'superseded', 'withdrawn')
    ORDER BY seq DESC LIMIT 1) WHEN 'saved' THEN 'draft' WHEN 'submitted' THEN 'submitted' WHEN 'released' THEN 'released'
    WHEN 'superseded' THEN 'superseded' WHEN 'withdrawn' THEN 'withdrawn' END AS state
FROM revision;

CREATE VIEW released_pump AS
SELECT pump.key, maker.name AS maker, pump.model, revision.stages, revision.rated_rpm, revision.number AS revision, span.valid_from AS
    released_at
FROM release_span AS span JOIN revision ON revision.id = span.revision_id JOIN pump ON pump.id = span.pump_id JOIN maker ON maker.id =
    pump.maker_id
WHERE span.valid_to IS NULL;

CREATE VIEW released_curve AS
SELECT pump.key, revision.number AS revision, curve.local_id AS curve, curve.quantity, curve.diameter_mm, curve.speed_rpm, curve.level,
  curve.q_lo, curve.q_hi, curve.q_mid, curve.q_half, curve.orders, curve.sigma
FROM release_span AS span JOIN revision ON revision.id = span.revision_id JOIN pump ON pump.id = span.pump_id
  JOIN curve ON curve.revision_id = revision.id
WHERE span.valid_to IS NULL;

CREATE VIEW released_coefficient AS
SELECT pump.key, curve.local_id AS curve, part.k,
  CASE part.k WHEN 0 THEN c0 WHEN 1 THEN c1 WHEN 2 THEN c2 WHEN 3 THEN c3 WHEN 4 THEN c4 WHEN 5 THEN c5 WHEN 6 THEN c6 WHEN 7 THEN c7 WHEN
    8 THEN c8 END AS scaled,
  CASE part.k WHEN 0 THEN p0 WHEN 1 THEN p1 WHEN 2 THEN p2 WHEN 3 THEN p3 WHEN 4 THEN p4 WHEN 5 THEN p5 WHEN 6 THEN p6 WHEN 7 THEN p7 WHEN
    8 THEN p8 END AS plain
FROM release_span AS span JOIN pump ON pump.id = span.pump_id JOIN curve ON curve.revision_id = span.revision_id
  JOIN (SELECT 0 AS k UNION ALL SELECT 1 UNION ALL SELECT 2 UNION ALL SELECT 3 UNION ALL SELECT 4 UNION ALL SELECT 5
    UNION ALL SELECT 6 UNION ALL SELECT 7 UNION ALL SELECT 8) AS part ON part.k <= curve.orders
WHERE span.valid_to IS NULL;

CREATE VIEW released_point AS
WITH RECURSIVE step (i) AS (SELECT 0 UNION ALL SELECT i + 1 FROM step WHERE i < 199),
up (e, f) AS (SELECT 150, 1.0 UNION ALL SELECT e + 1, f * 2.0 FROM up WHERE e < 254),
down (e, f) AS (SELECT 149, 0.5 UNION ALL SELECT e - 1, f * 0.5 FROM down WHERE e > 1),
scale (e, f) AS (SELECT e, f FROM up UNION ALL SELECT e, f FROM down UNION ALL SELECT 0, 0.0),
word AS (
  SELECT pump.key, curve.local_id AS curve, step.i, hex(substr(trace.bytes, 4 * (3 * trace.n + step.i) + 1, 4)) AS q,
    hex(substr(trace.bytes, 4 * (4 * trace.n + step.i) + 1, 4)) AS v, hex(substr(trace.bytes, 4 * (5 * trace.n + step.i) + 1, 4)) AS u
  FROM release_span AS span JOIN pump ON pump.id = span.pump_id JOIN curve ON curve.revision_id = span.revision_id
    JOIN trace ON trace.curve_id = curve.id CROSS JOIN step ON step.i < trace.n
  WHERE span.valid_to IS NULL)
SELECT key, curve, i,
  (1.0 - (((instr('0123456789ABCDEF', substr(q, 7, 1)) - 1) * 16 + instr('0123456789ABCDEF', substr(q, 8, 1)) - 1) >> 7) * 2) * (8388608 +
    ((instr('0123456789ABCDEF', substr(q, 1, 1)) - 1) * 16 + instr('0123456789ABCDEF', substr(q, 2, 1)) - 1)
    + 256 * ((instr('0123456789ABCDEF', substr(q, 3, 1)) - 1) * 16 + instr('0123456789ABCDEF', substr(q, 4, 1)) - 1)
    + 65536 * (((instr('0123456789ABCDEF', substr(q, 5, 1)) - 1) * 16 + instr('0123456789ABCDEF', substr(q, 6, 1)) - 1) & 127)) * of_q.f
    AS flow_m3h,
  (1.0 - (((instr('0123456789ABCDEF', substr(v, 7, 1)) - 1) * 16 + instr('0123456789ABCDEF', substr(v, 8, 1)) - 1) >> 7) * 2) * (8388608 +
    ((instr('0123456789ABCDEF', substr(v, 1, 1)) - 1) * 16 + instr('0123456789ABCDEF', substr(v, 2, 1)) - 1)
    + 256 * ((instr('0123456789ABCDEF', substr(v, 3, 1)) - 1) * 16 + instr('0123456789ABCDEF', substr(v, 4, 1)) - 1)
    + 65536 * (((instr('0123456789ABCDEF', substr(v, 5, 1)) - 1) * 16 + instr('0123456789ABCDEF', substr(v, 6, 1)) - 1) & 127)) * of_v.f
    AS value,
  (1.0 - (((instr('0123456789ABCDEF', substr(u, 7, 1)) - 1) * 16 + instr('0123456789ABCDEF', substr(u, 8, 1)) - 1) >> 7) * 2) * (8388608 +
    ((instr('0123456789ABCDEF', substr(u, 1, 1)) - 1) * 16 + instr('0123456789ABCDEF', substr(u, 2, 1)) - 1)
    + 256 * ((instr('0123456789ABCDEF', substr(u, 3, 1)) - 1) * 16 + instr('0123456789ABCDEF', substr(u, 4, 1)) - 1)
    + 65536 * (((instr('0123456789ABCDEF', substr(u, 5, 1)) - 1) * 16 + instr('0123456789ABCDEF', substr(u, 6, 1)) - 1) & 127)) * of_u.f
    AS sigma
FROM word
CROSS JOIN scale AS of_q ON of_q.e = (((instr('0123456789ABCDEF', substr(q, 7, 1)) - 1) * 16 + instr('0123456789ABCDEF', substr(q, 8, 1))
    - 1) & 127) * 2 + (((instr('0123456789ABCDEF', substr(q, 5, 1)) - 1) * 16 + instr('0123456789ABCDEF', substr(q, 6, 1)) - 1) >> 7)
CROSS JOIN scale AS of_v ON of_v.e = (((instr('0123456789ABCDEF', substr(v, 7, 1)) - 1) * 16 + instr('0123456789ABCDEF', substr(v, 8, 1))
    - 1) & 127) * 2 + (((instr('0123456789ABCDEF', substr(v, 5, 1)) - 1) * 16 + instr('0123456789ABCDEF', substr(v, 6, 1)) - 1) >> 7)
CROSS JOIN scale AS of_u ON of_u.e = (((instr('0123456789ABCDEF', substr(u, 7, 1)) - 1) * 16 + instr('0123456789ABCDEF', substr(u, 8, 1))
    - 1) & 127) * 2 + (((instr('0123456789ABCDEF', substr(u, 5, 1)) - 1) * 16 + instr('0123456789ABCDEF', substr(u, 6, 1)) - 1) >> 7);
"""
