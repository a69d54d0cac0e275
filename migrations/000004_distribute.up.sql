-- On a cluster with the sharding extension, places the tables; on a plain server it does nothing.
DO $$
DECLARE
    name text;
BEGIN
    IF NOT EXISTS (SELECT FROM pg_extension WHERE extname = 'citus') THEN
        RETURN;
    END IF;
    PERFORM set_config('citus.enable_local_reference_table_foreign_keys', 'off', true);
    PERFORM set_config('citus.multi_shard_modify_mode', 'sequential', true);
    FOREACH name IN ARRAY ARRAY['catalogue_head', 'building', 'space_use', 'lamp_model', 'driver_model', 'dimmer_model',
                                'fixture_model', 'pairing', 'price'] LOOP
        EXECUTE format('SELECT create_reference_table(%L)', name);
    END LOOP;
    FOREACH name IN ARRAY ARRAY['building_head', 'building_total', 'building_rate', 'space', 'make_up', 'circuit', 'place', 'feed', 'control',
                                'unit', 'failure', 'emergency_test', 'trip', 'finding', 'question', 'tree', 'waiver',
                                'audit', 'event'] LOOP
        EXECUTE format('SELECT create_distributed_table(%L, %L)', name, 'building_id');
    END LOOP;
END
$$;
