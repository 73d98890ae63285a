"""Readers: files to validated tables; every rejected row keeps its file, line and reason."""
