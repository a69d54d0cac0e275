BEGIN;

DROP TABLE price, pairing, fixture_model, dimmer_model, driver_model, lamp_model, space_use, building, catalogue_head;

COMMIT;
