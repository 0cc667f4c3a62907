-- Laboratory results whose sample span touches the window, every stage.
SELECT sample AS document, point AS subject, analyte AS item,
    taken_from AS true_from, taken_to AS true_to, reported_at AS known_at,
    value, unit, stage, lot, method, laboratory
FROM laboratory
WHERE taken_from < :until AND taken_to >= :since
