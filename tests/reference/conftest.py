"""Readers of the published data that reference tests share."""

import csv

import numpy as np
import pytest


@pytest.fixture(scope="session")
def columns(shared_folder):
    """A function that gives named columns of a published data file: numbers as float64, else as text."""

    def read(name, *names):
        with open(shared_folder / "reference" / "data" / name, encoding="utf-8", newline="") as file:
            rows = list(csv.DictReader(file))
        arrays = [_array([row[wanted] for row in rows]) for wanted in names]
        return arrays[0] if len(names) == 1 else arrays

    return read


def _array(texts):
    try:
        return np.array(texts, dtype=np.float64)
    except ValueError:
        return np.array(texts)
