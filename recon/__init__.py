"""Metal accounting for copper sites: measurements in, conserved figures out."""

__version__ = "0.1.0"
