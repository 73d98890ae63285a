"""Frozen, validated tables that travel between nodes; the unit stands in every column name."""
