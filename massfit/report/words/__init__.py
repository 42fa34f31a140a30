"""What is printed: plain text for a terminal."""
