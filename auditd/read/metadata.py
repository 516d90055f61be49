"""What a record holds besides what the plan names."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

Consumed = dict[str, "Consumed | None"]
"""The names that the plan takes, nested as its pointers are; None ends a pointer."""


def consumed_tree(pointers: Iterable[tuple[str, ...]]) -> Consumed:
    """Gather pointers into one tree."""
    tree: Consumed = {}
    for tokens in pointers:
        branch = tree
        for token in tokens[:-1]:
            inner = branch.setdefault(token, {})
            if inner is None:
                break
            branch = inner
        else:
            branch[tokens[-1]] = None
    return tree


def without(record: dict[str, Any], tree: Consumed) -> dict[str, Any]:
    """Return a copy of a record without what a tree names; objects that become empty are left out."""
    rest = dict(record)
    for name, branch in tree.items():
        if branch is None:
            rest.pop(name, None)
            continue
        inner = rest.get(name)
        if isinstance(inner, dict):
            left = without(inner, branch)
            if left:
                rest[name] = left
            else:
                del rest[name]
    return rest
