-- Title: What stands behind each limit
-- Question: From which request, reply, catalog release and assumptions does each current limit come? For the appendix of a paper.
-- Column: target_name |  | Name of the target.
-- Column: catalog_id |  | Id of the catalog.
-- Column: band_name |  | Name of the band.
-- Column: value | in unit | The limit, as observed.
-- Column: unit |  | Unit of the value.
-- Column: release |  | Release of the catalog.
-- Column: asked_at | UTC | When the archive was asked.
-- Column: request |  | Exactly what was sent.
-- Column: sha256 |  | SHA-256 of the reply as received.
-- Column: assumptions_digest |  | Assumptions behind the conclusion.

SELECT
    current_limit.target_name,
    current_limit.catalog_id,
    current_limit.band_name,
    current_limit.value,
    current_limit.unit,
    catalog.release,
    search.asked_at,
    search.request,
    search.sha256,
    current_limit.assumptions_digest
FROM current_limit
JOIN limit_search ON limit_search.limit_id = current_limit.limit_id
JOIN search ON search.search_id = limit_search.search_id
JOIN catalog ON catalog.catalog_key = search.catalog_key
ORDER BY current_limit.target_name, current_limit.catalog_id, current_limit.band_name, search.search_id;
