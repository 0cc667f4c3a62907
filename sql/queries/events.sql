-- Calibrations, checks and other logged events that touch the window.
SELECT number AS document, tag AS subject, item,
    began_at AS true_from, ended_at AS true_to, logged_at AS known_at,
    value, unit, as_found, as_left, remark
FROM plant_event
WHERE began_at < :until AND ended_at >= :since
