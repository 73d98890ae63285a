"""Samples to received frequency."""
