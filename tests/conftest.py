"""Fixtures that several modules use."""

import pytest

from tests.service_share import hasten


@pytest.fixture
def quick(monkeypatch):
    """No waits and no child processes."""
    hasten(monkeypatch.setattr)
