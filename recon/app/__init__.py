"""Use cases: one verb, one file."""
