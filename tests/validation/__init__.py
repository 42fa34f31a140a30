"""Every outside check that the page docs/validation.md shows, in one registry."""
