"""The network file: its sections, what they allow, and where a fault stands."""
