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


@pytest.hookimpl(wrapper=True)
def pytest_runtest_makereport(item, call):
    """Make a skip a failure where CI=true: there, everything that the tests need is installed."""
    report = yield
    if report.skipped and not hasattr(report, "wasxfail") and os.environ.get("CI") == "true":
        report.outcome = "failed"
        report.longrepr = f"skipped, but CI=true: {report.longrepr}"
    return report
