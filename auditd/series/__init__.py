"""series."""
