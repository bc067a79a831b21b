"""Measured and check values, and the demo list (package data)."""
