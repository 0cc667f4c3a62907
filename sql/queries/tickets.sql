-- Weighbridge and crane tickets in the window, every stage.
SELECT number AS document, scale AS subject, item,
    weighed_at AS true_from, weighed_at AS true_to, entered_at AS known_at,
    value, unit, stage, lot, carrier
FROM ticket
WHERE weighed_at < :until AND weighed_at >= :since
