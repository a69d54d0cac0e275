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
    CONSTRAINT beacon_pkey PRIMARY KEY (building_id, id),
    CONSTRAINT beacon_tag_key UNIQUE (building_id, tag)
);

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
