"""Files of the satellites' gravity fields and their tables."""
