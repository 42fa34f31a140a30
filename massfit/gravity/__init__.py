"""Satellite gravity: fields of coefficients, the ocean mean they see, and its annual cycle."""
