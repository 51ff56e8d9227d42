-- Title: Candidates that are unlikely to be chance
-- Question: Which catalog rows near any target have a chance probability below the one given? Beware: among many candidates some are always unlikely.
-- Parameter: most_chance = 0.01 | largest probability of an unrelated row at least this close
-- Column: target_name |  | Name of the target.
-- Column: catalog_id |  | Id of the catalog.
-- Column: source_key |  | The catalog's own identifier.
-- Column: separation_arcsec | arcsec | Separation from the target.
-- Column: normalised_separation | sigma | Separation in units of the combined error ellipse.
-- Column: chance | probability | Probability of an unrelated row at least this close.
-- Column: odds | probability | Probability of being the counterpart, all rows considered.
-- Column: outcome |  | What the catalog is called for it.

SELECT target_name, catalog_id, source_key, separation_arcsec, normalised_separation, chance, odds, outcome
FROM current_candidate
WHERE chance < :most_chance
ORDER BY chance, target_name, catalog_id, source_key;
