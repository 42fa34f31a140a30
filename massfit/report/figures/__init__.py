"""Figures: arrays or Datasets in, a matplotlib figure out."""
