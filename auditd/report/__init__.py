"""Pictures and the page: one self-contained document from plain data; no store, no clock."""
