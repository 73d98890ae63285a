"""Conformance checks and hypothesis strategies for plugin authors."""
