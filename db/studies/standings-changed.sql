-- Title: Standings that the last refresh changed
-- Question: For which targets and classes does the latest answer say another word than the one before?
-- Column: target_name |  | Name of the target.
-- Column: class_id |  | Id of the class.
-- Column: word_before |  | What was left of it before.
-- Column: word_now |  | What is left of it now.
-- Column: survival_before | fraction | Fraction of the class that passed before.
-- Column: survival_now | fraction | Fraction that passes now.
-- Column: answered_before | UTC | Time of the answer before.
-- Column: answered_at | UTC | Time of the latest answer.

SELECT
    later.target_name,
    later.class_id,
    earlier.word AS word_before,
    later.word AS word_now,
    earlier.survival AS survival_before,
    later.survival AS survival_now,
    earlier.answered_at AS answered_before,
    later.answered_at
FROM standing_history AS later
JOIN standing_history AS earlier
    ON earlier.target_name = later.target_name AND earlier.class_id = later.class_id AND earlier.place = later.place + 1
WHERE later.place = 1 AND later.word <> earlier.word
ORDER BY later.target_name, later.class_id;
