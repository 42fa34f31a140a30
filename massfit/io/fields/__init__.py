"""Gridded fields, load files and Earth profiles."""
