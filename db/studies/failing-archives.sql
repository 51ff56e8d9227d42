-- Title: Archives that failed most
-- Question: Which services gave no usable answer, how often, and when last?
-- Column: address |  | Address of the service.
-- Column: catalogs | count | Catalogs asked there.
-- Column: searches | count | Questions put to it.
-- Column: failed | count | Questions without a usable answer.
-- Column: failed_fraction | fraction | Their part of all.
-- Column: last_failed_at | UTC | The last of them.
-- Column: slowest_s | s | Longest time a question took.

SELECT
    search.address,
    count(DISTINCT catalog.catalog_id) AS catalogs,
    count(*) AS searches,
    sum(CASE WHEN search.status = 'whole' THEN 0 ELSE 1 END) AS failed,
    sum(CASE WHEN search.status = 'whole' THEN 0.0 ELSE 1.0 END) / count(*) AS failed_fraction,
    max(CASE WHEN search.status = 'whole' THEN NULL ELSE search.asked_at END) AS last_failed_at,
    max(search.elapsed_s) AS slowest_s
FROM search
JOIN catalog ON catalog.catalog_key = search.catalog_key
GROUP BY search.address
HAVING sum(CASE WHEN search.status = 'whole' THEN 0 ELSE 1 END) > 0
ORDER BY failed DESC, failed_fraction DESC, search.address;
