"""Which sites carry the answer, and where and how long to measure next."""
