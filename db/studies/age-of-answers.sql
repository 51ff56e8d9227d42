-- Title: How old each answer is
-- Question: How many days ago was each catalog last asked with success about each target? Oldest first.
-- Parameter: at_least_days = 0.0 | leave out answers younger than so many days
-- Column: target_name |  | Name of the target.
-- Column: catalog_id |  | Id of the catalog.
-- Column: table_name |  | Table of the catalog.
-- Column: release |  | Release of the catalog.
-- Column: asked_at | UTC | When it was asked.
-- Column: age_days | d | Days since.

SELECT target_name, catalog_id, table_name, release, asked_at, days_between(asked_at, now_utc()) AS age_days
FROM current_search
WHERE days_between(asked_at, now_utc()) >= :at_least_days
ORDER BY asked_at, target_name, catalog_id, table_name;
