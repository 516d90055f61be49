"""read."""
