"""sequential."""
