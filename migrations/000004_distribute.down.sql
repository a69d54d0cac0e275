-- Distributed tables are dropped like any other: the earlier files' down steps do it.
SELECT 1;
