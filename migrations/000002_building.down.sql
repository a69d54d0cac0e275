BEGIN;

DROP TABLE event, audit, waiver, tree, question, finding, trip, emergency_test, failure, unit, control, feed, place, circuit,
    make_up, space, building_total, building_rate, building_head;

COMMIT;
