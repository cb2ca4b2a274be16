-- The tables of Limitary. History tables are append-only: a trigger refuses UPDATE, DELETE and TRUNCATE, and the service
-- login is not granted them. Projection tables (charts, tracks, places, signals, chain_heads) hold the current state;
-- everything in them can be recomputed from history, which `limitary recheck` does.
--
-- Every table with a chart's history is keyed by chart_id first, so that it can be partitioned or spread by it.
-- Order within a chart is the audit entry's number, assigned under the chart's chain head; times are for people.

CREATE FUNCTION refuse_change() RETURNS trigger LANGUAGE plpgsql AS $$
BEGIN
  RAISE EXCEPTION 'table % is history: % is refused', TG_TABLE_NAME, TG_OP USING ERRCODE = 'insufficient_privilege';
END $$;

-- Principals and keys -------------------------------------------------------------------------------------------------

CREATE TABLE principals (
  principal_id bigint GENERATED ALWAYS AS IDENTITY CONSTRAINT principals_pkey PRIMARY KEY,
  name text COLLATE "C" NOT NULL CONSTRAINT principals_name_key UNIQUE CONSTRAINT principals_name_length CHECK (octet_length(name) BETWEEN 1 AND 200),
  created_at timestamptz NOT NULL DEFAULT clock_timestamp()
);

-- Ann and ann would pass for one person, and must not be the two that a change needs.
CREATE UNIQUE INDEX principals_name_fold ON principals (lower(name));

CREATE TABLE keys (
  key_id text COLLATE "C" CONSTRAINT keys_pkey PRIMARY KEY CONSTRAINT keys_id_form CHECK (key_id ~ '^[a-z0-9]{16}$'),
  principal text COLLATE "C" NOT NULL CONSTRAINT keys_principal_fkey REFERENCES principals (name),
  secret_hash bytea NOT NULL CONSTRAINT keys_hash_length CHECK (octet_length(secret_hash) = 32),
  roles text[] NOT NULL CONSTRAINT keys_roles CHECK (cardinality(roles) > 0 AND roles <@ ARRAY['reader','poster','author','approver','reviewer','admin']),
  labels jsonb NOT NULL DEFAULT '{}',
  sources text[] NOT NULL DEFAULT '{}',
  created_by text COLLATE "C" NOT NULL,
  created_at timestamptz NOT NULL DEFAULT clock_timestamp(),
  expires_at timestamptz NOT NULL CONSTRAINT keys_expiry CHECK (expires_at > created_at),
  entry bigint NOT NULL
);

-- A revocation is a row of its own: keys are history too.
CREATE TABLE key_revocations (
  key_id text COLLATE "C" CONSTRAINT key_revocations_pkey PRIMARY KEY CONSTRAINT key_revocations_key_fkey REFERENCES keys,
  revoked_by text COLLATE "C" NOT NULL,
  revoked_at timestamptz NOT NULL DEFAULT clock_timestamp(),
  entry bigint NOT NULL
);

-- Charts and tracks ---------------------------------------------------------------------------------------------------

CREATE TABLE charts (
  chart_id bigint GENERATED ALWAYS AS IDENTITY CONSTRAINT charts_pkey PRIMARY KEY,
  name text COLLATE "C" NOT NULL CONSTRAINT charts_name_key UNIQUE CONSTRAINT charts_name_form CHECK (name ~ '^[a-z0-9]([a-z0-9-]{0,62}[a-z0-9])?$'),
  kind smallint NOT NULL CONSTRAINT charts_kind CHECK (kind BETWEEN 1 AND 3),
  subgroup_size int NOT NULL CONSTRAINT charts_size CHECK (subgroup_size BETWEEN 1 AND 100),
  unit text NOT NULL,
  lots_are_tracks boolean NOT NULL,
  longest_gap_us bigint NOT NULL DEFAULT 0,
  -- What UpdateChart changes; each state of it is kept in chart_revisions.
  title text NOT NULL,
  decimals int CONSTRAINT charts_decimals CHECK (decimals BETWEEN 0 AND 15),
  labels jsonb NOT NULL DEFAULT '{}',
  display_zone text NOT NULL DEFAULT '',
  plan_interval_us bigint NOT NULL DEFAULT 0,
  repeat_rule text NOT NULL DEFAULT '',
  archived boolean NOT NULL DEFAULT false,
  revision bigint NOT NULL DEFAULT 1,
  -- A new number of the sequence with every approval, withdrawal, mark and void of a mark: whoever knows the versions and
  -- marks of one number knows them for good. A sequence, because a number whose transaction was rolled back must not
  -- come again with another meaning.
  timeline bigint NOT NULL DEFAULT 0,
  created_at timestamptz NOT NULL DEFAULT clock_timestamp()
);
CREATE SEQUENCE timeline_numbers;
CREATE INDEX charts_labels ON charts USING gin (labels jsonb_path_ops);

CREATE TABLE chart_revisions (
  chart_id bigint NOT NULL CONSTRAINT chart_revisions_chart_fkey REFERENCES charts,
  revision bigint NOT NULL,
  content jsonb NOT NULL,
  author text COLLATE "C" NOT NULL,
  reason text NOT NULL DEFAULT '',
  recorded_at timestamptz NOT NULL,
  entry bigint NOT NULL,
  CONSTRAINT chart_revisions_pkey PRIMARY KEY (chart_id, revision)
);

CREATE TABLE tracks (
  track_id bigint GENERATED ALWAYS AS IDENTITY CONSTRAINT tracks_pkey PRIMARY KEY,
  chart_id bigint NOT NULL CONSTRAINT tracks_chart_fkey REFERENCES charts,
  lot text COLLATE "C" NOT NULL,
  created_at timestamptz NOT NULL DEFAULT clock_timestamp(),
  -- The current state.
  results bigint NOT NULL DEFAULT 0 CONSTRAINT tracks_results CHECK (results >= 0),
  open_signals int NOT NULL DEFAULT 0 CONSTRAINT tracks_open_signals CHECK (open_signals >= 0),
  occurrence bigint,
  hold_since timestamptz,
  last_recorded_at timestamptz NOT NULL DEFAULT '-infinity',
  CONSTRAINT tracks_lot_key UNIQUE (chart_id, lot),
  CONSTRAINT tracks_occurrence_open CHECK ((occurrence IS NOT NULL) = (open_signals > 0))
) WITH (fillfactor = 70);

-- Versions ------------------------------------------------------------------------------------------------------------

CREATE TABLE versions (
  chart_id bigint NOT NULL CONSTRAINT versions_chart_fkey REFERENCES charts,
  number int NOT NULL CONSTRAINT versions_number CHECK (number >= 1),
  lot text COLLATE "C" NOT NULL,
  canonical bytea NOT NULL,
  digest text NOT NULL CONSTRAINT versions_digest CHECK (digest = encode(sha256(canonical), 'hex')),
  author text COLLATE "C" NOT NULL CONSTRAINT versions_author_fkey REFERENCES principals (name),
  effective_from timestamptz NOT NULL,
  recorded_at timestamptz NOT NULL,
  entry bigint NOT NULL,
  CONSTRAINT versions_pkey PRIMARY KEY (chart_id, number),
  CONSTRAINT versions_author_key UNIQUE (chart_id, number, author)
);

CREATE TABLE version_decisions (
  chart_id bigint NOT NULL,
  number int NOT NULL,
  decision text NOT NULL CONSTRAINT version_decisions_decision CHECK (decision IN ('APPROVED', 'REJECTED', 'WITHDRAWN')),
  -- First step: approved or rejected. Second: withdrawn, after an approval only.
  step smallint NOT NULL CONSTRAINT version_decisions_step CHECK (step = CASE decision WHEN 'WITHDRAWN' THEN 2 ELSE 1 END),
  author text COLLATE "C" NOT NULL,
  decided_by text COLLATE "C" NOT NULL CONSTRAINT version_decisions_by_fkey REFERENCES principals (name),
  reason text NOT NULL DEFAULT '',
  accepted_patterns text[] NOT NULL DEFAULT '{}',
  recorded_at timestamptz NOT NULL,
  entry bigint NOT NULL,
  CONSTRAINT version_decisions_pkey PRIMARY KEY (chart_id, number, step),
  -- The author is carried along, so that the database itself sees that the approver is another principal.
  CONSTRAINT version_decisions_version_fkey FOREIGN KEY (chart_id, number, author) REFERENCES versions (chart_id, number, author),
  CONSTRAINT version_decisions_second_person CHECK (decision <> 'APPROVED' OR decided_by <> author)
);

CREATE FUNCTION withdraw_needs_approval() RETURNS trigger LANGUAGE plpgsql AS $$
BEGIN
  IF NEW.step = 2 AND NOT EXISTS (SELECT FROM version_decisions d
      WHERE d.chart_id = NEW.chart_id AND d.number = NEW.number AND d.decision = 'APPROVED') THEN
    RAISE EXCEPTION 'version % is not approved', NEW.number USING ERRCODE = 'check_violation', CONSTRAINT = 'version_decisions_withdraw';
  END IF;
  RETURN NEW;
END $$;
CREATE TRIGGER withdraw_needs_approval BEFORE INSERT ON version_decisions FOR EACH ROW EXECUTE FUNCTION withdraw_needs_approval();

-- Marks ---------------------------------------------------------------------------------------------------------------

CREATE TABLE marks (
  chart_id bigint NOT NULL CONSTRAINT marks_chart_fkey REFERENCES charts,
  mark_id bigint GENERATED ALWAYS AS IDENTITY,
  lot text COLLATE "C" NOT NULL,
  at timestamptz NOT NULL,
  text text NOT NULL,
  break boolean NOT NULL,
  restart boolean NOT NULL,
  author text COLLATE "C" NOT NULL,
  confirmed_by text COLLATE "C",
  recorded_at timestamptz NOT NULL,
  entry bigint NOT NULL,
  CONSTRAINT marks_pkey PRIMARY KEY (chart_id, mark_id),
  CONSTRAINT marks_second_person CHECK (confirmed_by <> author)
);

CREATE TABLE mark_voids (
  chart_id bigint NOT NULL,
  mark_id bigint NOT NULL,
  author text COLLATE "C" NOT NULL,
  confirmed_by text COLLATE "C",
  reason text NOT NULL,
  recorded_at timestamptz NOT NULL,
  entry bigint NOT NULL,
  CONSTRAINT mark_voids_pkey PRIMARY KEY (chart_id, mark_id),
  CONSTRAINT mark_voids_mark_fkey FOREIGN KEY (chart_id, mark_id) REFERENCES marks,
  CONSTRAINT mark_voids_second_person CHECK (confirmed_by <> author)
);

-- Results -------------------------------------------------------------------------------------------------------------

-- One row a post, with the verdict as it was committed. Revisions and later verdicts are rows of their own. There are no
-- foreign keys on the tables that every post fills: each would lock and look up the same chart and track row again for
-- every result. The posting transaction holds the track's lock, and charts and tracks are never deleted.
CREATE TABLE results (
  chart_id bigint NOT NULL,
  result_id bigint NOT NULL,
  track_id bigint NOT NULL,
  source text COLLATE "C" NOT NULL,
  source_id text COLLATE "C" NOT NULL,
  measured_at timestamptz NOT NULL CONSTRAINT results_measured_at CHECK (isfinite(measured_at)),
  -- The result as posted (JSON); the columns above are taken from it.
  content bytea NOT NULL,
  digest bytea NOT NULL CONSTRAINT results_digest_length CHECK (octet_length(digest) = 32),
  run_id text COLLATE "C",
  poster text COLLATE "C" NOT NULL,
  version int NOT NULL,
  judge smallint NOT NULL,
  verdict bytea NOT NULL,
  recorded_at timestamptz NOT NULL,
  entry bigint NOT NULL,
  CONSTRAINT results_pkey PRIMARY KEY (chart_id, result_id),
  CONSTRAINT results_natural_key UNIQUE (chart_id, source, source_id)
);
CREATE INDEX results_run ON results (run_id, measured_at) WHERE run_id IS NOT NULL;

CREATE SEQUENCE result_ids CACHE 1;

-- An amendment or a void: revision 2 and later.
CREATE TABLE result_revisions (
  chart_id bigint NOT NULL,
  result_id bigint NOT NULL,
  revision int NOT NULL CONSTRAINT result_revisions_number CHECK (revision >= 2),
  track_id bigint NOT NULL CONSTRAINT result_revisions_track_fkey REFERENCES tracks,
  measured_at timestamptz NOT NULL,
  content bytea NOT NULL,
  digest bytea NOT NULL,
  run_id text COLLATE "C",
  voided boolean NOT NULL,
  author text COLLATE "C" NOT NULL,
  confirmed_by text COLLATE "C",
  change_id bigint,
  reason_code text NOT NULL,
  reason text NOT NULL,
  recorded_at timestamptz NOT NULL,
  entry bigint NOT NULL,
  CONSTRAINT result_revisions_pkey PRIMARY KEY (chart_id, result_id, revision),
  CONSTRAINT result_revisions_result_fkey FOREIGN KEY (chart_id, result_id) REFERENCES results,
  CONSTRAINT result_revisions_second_person CHECK (confirmed_by <> author),
  CONSTRAINT result_revisions_void_confirmed CHECK (NOT voided OR confirmed_by IS NOT NULL)
);
CREATE INDEX result_revisions_run ON result_revisions (run_id, measured_at) WHERE run_id IS NOT NULL;

-- Every verdict after the first.
CREATE TABLE verdicts (
  chart_id bigint NOT NULL,
  result_id bigint NOT NULL,
  entry bigint NOT NULL,
  revision int NOT NULL,
  version int NOT NULL,
  judge smallint NOT NULL,
  verdict bytea NOT NULL,
  recorded_at timestamptz NOT NULL,
  CONSTRAINT verdicts_pkey PRIMARY KEY (chart_id, result_id, entry)
);

-- The current place, content and verdict of every result, and what the judge remembers after it.
CREATE TABLE places (
  track_id bigint NOT NULL,
  order_key bytea NOT NULL CONSTRAINT places_key_length CHECK (octet_length(order_key) >= 20),
  chart_id bigint NOT NULL,
  result_id bigint NOT NULL,
  revision int NOT NULL,
  voided boolean NOT NULL,
  version int NOT NULL,
  -- 0 not judged, 1 clear, 2 look, 3 act, 4 stop.
  standing smallint NOT NULL CONSTRAINT places_standing CHECK (standing BETWEEN 0 AND 4),
  -- What the judge needs of the content: readings, role.
  point bytea NOT NULL,
  verdict bytea NOT NULL,
  state bytea NOT NULL,
  CONSTRAINT places_pkey PRIMARY KEY (track_id, order_key)
) WITH (fillfactor = 85);
CREATE UNIQUE INDEX places_result_key ON places (chart_id, result_id);

-- Signals -------------------------------------------------------------------------------------------------------------

CREATE SEQUENCE signal_ids;
CREATE SEQUENCE occurrence_ids;

CREATE TABLE signals (
  signal_id bigint CONSTRAINT signals_pkey PRIMARY KEY,
  chart_id bigint NOT NULL CONSTRAINT signals_chart_fkey REFERENCES charts,
  track_id bigint NOT NULL CONSTRAINT signals_track_fkey REFERENCES tracks,
  trace smallint NOT NULL CONSTRAINT signals_trace CHECK (trace IN (0, 1)),
  rule text COLLATE "C" NOT NULL,
  side smallint NOT NULL CONSTRAINT signals_side CHECK (side BETWEEN 0 AND 2),
  consequence smallint NOT NULL CONSTRAINT signals_consequence CHECK (consequence BETWEEN 1 AND 3),
  version int NOT NULL,
  status text NOT NULL CONSTRAINT signals_status CHECK (status IN ('OPEN', 'CLOSED', 'MERGED', 'RETRACTED')),
  occurrence bigint NOT NULL,
  -- Order keys and ids of the results; an episode is the points from first_hit to last_hit.
  first_point bytea NOT NULL,
  first_point_result bigint NOT NULL,
  first_hit bytea NOT NULL,
  first_hit_result bigint NOT NULL,
  last_hit bytea NOT NULL,
  last_hit_result bigint NOT NULL,
  last_hit_at timestamptz NOT NULL,
  merged_into bigint CONSTRAINT signals_merged_fkey REFERENCES signals,
  changed_after_closing boolean NOT NULL DEFAULT false,
  opened_at timestamptz NOT NULL,
  closed_at timestamptz,
  closed_by text COLLATE "C",
  decision text NOT NULL DEFAULT '',
  cause text NOT NULL DEFAULT '',
  CONSTRAINT signals_order CHECK (first_hit <= last_hit),
  CONSTRAINT signals_closed CHECK ((closed_at IS NULL) = (closed_by IS NULL) AND (status <> 'CLOSED' OR closed_at IS NOT NULL)),
  CONSTRAINT signals_merged CHECK ((merged_into IS NOT NULL) = (status = 'MERGED'))
) WITH (fillfactor = 85);
CREATE INDEX signals_episode ON signals (track_id, trace, rule, side, first_hit) WHERE status IN ('OPEN', 'CLOSED');
CREATE INDEX signals_open ON signals (last_hit_at DESC, signal_id DESC) WHERE status = 'OPEN';
CREATE INDEX signals_chart ON signals (chart_id, last_hit_at DESC, signal_id DESC);
CREATE INDEX signals_all ON signals (last_hit_at DESC, signal_id DESC);
CREATE INDEX signals_occurrence ON signals (occurrence);

CREATE TABLE signal_events (
  chart_id bigint NOT NULL,
  signal_id bigint NOT NULL,
  entry bigint NOT NULL,
  change text NOT NULL CONSTRAINT signal_events_change CHECK (change IN ('OPENED', 'CHANGED', 'MERGED', 'RETRACTED', 'CLOSED')),
  status text NOT NULL,
  version int NOT NULL,
  first_point_result bigint NOT NULL,
  first_hit_result bigint NOT NULL,
  last_hit_result bigint NOT NULL,
  merged_into bigint,
  principal text COLLATE "C" NOT NULL,
  text text NOT NULL DEFAULT '',
  recorded_at timestamptz NOT NULL,
  -- A late batch can change a signal more than once under one entry.
  event_id bigint GENERATED ALWAYS AS IDENTITY,
  CONSTRAINT signal_events_pkey PRIMARY KEY (chart_id, signal_id, event_id)
);

CREATE TABLE signal_notes (
  chart_id bigint NOT NULL,
  signal_id bigint NOT NULL CONSTRAINT signal_notes_signal_fkey REFERENCES signals,
  entry bigint NOT NULL,
  author text COLLATE "C" NOT NULL,
  text text NOT NULL CONSTRAINT signal_notes_length CHECK (octet_length(text) BETWEEN 1 AND 4000),
  recorded_at timestamptz NOT NULL,
  CONSTRAINT signal_notes_pkey PRIMARY KEY (chart_id, signal_id, entry)
);

CREATE TABLE track_releases (
  chart_id bigint NOT NULL,
  track_id bigint NOT NULL CONSTRAINT track_releases_track_fkey REFERENCES tracks,
  entry bigint NOT NULL,
  hold_since timestamptz NOT NULL,
  released_by text COLLATE "C" NOT NULL,
  reason text NOT NULL CONSTRAINT track_releases_reason CHECK (octet_length(reason) BETWEEN 1 AND 4000),
  recorded_at timestamptz NOT NULL,
  CONSTRAINT track_releases_pkey PRIMARY KEY (chart_id, track_id, entry)
);

-- Changes that a second principal confirms ----------------------------------------------------------------------------

CREATE TABLE changes (
  change_id bigint GENERATED ALWAYS AS IDENTITY CONSTRAINT changes_pkey PRIMARY KEY,
  chart_id bigint NOT NULL CONSTRAINT changes_chart_fkey REFERENCES charts,
  kind text NOT NULL CONSTRAINT changes_kind CHECK (kind IN ('VOID_RESULT', 'AMEND_RESULT', 'ADD_MARK', 'VOID_MARK', 'WITHDRAW_VERSION')),
  result_id bigint,
  mark_id bigint,
  -- The version to withdraw.
  version int,
  expected_revision int,
  -- The new content of an amended result, or the mark to add (JSON).
  content bytea,
  reason_code text NOT NULL CONSTRAINT changes_reason_code CHECK (octet_length(reason_code) BETWEEN 1 AND 200),
  reason text NOT NULL CONSTRAINT changes_reason CHECK (octet_length(reason) BETWEEN 1 AND 4000),
  author text COLLATE "C" NOT NULL CONSTRAINT changes_author_fkey REFERENCES principals (name),
  verdicts_changed int NOT NULL,
  signals_ended bigint[] NOT NULL,
  recorded_at timestamptz NOT NULL,
  entry bigint NOT NULL,
  CONSTRAINT changes_author_key UNIQUE (change_id, author)
);
CREATE INDEX changes_chart ON changes (chart_id, change_id DESC);

CREATE TABLE change_decisions (
  change_id bigint CONSTRAINT change_decisions_pkey PRIMARY KEY,
  author text COLLATE "C" NOT NULL,
  confirmed boolean NOT NULL,
  decided_by text COLLATE "C" NOT NULL CONSTRAINT change_decisions_by_fkey REFERENCES principals (name),
  reason text NOT NULL DEFAULT '',
  recorded_at timestamptz NOT NULL,
  entry bigint NOT NULL,
  CONSTRAINT change_decisions_change_fkey FOREIGN KEY (change_id, author) REFERENCES changes (change_id, author),
  -- Whoever asked may take it back, and may not confirm it.
  CONSTRAINT change_decisions_second_person CHECK (NOT confirmed OR decided_by <> author)
);

-- Repeated requests ---------------------------------------------------------------------------------------------------

CREATE TABLE requests (
  principal text COLLATE "C" NOT NULL,
  request_id text COLLATE "C" NOT NULL CONSTRAINT requests_id_length CHECK (octet_length(request_id) BETWEEN 1 AND 64),
  method text COLLATE "C" NOT NULL,
  digest bytea NOT NULL CONSTRAINT requests_digest_length CHECK (octet_length(digest) = 32),
  answer bytea NOT NULL,
  recorded_at timestamptz NOT NULL DEFAULT clock_timestamp(),
  CONSTRAINT requests_pkey PRIMARY KEY (principal, request_id)
);

-- Audit chains --------------------------------------------------------------------------------------------------------

-- Chain 0 is keys and settings; every other chain is that of the chart of the same id.
CREATE TABLE audit (
  chain_id bigint NOT NULL,
  entry bigint NOT NULL CONSTRAINT audit_entry CHECK (entry >= 1),
  kind text NOT NULL,
  principal text COLLATE "C" NOT NULL,
  -- What was done, whole or as digests of the rows that carry this entry (JSON).
  payload bytea NOT NULL,
  previous bytea NOT NULL,
  hash bytea NOT NULL,
  recorded_at timestamptz NOT NULL,
  CONSTRAINT audit_pkey PRIMARY KEY (chain_id, entry),
  CONSTRAINT audit_hash CHECK (hash = sha256(previous || payload))
);

CREATE TABLE chain_heads (
  chain_id bigint CONSTRAINT chain_heads_pkey PRIMARY KEY,
  entry bigint NOT NULL,
  hash bytea NOT NULL
) WITH (fillfactor = 70);
INSERT INTO chain_heads VALUES (0, 0, '\x');

-- Guards and grants ---------------------------------------------------------------------------------------------------

DO $$
DECLARE t text;
BEGIN
  FOREACH t IN ARRAY ARRAY['principals', 'keys', 'key_revocations', 'chart_revisions', 'versions', 'version_decisions', 'marks', 'mark_voids',
      'results', 'result_revisions', 'verdicts', 'signal_events', 'signal_notes', 'track_releases', 'changes', 'change_decisions', 'requests', 'audit'] LOOP
    EXECUTE format('CREATE TRIGGER refuse_change BEFORE UPDATE OR DELETE ON %I FOR EACH ROW EXECUTE FUNCTION refuse_change()', t);
    EXECUTE format('CREATE TRIGGER refuse_truncate BEFORE TRUNCATE ON %I FOR EACH STATEMENT EXECUTE FUNCTION refuse_change()', t);
    EXECUTE format('GRANT SELECT, INSERT ON %I TO limitary_service', t);
  END LOOP;
  FOREACH t IN ARRAY ARRAY['charts', 'tracks', 'chain_heads', 'signals'] LOOP
    EXECUTE format('GRANT SELECT, INSERT, UPDATE ON %I TO limitary_service', t);
  END LOOP;
END $$;
-- A result moves when it is amended, so its old place goes.
GRANT SELECT, INSERT, UPDATE, DELETE ON places TO limitary_service;
GRANT USAGE ON SEQUENCE timeline_numbers, result_ids, signal_ids, occurrence_ids TO limitary_service;
