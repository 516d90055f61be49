"""One locator for the folders that travel with the package: migrations and sample_logs.

A wheel carries them inside the package; an editable install finds them beside it.
"""

from __future__ import annotations

from pathlib import Path

from auditd.errors import AuditdError


def bundled_folder(name: str) -> Path:
    """Return a bundled folder.

    Raises
    ------
    AuditdError
        The installation is incomplete.
    """
    package = Path(__file__).resolve().parent
    for folder in (package / "_bundled" / name, package.parent / name):
        if folder.is_dir():
            return folder
    raise AuditdError(f"the folder {name!r} is missing from this installation of auditd; install it again")
