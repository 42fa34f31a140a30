"""The command line: one command a stage."""
