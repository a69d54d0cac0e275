BEGIN;

-- Estate tables: local and small. They point to buildings by value, without a foreign key.

CREATE TABLE person (
    id                     uuid NOT NULL,
    version                bigint NOT NULL,
    created_at             timestamptz NOT NULL,
    updated_at             timestamptz NOT NULL,
    retired_at             timestamptz,
    name                   text NOT NULL,
    email                  text NOT NULL DEFAULT '',
    CONSTRAINT person_pkey PRIMARY KEY (id)
);

CREATE TABLE api_key (
    id                     uuid NOT NULL,
    version                bigint NOT NULL,
    created_at             timestamptz NOT NULL,
    updated_at             timestamptz NOT NULL,
    retired_at             timestamptz,
    name                   text NOT NULL,
    person_id              uuid,
    hash                   bytea NOT NULL,
    expires_at             timestamptz,
    last_used_at           timestamptz,
    CONSTRAINT api_key_pkey PRIMARY KEY (id),
    CONSTRAINT api_key_hash_key UNIQUE (hash),
    CONSTRAINT api_key_person_fkey FOREIGN KEY (person_id) REFERENCES person (id)
);

-- A role of a person or a key in one building, or in all where building_id is absent.
CREATE TABLE access_grant (
    id                     uuid NOT NULL,
    version                bigint NOT NULL,
    created_at             timestamptz NOT NULL,
    updated_at             timestamptz NOT NULL,
    retired_at             timestamptz,
    person_id              uuid,
    api_key_id             uuid,
    role                   text NOT NULL,
    building_id            uuid,
    until                  timestamptz,
    CONSTRAINT access_grant_pkey PRIMARY KEY (id),
    CONSTRAINT access_grant_person_fkey FOREIGN KEY (person_id) REFERENCES person (id),
    CONSTRAINT access_grant_api_key_fkey FOREIGN KEY (api_key_id) REFERENCES api_key (id),
    CONSTRAINT access_grant_holder_check CHECK (num_nonnulls(person_id, api_key_id) = 1),
    CONSTRAINT access_grant_role_check CHECK (role IN ('viewer', 'crew', 'contractor', 'integrator', 'planner', 'administrator'))
);

CREATE INDEX access_grant_person_idx ON access_grant (person_id) WHERE retired_at IS NULL;
CREATE INDEX access_grant_api_key_idx ON access_grant (api_key_id) WHERE retired_at IS NULL;

CREATE TABLE idempotency (
    principal              text NOT NULL,
    route                  text NOT NULL,
    key                    text NOT NULL,
    body_hash              bytea NOT NULL,
    status                 integer NOT NULL,
    headers                jsonb NOT NULL,
    body                   bytea NOT NULL,
    created_at             timestamptz NOT NULL,
    CONSTRAINT idempotency_pkey PRIMARY KEY (principal, route, key)
);

CREATE INDEX idempotency_created_idx ON idempotency (created_at);

-- Reviews owed: of one tree, of a building, or (no building) of every building.
CREATE TABLE review_due (
    id                     uuid NOT NULL,
    building_id            uuid,
    tree_id                uuid,
    model_kind             text NOT NULL DEFAULT '',
    model_id               uuid,
    why                    text NOT NULL,
    created_at             timestamptz NOT NULL,
    CONSTRAINT review_due_pkey PRIMARY KEY (id)
);

CREATE TABLE central_head (
    id                     smallint NOT NULL,
    audit_seq              bigint NOT NULL,
    audit_hash             bytea NOT NULL,
    event_seq              bigint NOT NULL,
    CONSTRAINT central_head_pkey PRIMARY KEY (id),
    CONSTRAINT central_head_one_check CHECK (id = 1)
);

INSERT INTO central_head (id, audit_seq, audit_hash, event_seq) VALUES (1, 0, '', 0);

CREATE TABLE audit_central (
    seq                    bigint NOT NULL,
    body                   text NOT NULL,
    hash                   bytea NOT NULL,
    subject_kind           text NOT NULL,
    subject_id             uuid NOT NULL,
    by_id                  uuid NOT NULL,
    at                     timestamptz NOT NULL,
    CONSTRAINT audit_central_pkey PRIMARY KEY (seq)
);

CREATE TABLE event_central (
    seq                    bigint NOT NULL,
    type                   text NOT NULL,
    subject_kind           text NOT NULL,
    subject_id             uuid NOT NULL,
    body                   jsonb NOT NULL,
    at                     timestamptz NOT NULL,
    CONSTRAINT event_central_pkey PRIMARY KEY (seq)
);

CREATE TABLE import_run (
    id                     uuid NOT NULL,
    building_id            uuid,
    file_name              text NOT NULL,
    file_hash              bytea NOT NULL,
    form                   text NOT NULL,
    rows_read              integer NOT NULL,
    rows_new               integer NOT NULL,
    rows_changed           integer NOT NULL,
    rows_refused           integer NOT NULL,
    by_kind                text NOT NULL,
    by_id                  uuid NOT NULL,
    created_at             timestamptz NOT NULL,
    CONSTRAINT import_run_pkey PRIMARY KEY (id)
);

-- Which column of somebody's sheet means which field, kept for the next file with the same headers.
CREATE TABLE column_match (
    id                     uuid NOT NULL,
    version                bigint NOT NULL,
    created_at             timestamptz NOT NULL,
    updated_at             timestamptz NOT NULL,
    retired_at             timestamptz,
    name                   text NOT NULL,
    header_hash            bytea NOT NULL,
    columns                jsonb NOT NULL,
    words                  jsonb NOT NULL,
    CONSTRAINT column_match_pkey PRIMARY KEY (id),
    CONSTRAINT column_match_header_key UNIQUE (header_hash)
);

COMMIT;
