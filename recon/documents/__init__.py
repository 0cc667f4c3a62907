"""Workbooks, CSV, JSON and text: files in, files out."""
