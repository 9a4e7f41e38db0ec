"""Where a book is."""

from __future__ import annotations

from pathlib import Path

import pytest

from trimmer.book import open_book
from trimmer.book.places import find, without_password
from trimmer.errors import BookError


def test_home_holds_the_book_and_the_demonstration_a_book_of_its_own(home: Path) -> None:
    assert find(None).path == home / "book.sqlite"
    assert find(None, demo=True).path == home / "demo-book.sqlite"


def test_without_home_the_book_lies_where_the_system_keeps_a_users_data(
    monkeypatch: pytest.MonkeyPatch, tmp_path: Path
) -> None:
    monkeypatch.delenv("TRIMMER_HOME")
    monkeypatch.setenv("XDG_DATA_HOME", str(tmp_path))
    from platformdirs import user_data_path

    assert find(None).path == user_data_path("trimmer", appauthor=False) / "book.sqlite"


def test_a_file_may_be_named_plainly_or_by_address(tmp_path: Path) -> None:
    assert find(str(tmp_path / "a b?.sqlite")).path == tmp_path / "a b?.sqlite"
    assert find(f"sqlite:///{tmp_path}/x").path == tmp_path / "x"


@pytest.mark.parametrize("spelling", ["postgresql", "postgres", "postgresql+psycopg"])
def test_a_server_is_known_by_its_address_and_shown_without_its_password(spelling: str) -> None:
    place = find(f"{spelling}://anna:secret@server.example:5433/shop?sslkey=secret")
    assert place.sort == "server"
    assert place.url is not None
    assert place.url.startswith("postgresql+psycopg://anna:secret@")
    assert place.shown == "postgresql+psycopg://anna@server.example:5433/shop"


def test_two_servers_have_two_files_for_what_waits_and_a_new_password_none() -> None:
    one = find("postgresql://a:x@server/shop")
    assert one.path == find("postgresql://a:y@server/shop").path
    assert one.path != find("postgresql://a:x@server/other").path


@pytest.mark.parametrize(
    "wrong", ["mysql://host/book", "http://host/", "sqlite://", "postgresql://host:port/book"]
)
def test_an_address_that_cannot_hold_a_book_is_refused_with_a_remedy(wrong: str) -> None:
    with pytest.raises(BookError) as refusal:
        open_book(wrong)
    assert refusal.value.remedy
    assert refusal.value.exit_status == 5


def test_an_address_is_shown_without_what_follows_its_path() -> None:
    assert without_password("a://u:p@h/d?password=p#x") == "a://u@h/d"
