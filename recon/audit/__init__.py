"""Canonical bytes, chain and proofs: decides everything, touches nothing."""
