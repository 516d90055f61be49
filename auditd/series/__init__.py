"""Stored runs as arrays: values on the audited scale, order, labels; and the giving of places."""
