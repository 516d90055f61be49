"""auditd: watches a campaign of runs for broken independence while it is being made."""

__version__ = "0.1.0"
