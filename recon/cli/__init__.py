"""The command line: translates, does not decide."""
