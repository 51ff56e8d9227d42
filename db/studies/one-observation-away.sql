-- Title: Classes that one more observation may rule out
-- Question: Which classes are left, but only with a small part, and which single test leaves the least? A deeper observation of that kind is the one that may rule the class out.
-- Parameter: most_survival = 0.25 | largest fraction of the class that still passes
-- Column: target_name |  | Name of the target.
-- Column: class_id |  | Id of the class.
-- Column: word |  | What is left of it.
-- Column: survival | fraction | Fraction of the class that passes all tests.
-- Column: test |  | The test that leaves the least.
-- Column: test_survival | fraction | Fraction that passes this test.
-- Column: would_overturn |  | What would change the standing the other way.

SELECT target_name, class_id, word, survival, test, test_survival, would_overturn
FROM (
    SELECT
        current_standing.target_name,
        current_standing.class_id,
        current_standing.word,
        current_standing.survival,
        class_test.test,
        class_test.survival AS test_survival,
        current_standing.would_overturn,
        row_number() OVER (
            PARTITION BY current_standing.standing_id ORDER BY class_test.survival, class_test.ordinal
        ) AS place
    FROM current_standing
    JOIN class_test ON class_test.standing_id = current_standing.standing_id
    WHERE current_standing.word IN ('strained', 'open')
        AND current_standing.survival <= :most_survival
        AND class_test.survival IS NOT NULL
        AND class_test.informs_only = 0
) AS ranked
WHERE place = 1
ORDER BY survival, target_name, class_id;
