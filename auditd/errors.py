"""Every error that auditd raises on purpose, in one tree.

::

    AuditdError
    ├── BadInput              an argument is malformed: shape, value, type
    ├── NotTestable           too little data; says how much is needed and what was got
    ├── PlanError             the plan file is missing, malformed or contradicts itself
    │   └── PlanChanged       the plan differs from the stored one and needs `amend`
    ├── StoreError            the store cannot be used
    │   ├── StoreHeld         another process holds the store
    │   ├── StoreNewer        the store was written by a newer release
    │   └── StoreDamaged      the store's pages or contents are broken
    ├── CannotCreate          an output file or folder cannot be made
    └── Unavailable           a service (store server, alert target) does not answer

A message says what was found, what was expected, where, and what to do next.
"""

from __future__ import annotations


class AuditdError(Exception):
    """Base of every error raised on purpose; carries the exit code of the command line."""

    exit_code = 70


class BadInput(AuditdError, ValueError):
    """An argument is malformed."""

    exit_code = 65


class NotTestable(AuditdError, ValueError):
    """The data are too few, or of the wrong kind, for the question.

    Parameters
    ----------
    required : what the method needs, in words or as a count.
    got : what was given, in words or as a count.
    estimate : an estimate that may still be of use, or None.
    """

    exit_code = 65

    def __init__(self, required: object, got: object, *, estimate: float | None = None) -> None:
        self.required = required
        self.got = got
        self.estimate = estimate
        super().__init__(f"not testable: needs {required}, got {got}")


class PlanError(AuditdError):
    """The plan cannot be used."""

    exit_code = 78


class PlanChanged(PlanError):
    """The plan differs from the stored one in what is audited; `runaudit amend` takes it into use."""


class StoreError(AuditdError):
    """The store cannot be used."""

    exit_code = 78


class StoreHeld(StoreError):
    """Another process holds the store."""

    exit_code = 75


class StoreNewer(StoreError):
    """The store was written by a newer release; it is left untouched."""


class StoreDamaged(StoreError):
    """The store's pages or contents are broken; they are left as found."""


class CannotCreate(AuditdError):
    """An output file or folder cannot be made."""

    exit_code = 73


class Unavailable(AuditdError):
    """A service does not answer."""

    exit_code = 69
