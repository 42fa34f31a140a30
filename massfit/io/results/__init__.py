"""Folders of results: written in parts, read back whole."""
