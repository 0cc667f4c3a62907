"""The scheduled service: ticks, claims, publishes."""
