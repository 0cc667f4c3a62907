"""Tests of recon.ingest."""
