"""What a folder of unknown files seems to hold."""
