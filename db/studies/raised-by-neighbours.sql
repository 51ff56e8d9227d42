-- Title: Limits that a neighbour raises
-- Question: Which limits are shallower than their catalog could be, because something bright lies near?
-- Column: target_name |  | Name of the target.
-- Column: catalog_id |  | Id of the catalog.
-- Column: band_name |  | Name of the band.
-- Column: value | in unit | The limit, as observed.
-- Column: unit |  | Unit of the value.
-- Column: flag |  | By how much it is raised.
-- Column: outcome |  | What the catalog says at the position.

SELECT target_name, catalog_id, band_name, value, unit, flag, outcome
FROM current_limit
WHERE flag LIKE '%neighbour%'
ORDER BY target_name, catalog_id, band_name;
