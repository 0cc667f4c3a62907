"""Readers of the plant's sources: read-only, windowed, one kind, one file."""
