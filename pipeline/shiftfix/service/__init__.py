"""Embedding and scale: the same pipeline inside another program."""
