"""The marker of tests that need a browser; they run only where SITESTUDY_BROWSER=1 is set."""

from __future__ import annotations

import pytest


def pytest_configure(config: pytest.Config) -> None:
    config.addinivalue_line(
        "markers", "browser: drives a real page; needs SITESTUDY_BROWSER=1, playwright, Chromium"
    )
