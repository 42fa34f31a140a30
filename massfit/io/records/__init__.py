"""Record files of every kind to samples."""
