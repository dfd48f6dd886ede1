-- The first schema: every table, the append-only guards and the audit chain's one way in.
-- Locks: creates new objects only. The previous release cannot run beside it: there is none.

CREATE TABLE labs (
  id uuid NOT NULL,
  name text NOT NULL,
  created_at timestamptz(3) NOT NULL,
  CONSTRAINT labs_pkey PRIMARY KEY (id)
);

CREATE TABLE sites (
  id uuid NOT NULL,
  lab_id uuid NOT NULL,
  name text NOT NULL,
  created_at timestamptz(3) NOT NULL,
  CONSTRAINT sites_pkey PRIMARY KEY (id)
);

CREATE TABLE stations (
  id uuid NOT NULL,
  site_id uuid NOT NULL,
  name text NOT NULL,
  created_at timestamptz(3) NOT NULL,
  CONSTRAINT stations_pkey PRIMARY KEY (id)
);

CREATE TABLE accounts (
  id uuid NOT NULL,
  lab_id uuid,
  name text NOT NULL,
  created_at timestamptz(3) NOT NULL,
  closed_at timestamptz(3),
  CONSTRAINT accounts_pkey PRIMARY KEY (id)
);

CREATE TABLE tokens (
  id uuid NOT NULL,
  role text NOT NULL,
  account_id uuid,
  lab_id uuid,
  site_id uuid,
  station_id uuid,
  label text NOT NULL,
  hash bytea NOT NULL,
  created_at timestamptz(3) NOT NULL,
  expires_at timestamptz(3) NOT NULL,
  revoked_at timestamptz(3),
  CONSTRAINT tokens_pkey PRIMARY KEY (id)
);

CREATE TABLE idempotency_answers (
  token_id uuid NOT NULL,
  key text NOT NULL,
  request_hash text NOT NULL,
  status integer NOT NULL,
  body text NOT NULL,
  participant_id uuid,
  created_at timestamptz(3) NOT NULL,
  CONSTRAINT idempotency_answers_pkey PRIMARY KEY (token_id, key)
);

CREATE TABLE service_keys (
  name text NOT NULL,
  material bytea NOT NULL,
  created_at timestamptz(3) NOT NULL,
  CONSTRAINT service_keys_pkey PRIMARY KEY (name)
);

CREATE TABLE audit_chains (
  chain text NOT NULL,
  last_number bigint NOT NULL,
  last_hash text NOT NULL,
  CONSTRAINT audit_chains_pkey PRIMARY KEY (chain)
);

CREATE TABLE audit_entries (
  chain text NOT NULL,
  number bigint NOT NULL,
  content text NOT NULL,
  previous_hash text NOT NULL,
  hash text NOT NULL,
  at timestamptz(3) NOT NULL,
  CONSTRAINT audit_entries_pkey PRIMARY KEY (chain, number)
);

CREATE TABLE audit_checkpoints (
  id uuid NOT NULL,
  lab_id uuid,
  document text NOT NULL,
  signature text NOT NULL,
  created_at timestamptz(3) NOT NULL,
  CONSTRAINT audit_checkpoints_pkey PRIMARY KEY (id)
);

CREATE TABLE disclosures (
  commitment text NOT NULL,
  study_id uuid,
  participant_id uuid,
  salt bytea NOT NULL,
  value text NOT NULL,
  CONSTRAINT disclosures_pkey PRIMARY KEY (commitment)
);

CREATE TABLE looks (
  study_id uuid NOT NULL,
  number integer NOT NULL,
  kind text NOT NULL,
  during_enrolment boolean NOT NULL,
  audit_number bigint NOT NULL,
  at timestamptz(3) NOT NULL,
  CONSTRAINT looks_pkey PRIMARY KEY (study_id, number)
);

CREATE TABLE studies (
  id uuid NOT NULL,
  lab_id uuid NOT NULL,
  name text NOT NULL,
  state text NOT NULL,
  current_version integer,
  secret bytea,
  secret_hash text,
  slots_issued integer NOT NULL DEFAULT 0,
  created_at timestamptz(3) NOT NULL,
  closed_at timestamptz(3),
  CONSTRAINT studies_pkey PRIMARY KEY (id)
);

CREATE TABLE protocol_versions (
  study_id uuid NOT NULL,
  number integer NOT NULL,
  state text NOT NULL,
  document text NOT NULL,
  revision integer NOT NULL,
  sha256 text,
  reason text,
  created_at timestamptz(3) NOT NULL,
  registered_at timestamptz(3),
  CONSTRAINT protocol_versions_pkey PRIMARY KEY (study_id, number)
);

CREATE TABLE study_sites (
  study_id uuid NOT NULL,
  site_id uuid NOT NULL,
  target_enrolment integer NOT NULL,
  slots_issued integer NOT NULL DEFAULT 0,
  CONSTRAINT study_sites_pkey PRIMARY KEY (study_id, site_id)
);

CREATE TABLE slots (
  id uuid NOT NULL,
  study_id uuid NOT NULL,
  site_id uuid NOT NULL,
  protocol_version integer NOT NULL,
  stratum text NOT NULL,
  number integer NOT NULL,
  issue_number integer NOT NULL,
  sequence_index integer NOT NULL,
  draws integer NOT NULL,
  issued_at timestamptz(3) NOT NULL,
  CONSTRAINT slots_pkey PRIMARY KEY (id)
);

CREATE TABLE sequence_counts (
  study_id uuid NOT NULL,
  protocol_version integer NOT NULL,
  site_id uuid NOT NULL,
  stratum text NOT NULL,
  sequence_index integer NOT NULL,
  issued integer NOT NULL,
  CONSTRAINT sequence_counts_pkey PRIMARY KEY (study_id, protocol_version, site_id, stratum, sequence_index)
);

CREATE TABLE participants (
  id uuid NOT NULL,
  study_id uuid NOT NULL,
  site_id uuid NOT NULL,
  stratum text NOT NULL,
  arrived_at timestamptz(3) NOT NULL,
  erased_at timestamptz(3),
  CONSTRAINT participants_pkey PRIMARY KEY (id)
);

CREATE TABLE participant_codes (
  participant_id uuid NOT NULL,
  study_id uuid NOT NULL,
  code text NOT NULL,
  code_key text NOT NULL,
  CONSTRAINT participant_codes_pkey PRIMARY KEY (participant_id)
);

CREATE TABLE occupancies (
  participant_id uuid NOT NULL,
  slot_id uuid NOT NULL,
  occupied_at timestamptz(3) NOT NULL,
  station_id uuid,
  operator text,
  ended_at timestamptz(3),
  ending text,
  reason_code text,
  period_reached integer,
  CONSTRAINT occupancies_pkey PRIMARY KEY (participant_id)
);

CREATE TABLE participant_periods (
  participant_id uuid NOT NULL,
  period integer NOT NULL,
  started_at timestamptz(3),
  station_id uuid,
  operator text,
  deviations text[] NOT NULL,
  completed_at timestamptz(3),
  CONSTRAINT participant_periods_pkey PRIMARY KEY (participant_id, period)
);

CREATE TABLE uploads (
  id uuid NOT NULL,
  study_id uuid NOT NULL,
  site_id uuid NOT NULL,
  token_id uuid NOT NULL,
  operator text,
  acceptance text NOT NULL,
  media_type text NOT NULL,
  sha256 text,
  rows integer NOT NULL,
  accepted integer NOT NULL,
  repeated integer NOT NULL,
  refused integer NOT NULL,
  flagged integer NOT NULL,
  deviations integer NOT NULL,
  received_at timestamptz(3) NOT NULL,
  CONSTRAINT uploads_pkey PRIMARY KEY (id)
);

CREATE TABLE refused_rows (
  upload_id uuid NOT NULL,
  row integer NOT NULL,
  participant_id uuid,
  code_key text,
  raw text,
  faults text NOT NULL,
  CONSTRAINT refused_rows_pkey PRIMARY KEY (upload_id, row)
);

CREATE TABLE trials (
  id uuid NOT NULL,
  study_id uuid NOT NULL,
  participant_id uuid NOT NULL,
  period integer NOT NULL,
  repetition integer NOT NULL,
  version integer NOT NULL,
  current boolean NOT NULL,
  condition text NOT NULL,
  deviation boolean NOT NULL,
  flags text[] NOT NULL,
  commitment text NOT NULL,
  upload_id uuid,
  received_at timestamptz(3) NOT NULL,
  CONSTRAINT trials_pkey PRIMARY KEY (id)
);

CREATE TABLE trial_contents (
  trial_id uuid NOT NULL,
  study_id uuid NOT NULL,
  participant_id uuid NOT NULL,
  record_id text NOT NULL,
  version integer NOT NULL,
  salt bytea NOT NULL,
  content text NOT NULL,
  CONSTRAINT trial_contents_pkey PRIMARY KEY (trial_id)
);

CREATE TABLE analyses (
  id uuid NOT NULL,
  study_id uuid NOT NULL,
  protocol_version integer NOT NULL,
  state text NOT NULL,
  stage text NOT NULL,
  progress double precision NOT NULL,
  seed text NOT NULL,
  requested_by text NOT NULL,
  requested_at timestamptz(3) NOT NULL,
  started_at timestamptz(3),
  finished_at timestamptz(3),
  cancel_requested boolean NOT NULL DEFAULT false,
  failure text,
  snapshot_id uuid,
  CONSTRAINT analyses_pkey PRIMARY KEY (id)
);

CREATE TABLE snapshots (
  id uuid NOT NULL,
  study_id uuid NOT NULL,
  sha256 text NOT NULL,
  body text NOT NULL,
  created_at timestamptz(3) NOT NULL,
  CONSTRAINT snapshots_pkey PRIMARY KEY (id)
);

CREATE TABLE snapshot_participants (
  snapshot_id uuid NOT NULL,
  participant_id uuid NOT NULL,
  salt bytea NOT NULL,
  content text NOT NULL,
  CONSTRAINT snapshot_participants_pkey PRIMARY KEY (snapshot_id, participant_id)
);

CREATE TABLE reports (
  id uuid NOT NULL,
  study_id uuid NOT NULL,
  number integer NOT NULL,
  analysis_id uuid NOT NULL,
  snapshot_id uuid NOT NULL,
  protocol_version integer NOT NULL,
  protocol_sha256 text NOT NULL,
  snapshot_sha256 text NOT NULL,
  engine_version text NOT NULL,
  seed text NOT NULL,
  body text NOT NULL,
  sha256 text NOT NULL,
  page text NOT NULL,
  page_sha256 text NOT NULL,
  requested_by text NOT NULL,
  created_at timestamptz(3) NOT NULL,
  CONSTRAINT reports_pkey PRIMARY KEY (id)
);

CREATE UNIQUE INDEX labs_name_key ON labs (name);
CREATE UNIQUE INDEX sites_lab_id_name_key ON sites (lab_id, name);
CREATE UNIQUE INDEX stations_site_id_name_key ON stations (site_id, name);
CREATE UNIQUE INDEX tokens_hash_key ON tokens (hash);
CREATE INDEX idempotency_answers_participant_id_idx ON idempotency_answers (participant_id);
CREATE INDEX disclosures_participant_id_idx ON disclosures (participant_id);
CREATE UNIQUE INDEX studies_lab_id_name_key ON studies (lab_id, name);
CREATE UNIQUE INDEX slots_study_id_site_id_number_key ON slots (study_id, site_id, number);
CREATE UNIQUE INDEX slots_study_id_issue_number_key ON slots (study_id, issue_number);
CREATE INDEX participants_study_id_site_id_idx ON participants (study_id, site_id);
CREATE UNIQUE INDEX participant_codes_study_id_code_key_key ON participant_codes (study_id, code_key);
CREATE INDEX occupancies_slot_id_idx ON occupancies (slot_id);
CREATE INDEX uploads_study_id_idx ON uploads (study_id);
CREATE INDEX refused_rows_participant_id_idx ON refused_rows (participant_id);
CREATE INDEX refused_rows_code_key_idx ON refused_rows (code_key);
CREATE UNIQUE INDEX trials_participant_id_period_repetition_version_key ON trials (participant_id, period, repetition, version);
CREATE INDEX trials_study_id_idx ON trials (study_id);
CREATE UNIQUE INDEX trial_contents_study_id_record_id_version_key ON trial_contents (study_id, record_id, version);
CREATE INDEX trial_contents_participant_id_idx ON trial_contents (participant_id);
CREATE INDEX analyses_study_id_idx ON analyses (study_id);
CREATE INDEX snapshot_participants_participant_id_idx ON snapshot_participants (participant_id);
CREATE UNIQUE INDEX reports_analysis_id_key ON reports (analysis_id);
CREATE UNIQUE INDEX reports_study_id_number_key ON reports (study_id, number);

ALTER TABLE sites ADD CONSTRAINT sites_lab_id_fkey FOREIGN KEY (lab_id)
  REFERENCES labs (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE stations ADD CONSTRAINT stations_site_id_fkey FOREIGN KEY (site_id)
  REFERENCES sites (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE accounts ADD CONSTRAINT accounts_lab_id_fkey FOREIGN KEY (lab_id)
  REFERENCES labs (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE tokens ADD CONSTRAINT tokens_account_id_fkey FOREIGN KEY (account_id)
  REFERENCES accounts (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE tokens ADD CONSTRAINT tokens_lab_id_fkey FOREIGN KEY (lab_id)
  REFERENCES labs (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE tokens ADD CONSTRAINT tokens_site_id_fkey FOREIGN KEY (site_id)
  REFERENCES sites (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE tokens ADD CONSTRAINT tokens_station_id_fkey FOREIGN KEY (station_id)
  REFERENCES stations (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE looks ADD CONSTRAINT looks_study_id_fkey FOREIGN KEY (study_id)
  REFERENCES studies (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE studies ADD CONSTRAINT studies_lab_id_fkey FOREIGN KEY (lab_id)
  REFERENCES labs (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE protocol_versions ADD CONSTRAINT protocol_versions_study_id_fkey FOREIGN KEY (study_id)
  REFERENCES studies (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE study_sites ADD CONSTRAINT study_sites_study_id_fkey FOREIGN KEY (study_id)
  REFERENCES studies (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE study_sites ADD CONSTRAINT study_sites_site_id_fkey FOREIGN KEY (site_id)
  REFERENCES sites (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE slots ADD CONSTRAINT slots_study_id_fkey FOREIGN KEY (study_id)
  REFERENCES studies (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE slots ADD CONSTRAINT slots_study_id_protocol_version_fkey FOREIGN KEY (study_id, protocol_version)
  REFERENCES protocol_versions (study_id, number) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE sequence_counts ADD CONSTRAINT sequence_counts_study_id_fkey FOREIGN KEY (study_id)
  REFERENCES studies (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE participants ADD CONSTRAINT participants_study_id_fkey FOREIGN KEY (study_id)
  REFERENCES studies (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE participant_codes ADD CONSTRAINT participant_codes_participant_id_fkey FOREIGN KEY (participant_id)
  REFERENCES participants (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE occupancies ADD CONSTRAINT occupancies_participant_id_fkey FOREIGN KEY (participant_id)
  REFERENCES participants (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE occupancies ADD CONSTRAINT occupancies_slot_id_fkey FOREIGN KEY (slot_id)
  REFERENCES slots (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE participant_periods ADD CONSTRAINT participant_periods_participant_id_fkey FOREIGN KEY (participant_id)
  REFERENCES participants (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE uploads ADD CONSTRAINT uploads_study_id_fkey FOREIGN KEY (study_id)
  REFERENCES studies (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE refused_rows ADD CONSTRAINT refused_rows_upload_id_fkey FOREIGN KEY (upload_id)
  REFERENCES uploads (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE trials ADD CONSTRAINT trials_study_id_fkey FOREIGN KEY (study_id)
  REFERENCES studies (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE trials ADD CONSTRAINT trials_participant_id_fkey FOREIGN KEY (participant_id)
  REFERENCES participants (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE trials ADD CONSTRAINT trials_upload_id_fkey FOREIGN KEY (upload_id)
  REFERENCES uploads (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE trial_contents ADD CONSTRAINT trial_contents_trial_id_fkey FOREIGN KEY (trial_id)
  REFERENCES trials (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE analyses ADD CONSTRAINT analyses_study_id_fkey FOREIGN KEY (study_id)
  REFERENCES studies (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE analyses ADD CONSTRAINT analyses_snapshot_id_fkey FOREIGN KEY (snapshot_id)
  REFERENCES snapshots (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE snapshots ADD CONSTRAINT snapshots_study_id_fkey FOREIGN KEY (study_id)
  REFERENCES studies (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE snapshot_participants ADD CONSTRAINT snapshot_participants_snapshot_id_fkey FOREIGN KEY (snapshot_id)
  REFERENCES snapshots (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE reports ADD CONSTRAINT reports_study_id_fkey FOREIGN KEY (study_id)
  REFERENCES studies (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE reports ADD CONSTRAINT reports_analysis_id_fkey FOREIGN KEY (analysis_id)
  REFERENCES analyses (id) ON DELETE RESTRICT ON UPDATE CASCADE;
ALTER TABLE reports ADD CONSTRAINT reports_snapshot_id_fkey FOREIGN KEY (snapshot_id)
  REFERENCES snapshots (id) ON DELETE RESTRICT ON UPDATE CASCADE;

-- A slot has at most one occupancy without an end.
CREATE UNIQUE INDEX occupancies_open_slot_key ON occupancies (slot_id) WHERE ended_at IS NULL;

-- One version of a trial is the current one; one draft a study.
CREATE UNIQUE INDEX trials_current_key ON trials (participant_id, period, repetition) WHERE current;
CREATE UNIQUE INDEX protocol_versions_draft_key ON protocol_versions (study_id) WHERE state = 'draft';

-- States and roles outside the vocabulary are faults of the service; the database stops them too.
ALTER TABLE tokens ADD CONSTRAINT tokens_role_check CHECK (role IN
  ('administrator', 'study-lead', 'site-coordinator', 'station', 'analyst', 'auditor'));
ALTER TABLE studies ADD CONSTRAINT studies_state_check CHECK (state IN
  ('draft', 'enrolling', 'paused', 'closed'));
ALTER TABLE protocol_versions ADD CONSTRAINT protocol_versions_state_check CHECK (state IN
  ('draft', 'registered'));
ALTER TABLE occupancies ADD CONSTRAINT occupancies_ending_check CHECK
  ((ended_at IS NULL) = (ending IS NULL) AND ending IN ('withdrawn', 'void'));
ALTER TABLE analyses ADD CONSTRAINT analyses_state_check CHECK (state IN
  ('queued', 'running', 'succeeded', 'failed', 'cancelled'));

-- ---- rows that nobody may change ---------------------------------------------------------------

CREATE FUNCTION refuse_change() RETURNS trigger LANGUAGE plpgsql AS $$
BEGIN
  RAISE EXCEPTION '% of % is refused: its rows are immutable', TG_OP, TG_TABLE_NAME
    USING ERRCODE = 'restrict_violation';
END;
$$;

CREATE TRIGGER audit_entries_immutable BEFORE UPDATE OR DELETE ON audit_entries
  FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER audit_entries_kept BEFORE TRUNCATE ON audit_entries
  FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
CREATE TRIGGER audit_checkpoints_immutable BEFORE UPDATE OR DELETE ON audit_checkpoints
  FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER audit_checkpoints_kept BEFORE TRUNCATE ON audit_checkpoints
  FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
CREATE TRIGGER looks_immutable BEFORE UPDATE OR DELETE ON looks
  FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER looks_kept BEFORE TRUNCATE ON looks
  FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
CREATE TRIGGER snapshots_immutable BEFORE UPDATE OR DELETE ON snapshots
  FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER snapshots_kept BEFORE TRUNCATE ON snapshots
  FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
CREATE TRIGGER reports_immutable BEFORE UPDATE OR DELETE ON reports
  FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER reports_kept BEFORE TRUNCATE ON reports
  FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();
CREATE TRIGGER slots_immutable BEFORE UPDATE OR DELETE ON slots
  FOR EACH ROW EXECUTE FUNCTION refuse_change();
CREATE TRIGGER slots_kept BEFORE TRUNCATE ON slots
  FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();

-- A registered protocol version is fixed; a draft may be edited, registered or replaced.
CREATE TRIGGER protocol_versions_registered_immutable BEFORE UPDATE OR DELETE ON protocol_versions
  FOR EACH ROW WHEN (OLD.state = 'registered') EXECUTE FUNCTION refuse_change();
CREATE TRIGGER protocol_versions_kept BEFORE TRUNCATE ON protocol_versions
  FOR EACH STATEMENT EXECUTE FUNCTION refuse_change();

-- ---- the audit chain's one way in --------------------------------------------------------------

-- Appends one entry to a chain and returns its number and hash. One function, so that both
-- database drivers of the service append in the same way, inside the transaction of the change
-- that the entry records. The chain's head stays locked until that transaction ends, which is what
-- makes the numbers gapless. Whoever appends to several chains in one transaction takes the
-- study's chain before `administration`.
CREATE FUNCTION audit_append(p_chain text, p_content text, p_at timestamptz)
RETURNS TABLE (number bigint, hash text) LANGUAGE plpgsql AS $$
DECLARE
  next_number bigint;
  head_hash text;
  new_hash text;
BEGIN
  INSERT INTO audit_chains (chain, last_number, last_hash) VALUES (p_chain, 0, repeat('0', 64))
    ON CONFLICT (chain) DO NOTHING;
  SELECT c.last_number + 1, c.last_hash INTO next_number, head_hash
    FROM audit_chains c WHERE c.chain = p_chain FOR UPDATE;
  new_hash := encode(sha256(convert_to(
    p_chain || E'\n' || next_number || E'\n' || head_hash || E'\n' || p_content, 'UTF8')), 'hex');
  INSERT INTO audit_entries (chain, number, content, previous_hash, hash, at)
    VALUES (p_chain, next_number, p_content, head_hash, new_hash, p_at);
  UPDATE audit_chains c SET last_number = next_number, last_hash = new_hash WHERE c.chain = p_chain;
  RETURN QUERY SELECT next_number, new_hash;
END;
$$;
