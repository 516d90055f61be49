"""Fixtures that every part of the suite shares."""

import os
import pathlib

import pytest

pytest_plugins = ["fixtures_postgres"]


@pytest.fixture(scope="session")
def shared_folder():
    """The folder of published reference data and measured campaigns, named by AUDITD_SHARED."""
    named = os.environ.get("AUDITD_SHARED")
    if named and pathlib.Path(named).is_dir():
        return pathlib.Path(named)
    reason = "AUDITD_SHARED does not name the folder with reference/ and campaigns/"
    if os.environ.get("CI") == "true":
        pytest.fail(reason)
    pytest.skip(reason)
    return None
