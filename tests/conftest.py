"""Shared fixtures, and the rule that nothing is skipped in CI."""

import os

import pytest
import xarray as xr

from massfingerprint.earth.love import love_numbers


@pytest.hookimpl(wrapper=True)
def pytest_runtest_makereport(item, call):
    report = yield
    if os.environ.get("CI") == "true" and report.skipped and not hasattr(report, "wasxfail"):
        report.outcome = "failed"
        report.longrepr = f"{item.nodeid} was skipped, and nothing may be skipped in CI: {report.longrepr}"
    return report


@pytest.fixture(scope="session")
def love() -> xr.Dataset:
    """Shipped Love numbers, degrees 0 to 2048."""
    return love_numbers(max_degree=2048)
