"""Raw rows become measurements, each with its uncertainty and shared error sources."""
