"""A series' circumstances in the form that the evidence asks for."""

from __future__ import annotations

from typing import Any

from auditd.checks.duplicates import duplicate_groups
from auditd.series.table import RunTable, Series


def labelled_nuisance(series: Series) -> dict[str, Any]:  # arrays of labels
    """Return the nuisances that have more than one level, as arrays of labels."""
    return {
        name: coded.labels() for name, coded in series.nuisance.items() if len(set(coded.codes.tolist())) > 1
    }


def circumstances(table: RunTable, series: Series) -> dict[str, Any]:
    """Return the keyword arguments that tell `effective_number` of a series' circumstances."""
    return {
        "cells": series.cells.labels(),
        "nuisance": labelled_nuisance(series),
        "duplicates": duplicate_groups(table)[series.row],
        "parents": series.parents,
        "ordered": series.ordered,
    }
