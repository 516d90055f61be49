"""verdicts."""
