"""What the daemon has weighed, read back for a query."""

from __future__ import annotations

from auditd.pipeline.asking import Document
from auditd.pipeline.campaign import Campaign
from auditd.store.states import stored_display


def evidence_document(campaign: Campaign) -> Document:
    """Return what `evidence --json` shows; empty where nothing has been weighed yet."""
    with campaign.engine.connect() as connection:
        found = stored_display(connection, "evidence")
    if isinstance(found, dict):
        return found
    return {"schema": 1, "n": 0, "responses": {}, "not_checked": ["nothing has been weighed yet"]}
