"""The project's tests; `python -m tests.check` is the one command."""
