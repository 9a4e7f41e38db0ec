"""What the tests of instruments share."""

from __future__ import annotations

import pytest


@pytest.fixture(autouse=True)
def short_silences(monkeypatch: pytest.MonkeyPatch) -> None:
    """Wait less for answers that may not come: the instruments of the tests are next door."""
    monkeypatch.setattr("drivers.visa.ways.PROBE_S", 0.15)
    monkeypatch.setattr("drivers.visa.probing.PROBE_S", 0.15)
