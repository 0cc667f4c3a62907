"""Numbers out of a problem: one engine, one file."""
