"""What every test shares: a home of its own, and skips that count as failures where told so."""

from __future__ import annotations

import os

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")  # as the command itself does
from pathlib import Path

import pytest


@pytest.fixture(autouse=True)
def own_home(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Keep books, settings and dialects of each test in a folder of its own."""
    home = tmp_path / "home"
    monkeypatch.setenv("TRIMMER_HOME", str(home))
    return home


def pytest_terminal_summary(terminalreporter: pytest.TerminalReporter) -> None:
    """Fail the run for a skip where `TRIMMER_NO_SKIPS` is set: the machine should have had all."""
    skipped = terminalreporter.stats.get("skipped", [])
    if skipped and os.environ.get("TRIMMER_NO_SKIPS"):
        terminalreporter.write_line(
            f"{len(skipped)} skipped, and no skip is allowed here", red=True
        )


@pytest.hookimpl(trylast=True)
def pytest_sessionfinish(session: pytest.Session) -> None:
    """Turn skips into a failing exit status where `TRIMMER_NO_SKIPS` is set."""
    reporter = session.config.pluginmanager.get_plugin("terminalreporter")
    if reporter is None or not os.environ.get("TRIMMER_NO_SKIPS"):
        return
    if reporter.stats.get("skipped") and session.exitstatus == 0:
        session.exitstatus = pytest.ExitCode.TESTS_FAILED
