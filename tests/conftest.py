"""Fixtures and settings that all tests share."""

from __future__ import annotations

import os

import pytest
from hypothesis import HealthCheck, settings

settings.register_profile("default", deadline=None, max_examples=40, suppress_health_check=[HealthCheck.too_slow])
settings.load_profile("default")


@pytest.fixture(autouse=True)
def _clean_environment(monkeypatch, tmp_path_factory):
    """No test sees the developer's own settings, or store."""
    for name in list(os.environ):
        if name.upper().startswith("DENSITYLOOM_"):
            monkeypatch.delenv(name)
    # Where the default of a data folder leads; nothing is made there that a test does not ask for.
    monkeypatch.setenv("XDG_DATA_HOME", str(tmp_path_factory.getbasetemp() / "home"))
