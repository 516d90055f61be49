"""Exchangeable campaigns, and how often the full audit finds dependence in them."""

from series_made import campaign, series

from auditd.checks.full_audit import audit_series

LAWS = ("normal", "lognormal", "t")
SETTINGS = {
    "4 cells, 4 hosts, n = 400, random order": {"n": 400, "n_cells": 4, "n_hosts": 4},
    "4 cells, 4 hosts, n = 400, cells in sorted order": {
        "n": 400, "n_cells": 4, "n_hosts": 4, "sorted_cells": True,
    },
    "100 cells of 5 runs, 4 hosts, cells in sorted order": {"n": 500, "n_cells": 100, "n_hosts": 4},
}  # fmt: skip


def found_anything(setting, law, number):
    """Whether any adjusted p-value about dependence is below 0.05, and the smallest one by check."""
    made = campaign(**SETTINGS[setting], law=law, seed=[number, *law.encode(), len(setting)])
    values = made.pop("values")
    answers, _ = audit_series(series(values, **made))
    asked = [one for one in answers if one.family == "dependence" and one.adjusted_pvalue is not None]
    return [f"{one.check} {one.along}" for one in asked if one.adjusted_pvalue < 0.05]
