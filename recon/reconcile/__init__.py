"""State the least squares problem, and read its answer."""
