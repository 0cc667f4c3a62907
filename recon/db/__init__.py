"""The book: all its SQL, on SQLite and PostgreSQL."""
