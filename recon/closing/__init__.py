"""A month's states, the two-person rule, and what late data change: pure, no database."""
