"""The invented site, as plant sources with a known truth."""
