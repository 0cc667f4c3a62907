"""Metal accounting tables: leaves, totals, unaccounted metal."""
