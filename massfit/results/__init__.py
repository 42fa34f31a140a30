"""What a run made: the container handed to files and figures, and what it assumed."""
