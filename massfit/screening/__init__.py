"""Quietness of the sea floor from the bottom pressure of ocean models."""
