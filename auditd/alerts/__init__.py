"""Delivery of alerts from the outbox, at least once and never in the way of runs."""
