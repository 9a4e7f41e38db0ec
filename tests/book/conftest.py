"""Books in temporary folders, and a server of the tests' own."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from tests.book.postgres import Cluster, missing
from trimmer.book import Book, open_book


@pytest.fixture(autouse=True)
def home(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Keep every test's files in a folder of its own."""
    folder = tmp_path / "home"
    monkeypatch.setenv("TRIMMER_HOME", str(folder))
    return folder


@pytest.fixture
def book(home: Path) -> Iterator[Book]:
    """Give a new book in a file."""
    with open_book() as opened:
        yield opened


@pytest.fixture(scope="session")
def server() -> Iterator[Cluster]:
    """Give a running PostgreSQL server."""
    why = missing()
    if why:
        pytest.skip(why)
    cluster = Cluster(durable=False)
    try:
        cluster.start()
        yield cluster
    finally:
        cluster.remove()
