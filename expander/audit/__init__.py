"""Audit: what the whole body must satisfy, whatever the load."""
