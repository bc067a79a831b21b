"""Fitted values: refined coefficients and the spread of each class (package data)."""
