-- Items of stock surveys in the window.
SELECT number AS document, place AS subject, item,
    surveyed_at AS true_from, surveyed_at AS true_to, reported_at AS known_at,
    value, unit, stage, surveyor
FROM survey
WHERE surveyed_at < :until AND surveyed_at >= :since
