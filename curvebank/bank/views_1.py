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
word AS (
  SELECT pump.key, curve.local_id AS curve, step.i, part.c AS part, hex(substr(trace.bytes, 4 * (part.c * trace.n + step.i) + 1, 4)) AS h
  FROM release_span AS span JOIN pump ON pump.id = span.pump_id JOIN curve ON curve.revision_id = span.revision_id
    JOIN trace ON trace.curve_id = curve.id JOIN step ON step.i < trace.n
    JOIN (SELECT 3 AS c UNION ALL SELECT 4 UNION ALL SELECT 5) AS part
  WHERE span.valid_to IS NULL),
bits AS (
  SELECT key, curve, i, part, ((instr('0123456789ABCDEF', substr(h, 1, 1)) - 1) * 16 + instr('0123456789ABCDEF', substr(h, 2, 1)) - 1)
    + 256 * ((instr('0123456789ABCDEF', substr(h, 3, 1)) - 1) * 16 + instr('0123456789ABCDEF', substr(h, 4, 1)) - 1)
    + 65536 * ((instr('0123456789ABCDEF', substr(h, 5, 1)) - 1) * 16 + instr('0123456789ABCDEF', substr(h, 6, 1)) - 1)
    + 16777216 * ((instr('0123456789ABCDEF', substr(h, 7, 1)) - 1) * 16 + instr('0123456789ABCDEF', substr(h, 8, 1)) - 1) AS b FROM word),
number AS (
  SELECT key, curve, i, part, CASE WHEN b & 2139095040 = 0 THEN 0.0 ELSE
    (CASE WHEN b >> 31 THEN -1.0 ELSE 1.0 END) * (8388608 | (b & 8388607))
    * (CASE WHEN (b >> 23 & 255) >= 150 THEN 1.0 * (1 << min((b >> 23 & 255) - 150, 60)) ELSE 1.0 END)
    * (CASE WHEN (b >> 23 & 255) >= 210 THEN 1.0 * (1 << ((b >> 23 & 255) - 210)) ELSE 1.0 END)
    / (CASE WHEN (b >> 23 & 255) < 150 THEN 1.0 * (1 << min(150 - (b >> 23 & 255), 60)) ELSE 1.0 END)
    / (CASE WHEN (b >> 23 & 255) < 90 THEN 1.0 * (1 << min(90 - (b >> 23 & 255), 60)) ELSE 1.0 END)
    / (CASE WHEN (b >> 23 & 255) < 30 THEN 1.0 * (1 << (30 - (b >> 23 & 255))) ELSE 1.0 END) END AS v
  FROM bits)
SELECT key, curve, i, max(CASE part WHEN 3 THEN v END) AS flow_m3h, max(CASE part WHEN 4 THEN v END) AS value,
  max(CASE part WHEN 5 THEN v END) AS sigma
FROM number GROUP BY key, curve, i;
"""
