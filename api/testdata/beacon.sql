CREATE TABLE beacon (
    building_id uuid NOT NULL,
    id          uuid NOT NULL,
    version     bigint NOT NULL,
    created_at  timestamptz NOT NULL,
    updated_at  timestamptz NOT NULL,
    retired_at  timestamptz,
    tag         text NOT NULL,
    colour      text NOT NULL,
    note        text NOT NULL,
    reach_m     double precision,
    lamps       bigint,
    lit         boolean,
    keeper_id   uuid,
    seen_at     timestamptz,
    built       date,
    permits     text[],
    maker       jsonb,
    CONSTRAINT beacon_pkey PRIMARY KEY (building_id, id)
);

CREATE UNIQUE INDEX beacon_tag_key ON beacon (building_id, tag) WHERE retired_at IS NULL;

CREATE TABLE hue (
    id          uuid NOT NULL,
    version     bigint NOT NULL,
    created_at  timestamptz NOT NULL,
    updated_at  timestamptz NOT NULL,
    retired_at  timestamptz,
    name        text NOT NULL,
    CONSTRAINT hue_pkey PRIMARY KEY (id),
    CONSTRAINT hue_name_key UNIQUE (name)
);
