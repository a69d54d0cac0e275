BEGIN;

-- Building tables: every key leads with building_id, so that a building lives on one shard.

CREATE TABLE building_head (
    building_id            uuid NOT NULL,
    audit_seq              bigint NOT NULL,
    audit_hash             bytea NOT NULL,
    event_seq              bigint NOT NULL,
    order_number           bigint NOT NULL,
    CONSTRAINT building_head_pkey PRIMARY KEY (building_id),
    CONSTRAINT building_head_building_fkey FOREIGN KEY (building_id) REFERENCES building (id)
);

-- What an hour of labour, a kilowatt-hour and the like cost in this building from a date on.
CREATE TABLE building_rate (
    building_id            uuid NOT NULL,
    id                     uuid NOT NULL,
    version                bigint NOT NULL,
    created_at             timestamptz NOT NULL,
    updated_at             timestamptz NOT NULL,
    retired_at             timestamptz,
    rate                   text NOT NULL,
    from_date              date NOT NULL,
    amount                 numeric(14,4) NOT NULL,
    currency               text NOT NULL DEFAULT '',
    source                 text NOT NULL DEFAULT '',
    CONSTRAINT building_rate_pkey PRIMARY KEY (building_id, id),
    CONSTRAINT building_rate_building_fkey FOREIGN KEY (building_id) REFERENCES building (id)
);

CREATE UNIQUE INDEX building_rate_from_key ON building_rate (building_id, rate, currency, from_date) WHERE retired_at IS NULL;

CREATE TABLE building_total (
    building_id            uuid NOT NULL,
    name                   text NOT NULL,
    value                  double precision NOT NULL,
    updated_at             timestamptz NOT NULL,
    CONSTRAINT building_total_pkey PRIMARY KEY (building_id, name),
    CONSTRAINT building_total_building_fkey FOREIGN KEY (building_id) REFERENCES building (id)
);

CREATE TABLE space (
    building_id            uuid NOT NULL,
    id                     uuid NOT NULL,
    version                bigint NOT NULL,
    created_at             timestamptz NOT NULL,
    updated_at             timestamptz NOT NULL,
    retired_at             timestamptz,
    level                  text NOT NULL DEFAULT '',
    name                   text NOT NULL,
    use                    text NOT NULL DEFAULT '',
    area_m2                double precision,
    mounting_m             double precision,
    reach                  text NOT NULL DEFAULT '',
    ceiling                text NOT NULL DEFAULT '',
    beneath                text NOT NULL DEFAULT '',
    occupier               text NOT NULL DEFAULT '',
    contact                text NOT NULL DEFAULT '',
    notice                 text NOT NULL DEFAULT '',
    hours_allowed          text NOT NULL DEFAULT '',
    escort                 boolean,
    asbestos               text NOT NULL DEFAULT '',
    permits                text[],
    initial_lx             double precision,
    required_lx            double precision,
    cleanliness            text NOT NULL DEFAULT '',
    cleaning_months        double precision,
    yearly_hours           double precision,
    survey_state           text NOT NULL DEFAULT '',
    external_id            text NOT NULL DEFAULT '',
    fact_source            text NOT NULL DEFAULT '',
    note                   text NOT NULL DEFAULT '',
    CONSTRAINT space_pkey PRIMARY KEY (building_id, id),
    CONSTRAINT space_building_fkey FOREIGN KEY (building_id) REFERENCES building (id)
);

CREATE UNIQUE INDEX space_name_key ON space (building_id, level, name) WHERE retired_at IS NULL;

CREATE TABLE make_up (
    building_id            uuid NOT NULL,
    id                     uuid NOT NULL,
    version                bigint NOT NULL,
    created_at             timestamptz NOT NULL,
    updated_at             timestamptz NOT NULL,
    retired_at             timestamptz,
    name                   text NOT NULL DEFAULT '',
    fixture_model_id       uuid,
    gear                   text NOT NULL DEFAULT '',
    lamp_model_id          uuid,
    lamp_count             integer,
    driver_model_id        uuid,
    fixtures_per_driver    integer,
    dimmer_model_id        uuid,
    cable_m                double precision,
    cable_mm2              double precision,
    cable_class            text NOT NULL DEFAULT '',
    fact_source            text NOT NULL DEFAULT '',
    note                   text NOT NULL DEFAULT '',
    CONSTRAINT make_up_pkey PRIMARY KEY (building_id, id),
    CONSTRAINT make_up_building_fkey FOREIGN KEY (building_id) REFERENCES building (id),
    CONSTRAINT make_up_fixture_model_fkey FOREIGN KEY (fixture_model_id) REFERENCES fixture_model (id),
    CONSTRAINT make_up_lamp_model_fkey FOREIGN KEY (lamp_model_id) REFERENCES lamp_model (id),
    CONSTRAINT make_up_driver_model_fkey FOREIGN KEY (driver_model_id) REFERENCES driver_model (id),
    CONSTRAINT make_up_dimmer_model_fkey FOREIGN KEY (dimmer_model_id) REFERENCES dimmer_model (id)
);

CREATE UNIQUE INDEX make_up_name_key ON make_up (building_id, name) WHERE retired_at IS NULL;

CREATE TABLE circuit (
    building_id            uuid NOT NULL,
    id                     uuid NOT NULL,
    version                bigint NOT NULL,
    created_at             timestamptz NOT NULL,
    updated_at             timestamptz NOT NULL,
    retired_at             timestamptz,
    board                  text NOT NULL DEFAULT '',
    way                    text NOT NULL DEFAULT '',
    space_id               uuid,
    external_id            text NOT NULL DEFAULT '',
    note                   text NOT NULL DEFAULT '',
    tree_id                uuid NOT NULL,
    nominal_v              double precision,
    phases                 integer,
    curve                  text NOT NULL DEFAULT '',
    rating_a               double precision,
    listed_100             boolean,
    pulse_curve            jsonb,
    rcd                    text NOT NULL DEFAULT '',
    rcd_ma                 double precision,
    rcd_type               text NOT NULL DEFAULT '',
    cable_mm2              double precision,
    cable_m                double precision,
    neutral                text NOT NULL DEFAULT '',
    central_battery        text NOT NULL DEFAULT '',
    fact_source            text NOT NULL DEFAULT '',
    CONSTRAINT circuit_pkey PRIMARY KEY (building_id, id),
    CONSTRAINT circuit_building_fkey FOREIGN KEY (building_id) REFERENCES building (id),
    CONSTRAINT circuit_space_fkey FOREIGN KEY (building_id, space_id) REFERENCES space (building_id, id)
);

CREATE UNIQUE INDEX circuit_way_key ON circuit (building_id, board, way) WHERE retired_at IS NULL;
CREATE INDEX circuit_tree_idx ON circuit (building_id, tree_id);

-- Dimmers, drivers and luminaires: one table, so that a label is unique among them and a feed may name any.
CREATE TABLE place (
    building_id            uuid NOT NULL,
    id                     uuid NOT NULL,
    version                bigint NOT NULL,
    created_at             timestamptz NOT NULL,
    updated_at             timestamptz NOT NULL,
    retired_at             timestamptz,
    tag                    text NOT NULL DEFAULT '',
    space_id               uuid,
    position               text NOT NULL DEFAULT '',
    fed_by_circuit_id      uuid,
    fed_by_place_id        uuid,
    fed_output             integer,
    make_up_id             uuid,
    fitted_at              timestamptz,
    external_id            text NOT NULL DEFAULT '',
    fact_source            text NOT NULL DEFAULT '',
    note                   text NOT NULL DEFAULT '',
    kind                   text NOT NULL DEFAULT '',
    tree_id                uuid NOT NULL,
    dimmer_model_id        uuid,
    set_edge               text NOT NULL DEFAULT '',
    neutral_wired          boolean,
    driver_model_id        uuid,
    set_ma                 double precision,
    polarity               text NOT NULL DEFAULT '',
    cable_m                double precision,
    cable_mm2              double precision,
    cable_class            text NOT NULL DEFAULT '',
    cable_taps_m           double precision[],
    cable_rated_a          double precision,
    terminal_rated_a       double precision,
    segregated             boolean,
    touchable_live         boolean,
    air_c                  double precision,
    insulation_over        boolean,
    in_enclosure           boolean,
    separation_before      text NOT NULL DEFAULT '',
    fixture_model_id       uuid,
    gear                   text NOT NULL DEFAULT '',
    lamp_model_id          uuid,
    lamp_count             integer,
    lamps_fitted_at        timestamptz,
    switch_group           text NOT NULL DEFAULT '',
    strings                integer,
    fed_ends               text NOT NULL DEFAULT '',
    starter                text NOT NULL DEFAULT '',
    earth                  boolean,
    conversion             text NOT NULL DEFAULT '',
    conversion_label       boolean,
    conversion_papers      boolean,
    shunted_here           boolean,
    zone                   text NOT NULL DEFAULT '',
    emergency_mode         text NOT NULL DEFAULT '',
    emergency_source       text NOT NULL DEFAULT '',
    emergency_min          double precision,
    battery                text NOT NULL DEFAULT '',
    self_test              boolean,
    escape_route           text NOT NULL DEFAULT '',
    CONSTRAINT place_pkey PRIMARY KEY (building_id, id),
    CONSTRAINT place_building_fkey FOREIGN KEY (building_id) REFERENCES building (id),
    CONSTRAINT place_space_fkey FOREIGN KEY (building_id, space_id) REFERENCES space (building_id, id),
    CONSTRAINT place_make_up_fkey FOREIGN KEY (building_id, make_up_id) REFERENCES make_up (building_id, id),
    CONSTRAINT place_fed_by_circuit_fkey FOREIGN KEY (building_id, fed_by_circuit_id) REFERENCES circuit (building_id, id),
    CONSTRAINT place_fed_by_place_fkey FOREIGN KEY (building_id, fed_by_place_id) REFERENCES place (building_id, id),
    CONSTRAINT place_dimmer_model_fkey FOREIGN KEY (dimmer_model_id) REFERENCES dimmer_model (id),
    CONSTRAINT place_driver_model_fkey FOREIGN KEY (driver_model_id) REFERENCES driver_model (id),
    CONSTRAINT place_fixture_model_fkey FOREIGN KEY (fixture_model_id) REFERENCES fixture_model (id),
    CONSTRAINT place_lamp_model_fkey FOREIGN KEY (lamp_model_id) REFERENCES lamp_model (id),
    CONSTRAINT place_kind_check CHECK (kind IN ('dimmer', 'driver', 'fixture')),
    CONSTRAINT place_one_feed_check CHECK (num_nonnulls(fed_by_circuit_id, fed_by_place_id) <= 1),
    CONSTRAINT place_not_itself_check CHECK (fed_by_place_id <> id),
    CONSTRAINT place_lamp_count_check CHECK (lamp_count BETWEEN 0 AND 1000)
);

CREATE UNIQUE INDEX place_tag_key ON place (building_id, tag) WHERE retired_at IS NULL;
CREATE INDEX place_tree_idx ON place (building_id, tree_id, kind);
CREATE INDEX place_space_idx ON place (building_id, space_id);
CREATE INDEX place_fed_by_idx ON place (building_id, fed_by_place_id) WHERE fed_by_place_id IS NOT NULL;

CREATE TABLE feed (
    building_id            uuid NOT NULL,
    id                     uuid NOT NULL,
    version                bigint NOT NULL,
    created_at             timestamptz NOT NULL,
    updated_at             timestamptz NOT NULL,
    retired_at             timestamptz,
    place_id               uuid NOT NULL,
    input                  text NOT NULL DEFAULT '',
    from_circuit_id        uuid,
    from_place_id          uuid,
    purpose                text NOT NULL DEFAULT '',
    note                   text NOT NULL DEFAULT '',
    CONSTRAINT feed_pkey PRIMARY KEY (building_id, id),
    CONSTRAINT feed_building_fkey FOREIGN KEY (building_id) REFERENCES building (id),
    CONSTRAINT feed_place_fkey FOREIGN KEY (building_id, place_id) REFERENCES place (building_id, id),
    CONSTRAINT feed_from_circuit_fkey FOREIGN KEY (building_id, from_circuit_id) REFERENCES circuit (building_id, id),
    CONSTRAINT feed_from_place_fkey FOREIGN KEY (building_id, from_place_id) REFERENCES place (building_id, id),
    CONSTRAINT feed_one_source_check CHECK (num_nonnulls(from_circuit_id, from_place_id) = 1),
    CONSTRAINT feed_purpose_check CHECK (purpose IN ('normal', 'permanent_live', 'emergency_supply'))
);

CREATE INDEX feed_place_idx ON feed (building_id, place_id);

CREATE TABLE control (
    building_id            uuid NOT NULL,
    id                     uuid NOT NULL,
    version                bigint NOT NULL,
    created_at             timestamptz NOT NULL,
    updated_at             timestamptz NOT NULL,
    retired_at             timestamptz,
    dimmer_id              uuid NOT NULL,
    place_id               uuid,
    circuit_id             uuid,
    position               integer NOT NULL,
    path                   text NOT NULL DEFAULT '',
    voltage_found          text NOT NULL DEFAULT '',
    note                   text NOT NULL DEFAULT '',
    CONSTRAINT control_pkey PRIMARY KEY (building_id, id),
    CONSTRAINT control_building_fkey FOREIGN KEY (building_id) REFERENCES building (id),
    CONSTRAINT control_dimmer_fkey FOREIGN KEY (building_id, dimmer_id) REFERENCES place (building_id, id),
    CONSTRAINT control_place_fkey FOREIGN KEY (building_id, place_id) REFERENCES place (building_id, id),
    CONSTRAINT control_circuit_fkey FOREIGN KEY (building_id, circuit_id) REFERENCES circuit (building_id, id),
    CONSTRAINT control_one_target_check CHECK (num_nonnulls(place_id, circuit_id) = 1),
    CONSTRAINT control_path_check CHECK (path IN ('power_path', 'signal'))
);

CREATE INDEX control_dimmer_idx ON control (building_id, dimmer_id);

CREATE TABLE unit (
    building_id            uuid NOT NULL,
    id                     uuid NOT NULL,
    version                bigint NOT NULL,
    created_at             timestamptz NOT NULL,
    updated_at             timestamptz NOT NULL,
    retired_at             timestamptz,
    place_id               uuid NOT NULL,
    part                   text NOT NULL DEFAULT '',
    holder                 integer NOT NULL,
    lamp_model_id          uuid,
    driver_model_id        uuid,
    dimmer_model_id        uuid,
    fixture_model_id       uuid,
    serial                 text NOT NULL DEFAULT '',
    batch                  text NOT NULL DEFAULT '',
    supplier               text NOT NULL DEFAULT '',
    fitted_at              timestamptz,
    fitted_hours           double precision,
    removed_at             timestamptz,
    removed_hours          double precision,
    removed_hours_low      double precision,
    removed_hours_high     double precision,
    removed_why            text NOT NULL DEFAULT '',
    temporary_until        date,
    warranty_until         date,
    odd                    boolean NOT NULL,
    note                   text NOT NULL DEFAULT '',
    CONSTRAINT unit_pkey PRIMARY KEY (building_id, id),
    CONSTRAINT unit_building_fkey FOREIGN KEY (building_id) REFERENCES building (id),
    CONSTRAINT unit_place_fkey FOREIGN KEY (building_id, place_id) REFERENCES place (building_id, id),
    CONSTRAINT unit_lamp_model_fkey FOREIGN KEY (lamp_model_id) REFERENCES lamp_model (id),
    CONSTRAINT unit_driver_model_fkey FOREIGN KEY (driver_model_id) REFERENCES driver_model (id),
    CONSTRAINT unit_dimmer_model_fkey FOREIGN KEY (dimmer_model_id) REFERENCES dimmer_model (id),
    CONSTRAINT unit_fixture_model_fkey FOREIGN KEY (fixture_model_id) REFERENCES fixture_model (id),
    CONSTRAINT unit_part_check CHECK (part IN ('lamp', 'driver', 'dimmer', 'fixture', 'battery')),
    CONSTRAINT unit_stay_check CHECK (removed_at >= fitted_at)
);

CREATE UNIQUE INDEX unit_current_key ON unit (building_id, place_id, part, holder) WHERE removed_at IS NULL AND retired_at IS NULL;
CREATE INDEX unit_odd_idx ON unit (building_id, place_id) WHERE odd AND removed_at IS NULL;
CREATE INDEX unit_place_idx ON unit (building_id, place_id, fitted_at);

CREATE TABLE failure (
    building_id            uuid NOT NULL,
    id                     uuid NOT NULL,
    version                bigint NOT NULL,
    created_at             timestamptz NOT NULL,
    updated_at             timestamptz NOT NULL,
    retired_at             timestamptz,
    place_id               uuid,
    make_up_id             uuid,
    unit_id                uuid,
    part                   text NOT NULL DEFAULT '',
    holder                 integer NOT NULL,
    mode                   text NOT NULL DEFAULT '',
    cause                  text NOT NULL DEFAULT '',
    noticed_at             timestamptz NOT NULL,
    last_good_at           timestamptz,
    hours                  double precision,
    reports                integer NOT NULL,
    cleared_at             timestamptz,
    by_kind                text NOT NULL DEFAULT '',
    by_id                  uuid NOT NULL,
    note                   text NOT NULL DEFAULT '',
    CONSTRAINT failure_pkey PRIMARY KEY (building_id, id),
    CONSTRAINT failure_building_fkey FOREIGN KEY (building_id) REFERENCES building (id),
    CONSTRAINT failure_place_fkey FOREIGN KEY (building_id, place_id) REFERENCES place (building_id, id),
    CONSTRAINT failure_make_up_fkey FOREIGN KEY (building_id, make_up_id) REFERENCES make_up (building_id, id),
    CONSTRAINT failure_unit_fkey FOREIGN KEY (building_id, unit_id) REFERENCES unit (building_id, id),
    CONSTRAINT failure_where_check CHECK (num_nonnulls(place_id, make_up_id) = 1)
);

CREATE INDEX failure_place_idx ON failure (building_id, place_id, noticed_at);
CREATE INDEX failure_open_idx ON failure (building_id, noticed_at) WHERE cleared_at IS NULL;

CREATE TABLE emergency_test (
    building_id            uuid NOT NULL,
    id                     uuid NOT NULL,
    version                bigint NOT NULL,
    created_at             timestamptz NOT NULL,
    updated_at             timestamptz NOT NULL,
    retired_at             timestamptz,
    place_id               uuid NOT NULL,
    test                   text NOT NULL DEFAULT '',
    tested_at              timestamptz NOT NULL,
    minutes_achieved       double precision,
    passed                 boolean NOT NULL,
    defect                 text NOT NULL DEFAULT '',
    lamp_model_id          uuid,
    driver_model_id        uuid,
    battery                text NOT NULL DEFAULT '',
    next_due               date,
    note                   text NOT NULL DEFAULT '',
    CONSTRAINT emergency_test_pkey PRIMARY KEY (building_id, id),
    CONSTRAINT emergency_test_building_fkey FOREIGN KEY (building_id) REFERENCES building (id),
    CONSTRAINT emergency_test_place_fkey FOREIGN KEY (building_id, place_id) REFERENCES place (building_id, id),
    CONSTRAINT emergency_test_test_check CHECK (test IN ('function', 'duration')),
    CONSTRAINT emergency_test_lamp_model_fkey FOREIGN KEY (lamp_model_id) REFERENCES lamp_model (id),
    CONSTRAINT emergency_test_driver_model_fkey FOREIGN KEY (driver_model_id) REFERENCES driver_model (id)
);

CREATE INDEX emergency_test_place_idx ON emergency_test (building_id, place_id, tested_at);

CREATE TABLE trip (
    building_id            uuid NOT NULL,
    id                     uuid NOT NULL,
    version                bigint NOT NULL,
    created_at             timestamptz NOT NULL,
    updated_at             timestamptz NOT NULL,
    retired_at             timestamptz,
    circuit_id             uuid NOT NULL,
    tripped_at             timestamptz NOT NULL,
    note                   text NOT NULL DEFAULT '',
    CONSTRAINT trip_pkey PRIMARY KEY (building_id, id),
    CONSTRAINT trip_building_fkey FOREIGN KEY (building_id) REFERENCES building (id),
    CONSTRAINT trip_circuit_fkey FOREIGN KEY (building_id, circuit_id) REFERENCES circuit (building_id, id)
);

CREATE INDEX trip_circuit_idx ON trip (building_id, circuit_id, tripped_at);

-- What a review found. An open finding has no cleared_at.
CREATE TABLE finding (
    building_id            uuid NOT NULL,
    id                     uuid NOT NULL,
    tree_id                uuid NOT NULL,
    rule                   text NOT NULL,
    severity               text NOT NULL,
    sureness               text NOT NULL,
    blocks                 boolean NOT NULL,
    fact_source            text NOT NULL,
    subject_kind           text NOT NULL,
    subject_id             uuid NOT NULL,
    lamp_model_id          uuid,
    driver_model_id        uuid,
    dimmer_model_id        uuid,
    lamps                  integer NOT NULL,
    sentence               text NOT NULL,
    steps                  jsonb NOT NULL,
    excess                 double precision NOT NULL,
    rule_set               integer NOT NULL,
    input_hash             bytea NOT NULL,
    opened_at              timestamptz NOT NULL,
    updated_at             timestamptz NOT NULL,
    cleared_at             timestamptz,
    CONSTRAINT finding_pkey PRIMARY KEY (building_id, id),
    CONSTRAINT finding_building_fkey FOREIGN KEY (building_id) REFERENCES building (id),
    CONSTRAINT finding_severity_check CHECK (severity IN ('danger', 'high', 'medium', 'low'))
);

CREATE INDEX finding_tree_idx ON finding (building_id, tree_id) WHERE cleared_at IS NULL;
CREATE INDEX finding_subject_idx ON finding (building_id, subject_id);

-- What a review could not decide, and the field that would decide it.
CREATE TABLE question (
    building_id            uuid NOT NULL,
    id                     uuid NOT NULL,
    tree_id                uuid NOT NULL,
    field                  text NOT NULL,
    about_kind             text NOT NULL,
    about_id               uuid NOT NULL,
    with_id                uuid NOT NULL,
    rule                   text NOT NULL,
    severity               text NOT NULL,
    blocks                 boolean NOT NULL,
    places                 integer NOT NULL,
    asked_at               timestamptz NOT NULL,
    CONSTRAINT question_pkey PRIMARY KEY (building_id, id),
    CONSTRAINT question_about_key UNIQUE (building_id, tree_id, field, about_kind, about_id, with_id),
    CONSTRAINT question_building_fkey FOREIGN KEY (building_id) REFERENCES building (id)
);

-- What a review noted of each tree: luminaires in it, how many of them could be judged, and when time alone may change
-- what is found.
CREATE TABLE tree (
    building_id            uuid NOT NULL,
    tree_id                uuid NOT NULL,
    places                 integer NOT NULL,
    known                  integer NOT NULL,
    recheck_at             timestamptz,
    CONSTRAINT tree_pkey PRIMARY KEY (building_id, tree_id),
    CONSTRAINT tree_building_fkey FOREIGN KEY (building_id) REFERENCES building (id)
);

CREATE INDEX tree_recheck_idx ON tree (building_id, recheck_at) WHERE recheck_at IS NOT NULL;

CREATE TABLE waiver (
    building_id            uuid NOT NULL,
    id                     uuid NOT NULL,
    version                bigint NOT NULL,
    created_at             timestamptz NOT NULL,
    updated_at             timestamptz NOT NULL,
    retired_at             timestamptz,
    rule                   text NOT NULL,
    rule_set               integer NOT NULL,
    subject_kind           text NOT NULL,
    subject_id             uuid NOT NULL,
    input_hash             bytea NOT NULL,
    why                    text NOT NULL,
    until                  date NOT NULL,
    by_kind                text NOT NULL,
    by_id                  uuid NOT NULL,
    CONSTRAINT waiver_pkey PRIMARY KEY (building_id, id),
    CONSTRAINT waiver_building_fkey FOREIGN KEY (building_id) REFERENCES building (id)
);

CREATE INDEX waiver_subject_idx ON waiver (building_id, subject_id, rule);

-- Append-only. body is RFC 8785 JSON kept as text: its bytes are what the hash covers.
CREATE TABLE audit (
    building_id            uuid NOT NULL,
    seq                    bigint NOT NULL,
    body                   text NOT NULL,
    hash                   bytea NOT NULL,
    subject_kind           text NOT NULL,
    subject_id             uuid NOT NULL,
    by_id                  uuid NOT NULL,
    at                     timestamptz NOT NULL,
    CONSTRAINT audit_pkey PRIMARY KEY (building_id, seq),
    CONSTRAINT audit_building_fkey FOREIGN KEY (building_id) REFERENCES building (id)
);

CREATE INDEX audit_subject_idx ON audit (building_id, subject_id, seq);

CREATE TABLE event (
    building_id            uuid NOT NULL,
    seq                    bigint NOT NULL,
    type                   text NOT NULL,
    subject_kind           text NOT NULL,
    subject_id             uuid NOT NULL,
    body                   jsonb NOT NULL,
    at                     timestamptz NOT NULL,
    CONSTRAINT event_pkey PRIMARY KEY (building_id, seq),
    CONSTRAINT event_building_fkey FOREIGN KEY (building_id) REFERENCES building (id)
);

COMMIT;
