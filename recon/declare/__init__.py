"""Site files and balance files: what people declare, and every fault in it."""
