BEGIN;

DROP TABLE column_match, import_run, event_central, audit_central, central_head, review_due, idempotency, access_grant, api_key, person;

COMMIT;
