"""landing."""
