"""Invented networks with known truth, returned as data."""
