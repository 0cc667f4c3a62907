-- Readings of one tag in a window.
SELECT tag, at, value, quality, known_at
FROM reading
WHERE tag = :tag AND at >= :since AND at < :until
