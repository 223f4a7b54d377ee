"""Schema 1 as SQL text: the guards. Rows are added, never changed, removed or replaced; a saved revision is closed.

BEFORE INSERT triggers look for the row themselves, because REPLACE skips delete triggers where
recursive_triggers is off (SQLite's default), and for its parents, because foreign keys are off by default too.
"""

GUARDS = """
CREATE TRIGGER guard_meta_update BEFORE UPDATE ON meta
WHEN NOT (OLD.name = NEW.name AND NEW.name IN ('schema', 'contract') AND CAST(NEW.value AS INTEGER) > CAST(OLD.value AS INTEGER))
BEGIN SELECT RAISE(ABORT, 'meta is append-only: only schema and contract may rise'); END;
CREATE TRIGGER guard_meta_delete BEFORE DELETE ON meta
BEGIN SELECT RAISE(ABORT, 'meta is append-only: no row is removed'); END;
CREATE TRIGGER guard_meta_replace BEFORE INSERT ON meta
WHEN EXISTS (SELECT 1 FROM meta WHERE name = NEW.name)
BEGIN SELECT RAISE(ABORT, 'meta is append-only: this row exists'); END;
CREATE TRIGGER guard_setting_update BEFORE UPDATE ON setting
BEGIN SELECT RAISE(ABORT, 'setting is append-only: no row is changed'); END;
CREATE TRIGGER guard_setting_delete BEFORE DELETE ON setting
BEGIN SELECT RAISE(ABORT, 'setting is append-only: no row is removed'); END;
CREATE TRIGGER guard_setting_replace BEFORE INSERT ON setting
WHEN EXISTS (SELECT 1 FROM setting WHERE seq = NEW.seq)
  OR EXISTS (SELECT 1 FROM setting WHERE sha256 = NEW.sha256)
BEGIN SELECT RAISE(ABORT, 'setting is append-only: this row exists'); END;
CREATE TRIGGER guard_blob_update BEFORE UPDATE ON blob
BEGIN SELECT RAISE(ABORT, 'blob is append-only: no row is changed'); END;
CREATE TRIGGER guard_blob_delete BEFORE DELETE ON blob
BEGIN SELECT RAISE(ABORT, 'blob is append-only: no row is removed'); END;
CREATE TRIGGER guard_blob_replace BEFORE INSERT ON blob
WHEN EXISTS (SELECT 1 FROM blob WHERE sha256 = NEW.sha256)
BEGIN SELECT RAISE(ABORT, 'blob is append-only: this row exists'); END;
CREATE TRIGGER guard_sheet_update BEFORE UPDATE ON sheet
BEGIN SELECT RAISE(ABORT, 'sheet is append-only: no row is changed'); END;
CREATE TRIGGER guard_sheet_delete BEFORE DELETE ON sheet
BEGIN SELECT RAISE(ABORT, 'sheet is append-only: no row is removed'); END;
CREATE TRIGGER guard_sheet_replace BEFORE INSERT ON sheet
WHEN EXISTS (SELECT 1 FROM sheet WHERE sha256 = NEW.sha256)
BEGIN SELECT RAISE(ABORT, 'sheet is append-only: this row exists'); END;
CREATE TRIGGER guard_maker_update BEFORE UPDATE ON maker
BEGIN SELECT RAISE(ABORT, 'maker is append-only: no row is changed'); END;
CREATE TRIGGER guard_maker_delete BEFORE DELETE ON maker
BEGIN SELECT RAISE(ABORT, 'maker is append-only: no row is removed'); END;
CREATE TRIGGER guard_maker_replace BEFORE INSERT ON maker
WHEN EXISTS (SELECT 1 FROM maker WHERE id = NEW.id)
  OR EXISTS (SELECT 1 FROM maker WHERE name = NEW.name)
BEGIN SELECT RAISE(ABORT, 'maker is append-only: this row exists'); END;
CREATE TRIGGER guard_pump_update BEFORE UPDATE ON pump
BEGIN SELECT RAISE(ABORT, 'pump is append-only: no row is changed'); END;
CREATE TRIGGER guard_pump_delete BEFORE DELETE ON pump
BEGIN SELECT RAISE(ABORT, 'pump is append-only: no row is removed'); END;
CREATE TRIGGER guard_pump_replace BEFORE INSERT ON pump
WHEN EXISTS (SELECT 1 FROM pump WHERE id = NEW.id)
  OR EXISTS (SELECT 1 FROM pump WHERE key = NEW.key)
BEGIN SELECT RAISE(ABORT, 'pump is append-only: this row exists'); END;
CREATE TRIGGER guard_alias_update BEFORE UPDATE ON alias
BEGIN SELECT RAISE(ABORT, 'alias is append-only: no row is changed'); END;
CREATE TRIGGER guard_alias_delete BEFORE DELETE ON alias
BEGIN SELECT RAISE(ABORT, 'alias is append-only: no row is removed'); END;
CREATE TRIGGER guard_alias_replace BEFORE INSERT ON alias
WHEN EXISTS (SELECT 1 FROM alias WHERE key = NEW.key)
BEGIN SELECT RAISE(ABORT, 'alias is append-only: this row exists'); END;
CREATE TRIGGER guard_revision_update BEFORE UPDATE ON revision
BEGIN SELECT RAISE(ABORT, 'revision is append-only: no row is changed'); END;
CREATE TRIGGER guard_revision_delete BEFORE DELETE ON revision
BEGIN SELECT RAISE(ABORT, 'revision is append-only: no row is removed'); END;
CREATE TRIGGER guard_revision_replace BEFORE INSERT ON revision
WHEN EXISTS (SELECT 1 FROM revision WHERE id = NEW.id)
  OR EXISTS (SELECT 1 FROM revision WHERE save_key = NEW.save_key)
  OR EXISTS (SELECT 1 FROM revision WHERE pump_id = NEW.pump_id AND number = NEW.number)
BEGIN SELECT RAISE(ABORT, 'revision is append-only: this row exists'); END;
CREATE TRIGGER guard_revision_recipe_update BEFORE UPDATE ON revision_recipe
BEGIN SELECT RAISE(ABORT, 'revision_recipe is append-only: no row is changed'); END;
CREATE TRIGGER guard_revision_recipe_delete BEFORE DELETE ON revision_recipe
BEGIN SELECT RAISE(ABORT, 'revision_recipe is append-only: no row is removed'); END;
CREATE TRIGGER guard_revision_recipe_replace BEFORE INSERT ON revision_recipe
WHEN EXISTS (SELECT 1 FROM revision_recipe WHERE id = NEW.id)
  OR EXISTS (SELECT 1 FROM revision_recipe WHERE revision_id = NEW.revision_id AND coalesce(sheet_sha256, x'') =
    coalesce(NEW.sheet_sha256, x'') AND page = NEW.page)
BEGIN SELECT RAISE(ABORT, 'revision_recipe is append-only: this row exists'); END;
CREATE TRIGGER guard_installation_update BEFORE UPDATE ON installation
BEGIN SELECT RAISE(ABORT, 'installation is append-only: no row is changed'); END;
CREATE TRIGGER guard_installation_delete BEFORE DELETE ON installation
BEGIN SELECT RAISE(ABORT, 'installation is append-only: no row is removed'); END;
CREATE TRIGGER guard_installation_replace BEFORE INSERT ON installation
WHEN EXISTS (SELECT 1 FROM installation WHERE id = NEW.id)
  OR EXISTS (SELECT 1 FROM installation WHERE tag = NEW.tag)
BEGIN SELECT RAISE(ABORT, 'installation is append-only: this row exists'); END;
CREATE TRIGGER guard_curve_update BEFORE UPDATE ON curve
BEGIN SELECT RAISE(ABORT, 'curve is append-only: no row is changed'); END;
CREATE TRIGGER guard_curve_delete BEFORE DELETE ON curve
BEGIN SELECT RAISE(ABORT, 'curve is append-only: no row is removed'); END;
CREATE TRIGGER guard_curve_replace BEFORE INSERT ON curve
WHEN EXISTS (SELECT 1 FROM curve WHERE id = NEW.id)
  OR EXISTS (SELECT 1 FROM curve WHERE revision_id = NEW.revision_id AND local_id = NEW.local_id)
BEGIN SELECT RAISE(ABORT, 'curve is append-only: this row exists'); END;
CREATE TRIGGER guard_trace_update BEFORE UPDATE ON trace
BEGIN SELECT RAISE(ABORT, 'trace is append-only: no row is changed'); END;
CREATE TRIGGER guard_trace_delete BEFORE DELETE ON trace
BEGIN SELECT RAISE(ABORT, 'trace is append-only: no row is removed'); END;
CREATE TRIGGER guard_trace_replace BEFORE INSERT ON trace
WHEN EXISTS (SELECT 1 FROM trace WHERE curve_id = NEW.curve_id)
BEGIN SELECT RAISE(ABORT, 'trace is append-only: this row exists'); END;
CREATE TRIGGER guard_finding_update BEFORE UPDATE ON finding
BEGIN SELECT RAISE(ABORT, 'finding is append-only: no row is changed'); END;
CREATE TRIGGER guard_finding_delete BEFORE DELETE ON finding
BEGIN SELECT RAISE(ABORT, 'finding is append-only: no row is removed'); END;
CREATE TRIGGER guard_finding_replace BEFORE INSERT ON finding
WHEN EXISTS (SELECT 1 FROM finding WHERE id = NEW.id)
BEGIN SELECT RAISE(ABORT, 'finding is append-only: this row exists'); END;
CREATE TRIGGER guard_event_update BEFORE UPDATE ON event
BEGIN SELECT RAISE(ABORT, 'event is append-only: no row is changed'); END;
CREATE TRIGGER guard_event_delete BEFORE DELETE ON event
BEGIN SELECT RAISE(ABORT, 'event is append-only: no row is removed'); END;
CREATE TRIGGER guard_event_replace BEFORE INSERT ON event
WHEN EXISTS (SELECT 1 FROM event WHERE seq = NEW.seq)
  OR EXISTS (SELECT 1 FROM event WHERE sha256 = NEW.sha256)
BEGIN SELECT RAISE(ABORT, 'event is append-only: this row exists'); END;
CREATE TRIGGER guard_release_span_update BEFORE UPDATE ON release_span
WHEN NOT (OLD.valid_to IS NULL AND NEW.valid_to IS NOT NULL AND NEW.revision_id = OLD.revision_id AND NEW.pump_id = OLD.pump_id
  AND NEW.valid_from = OLD.valid_from AND EXISTS (SELECT 1 FROM event WHERE revision_id = NEW.revision_id AND at = NEW.valid_to
  AND kind IN ('superseded', 'withdrawn')))
BEGIN SELECT RAISE(ABORT, 'a release span is closed once, by the event that ends it'); END;
CREATE TRIGGER guard_release_span_delete BEFORE DELETE ON release_span
BEGIN SELECT RAISE(ABORT, 'release_span is append-only: no row is removed'); END;
CREATE TRIGGER guard_release_span_replace BEFORE INSERT ON release_span
WHEN EXISTS (SELECT 1 FROM release_span WHERE revision_id = NEW.revision_id)
  OR EXISTS (SELECT 1 FROM release_span WHERE pump_id = NEW.pump_id AND valid_to IS NULL)
BEGIN SELECT RAISE(ABORT, 'release_span is append-only: this row exists'); END;
CREATE TRIGGER guard_sheet_parent BEFORE INSERT ON sheet
WHEN NOT EXISTS (SELECT 1 FROM blob WHERE sha256 = NEW.sha256 AND kind = 'sheet')
BEGIN SELECT RAISE(ABORT, 'sheet: a row it refers to is not there'); END;
CREATE TRIGGER guard_pump_parent BEFORE INSERT ON pump
WHEN NOT EXISTS (SELECT 1 FROM maker WHERE id = NEW.maker_id)
BEGIN SELECT RAISE(ABORT, 'pump: a row it refers to is not there'); END;
CREATE TRIGGER guard_alias_parent BEFORE INSERT ON alias
WHEN NOT EXISTS (SELECT 1 FROM pump WHERE id = NEW.pump_id)
  OR NOT EXISTS (SELECT 1 FROM event WHERE seq = NEW.seq AND pump_id = NEW.pump_id AND kind IN ('renamed', 'merged'))
BEGIN SELECT RAISE(ABORT, 'alias: a row it refers to is not there'); END;
CREATE TRIGGER guard_revision_parent BEFORE INSERT ON revision
WHEN NOT EXISTS (SELECT 1 FROM pump WHERE id = NEW.pump_id)
  OR NOT EXISTS (SELECT 1 FROM blob WHERE sha256 = NEW.body_sha256 AND kind = 'body')
  OR (NEW.parent_id IS NOT NULL AND NOT EXISTS (SELECT 1 FROM revision WHERE id = NEW.parent_id AND pump_id = NEW.pump_id AND number <
    NEW.number))
BEGIN SELECT RAISE(ABORT, 'revision: a row it refers to is not there'); END;
CREATE TRIGGER guard_revision_recipe_parent BEFORE INSERT ON revision_recipe
WHEN NOT EXISTS (SELECT 1 FROM revision WHERE id = NEW.revision_id)
  OR NOT EXISTS (SELECT 1 FROM blob WHERE sha256 = NEW.recipe_sha256 AND kind = 'recipe')
  OR (NEW.sheet_sha256 IS NOT NULL AND NOT EXISTS (SELECT 1 FROM sheet WHERE sha256 = NEW.sheet_sha256))
BEGIN SELECT RAISE(ABORT, 'revision_recipe: a row it refers to is not there'); END;
CREATE TRIGGER guard_installation_parent BEFORE INSERT ON installation
WHEN NOT EXISTS (SELECT 1 FROM pump WHERE id = NEW.pump_id)
BEGIN SELECT RAISE(ABORT, 'installation: a row it refers to is not there'); END;
CREATE TRIGGER guard_curve_parent BEFORE INSERT ON curve
WHEN NOT EXISTS (SELECT 1 FROM revision WHERE id = NEW.revision_id)
  OR (NEW.sheet_sha256 IS NOT NULL AND NOT EXISTS (SELECT 1 FROM sheet WHERE sha256 = NEW.sheet_sha256))
BEGIN SELECT RAISE(ABORT, 'curve: a row it refers to is not there'); END;
CREATE TRIGGER guard_trace_parent BEFORE INSERT ON trace
WHEN NOT EXISTS (SELECT 1 FROM curve WHERE id = NEW.curve_id)
BEGIN SELECT RAISE(ABORT, 'trace: a row it refers to is not there'); END;
CREATE TRIGGER guard_finding_parent BEFORE INSERT ON finding
WHEN NOT EXISTS (SELECT 1 FROM revision WHERE id = NEW.revision_id)
BEGIN SELECT RAISE(ABORT, 'finding: a row it refers to is not there'); END;
CREATE TRIGGER guard_event_parent BEFORE INSERT ON event
WHEN NOT EXISTS (SELECT 1 FROM pump WHERE id = NEW.pump_id)
  OR (NEW.revision_id IS NOT NULL AND NOT EXISTS (SELECT 1 FROM revision WHERE id = NEW.revision_id AND pump_id = NEW.pump_id))
BEGIN SELECT RAISE(ABORT, 'event: a row it refers to is not there'); END;
CREATE TRIGGER guard_release_span_parent BEFORE INSERT ON release_span
WHEN NOT EXISTS (SELECT 1 FROM revision WHERE id = NEW.revision_id AND pump_id = NEW.pump_id)
BEGIN SELECT RAISE(ABORT, 'release_span: a row it refers to is not there'); END;
CREATE TRIGGER guard_revision_recipe_late BEFORE INSERT ON revision_recipe
WHEN EXISTS (SELECT 1 FROM event WHERE revision_id = NEW.revision_id)
BEGIN SELECT RAISE(ABORT, 'revision_recipe: this revision is saved and closed'); END;
CREATE TRIGGER guard_curve_late BEFORE INSERT ON curve
WHEN EXISTS (SELECT 1 FROM event WHERE revision_id = NEW.revision_id)
BEGIN SELECT RAISE(ABORT, 'curve: this revision is saved and closed'); END;
CREATE TRIGGER guard_finding_late BEFORE INSERT ON finding
WHEN EXISTS (SELECT 1 FROM event WHERE revision_id = NEW.revision_id)
BEGIN SELECT RAISE(ABORT, 'finding: this revision is saved and closed'); END;
CREATE TRIGGER guard_trace_late BEFORE INSERT ON trace
WHEN EXISTS (SELECT 1 FROM curve JOIN event USING (revision_id) WHERE curve.id = NEW.curve_id)
BEGIN SELECT RAISE(ABORT, 'trace: this revision is saved and closed'); END;
CREATE TRIGGER guard_revision_number BEFORE INSERT ON revision
WHEN NEW.number <> (SELECT coalesce(max(number), 0) + 1 FROM revision WHERE pump_id = NEW.pump_id)
BEGIN SELECT RAISE(ABORT, 'revision: the number must follow the last one'); END;
CREATE TRIGGER guard_setting_chain BEFORE INSERT ON setting
WHEN NEW.seq <> (SELECT coalesce(max(seq), 0) + 1 FROM setting)
  OR NEW.previous_sha256 <> coalesce((SELECT sha256 FROM setting ORDER BY seq DESC LIMIT 1), zeroblob(32))
BEGIN SELECT RAISE(ABORT, 'setting: it does not follow the last one'); END;
CREATE TRIGGER guard_event_chain BEFORE INSERT ON event
WHEN NEW.seq <> (SELECT coalesce(max(seq), 0) + 1 FROM event)
  OR NEW.previous_sha256 <> coalesce((SELECT sha256 FROM event ORDER BY seq DESC LIMIT 1), zeroblob(32))
  OR NEW.at < coalesce((SELECT at FROM event ORDER BY seq DESC LIMIT 1), '')
BEGIN SELECT RAISE(ABORT, 'event: it does not follow the last one'); END;
CREATE TRIGGER guard_event_state BEFORE INSERT ON event
WHEN NOT CASE NEW.kind
  WHEN 'saved' THEN NEW.revision_id IS NOT NULL AND (SELECT kind FROM event WHERE revision_id = NEW.revision_id
    AND kind IN ('saved', 'submitted', 'released', 'superseded', 'withdrawn') ORDER BY seq DESC LIMIT 1) IS NULL
  WHEN 'submitted' THEN coalesce((SELECT kind FROM event WHERE revision_id = NEW.revision_id
    AND kind IN ('saved', 'submitted', 'released', 'superseded', 'withdrawn') ORDER BY seq DESC LIMIT 1) = 'saved', 0)
  WHEN 'released' THEN coalesce((SELECT kind FROM event WHERE revision_id = NEW.revision_id
    AND kind IN ('saved', 'submitted', 'released', 'superseded', 'withdrawn') ORDER BY seq DESC LIMIT 1) IN ('saved', 'submitted'), 0)
    AND NOT EXISTS (SELECT 1 FROM release_span WHERE pump_id = NEW.pump_id AND valid_to IS NULL)
  WHEN 'superseded' THEN coalesce((SELECT kind FROM event WHERE revision_id = NEW.revision_id
    AND kind IN ('saved', 'submitted', 'released', 'superseded', 'withdrawn') ORDER BY seq DESC LIMIT 1) = 'released', 0)
  WHEN 'withdrawn' THEN coalesce((SELECT kind FROM event WHERE revision_id = NEW.revision_id
    AND kind IN ('saved', 'submitted', 'released', 'superseded', 'withdrawn') ORDER BY seq DESC LIMIT 1) <> 'withdrawn', 0)
  ELSE NEW.revision_id IS NULL OR (SELECT kind FROM event WHERE revision_id = NEW.revision_id
    AND kind IN ('saved', 'submitted', 'released', 'superseded', 'withdrawn') ORDER BY seq DESC LIMIT 1) IS NOT NULL END
BEGIN SELECT RAISE(ABORT, 'event: the revision is not in a state that allows it'); END;
CREATE TRIGGER guard_release_span_event BEFORE INSERT ON release_span
WHEN NEW.valid_to IS NOT NULL OR NOT EXISTS (SELECT 1 FROM event WHERE revision_id = NEW.revision_id AND kind = 'released' AND at =
    NEW.valid_from)
BEGIN SELECT RAISE(ABORT, 'release_span: only a release event opens one'); END;
CREATE TRIGGER span_open AFTER INSERT ON event WHEN NEW.kind = 'released'
BEGIN INSERT INTO release_span (revision_id, pump_id, valid_from) VALUES (NEW.revision_id, NEW.pump_id, NEW.at); END;
CREATE TRIGGER span_close AFTER INSERT ON event WHEN NEW.kind IN ('superseded', 'withdrawn')
BEGIN UPDATE release_span SET valid_to = NEW.at WHERE revision_id = NEW.revision_id AND valid_to IS NULL; END;
"""
