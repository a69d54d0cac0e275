BEGIN;

DROP TABLE event, audit, waiver, recheck, question, finding, trip, emergency_test, failure, unit, control, feed, place, circuit,
    make_up, space, building_total, building_head;

COMMIT;
