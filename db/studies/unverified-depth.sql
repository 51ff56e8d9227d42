-- Title: Limits that rest on an unverified depth
-- Question: Which limits use a depth that was not checked against a published text?
-- Column: target_name |  | Name of the target.
-- Column: catalog_id |  | Id of the catalog.
-- Column: band_name |  | Name of the band.
-- Column: value | in unit | The limit, as observed.
-- Column: unit |  | Unit of the value.
-- Column: depth_source |  | Where the depth is from.
-- Column: flag |  | What a reader must be told beside it.

SELECT
    current_limit.target_name,
    current_limit.catalog_id,
    current_limit.band_name,
    current_limit.value,
    current_limit.unit,
    band.depth_source,
    current_limit.flag
FROM current_limit
JOIN flux_limit ON flux_limit.limit_id = current_limit.limit_id
JOIN band ON band.band_id = flux_limit.band_id
WHERE current_limit.verified_depth = 0
ORDER BY current_limit.target_name, current_limit.catalog_id, current_limit.band_name;
