"""A program killed at any moment has kept every turn it acknowledged; the campaign does 200."""

from __future__ import annotations

from pathlib import Path

from tests.book.kills import kill_command, kill_once


def test_a_killed_program_has_kept_what_it_acknowledged(tmp_path: Path) -> None:
    kills = [kill_once(tmp_path / str(seed), seed) for seed in range(3)]
    assert all(kill.kept >= kill.acknowledged for kill in kills)
    assert sum(kill.acknowledged for kill in kills) > 0
    assert any(kill.resumed for kill in kills)


def test_a_book_survives_one_kill_after_another(tmp_path: Path) -> None:
    kept = [kill_once(tmp_path, seed).kept for seed in range(100, 102)]
    assert kept == sorted(kept)


def test_the_command_killed_while_it_trims_has_kept_every_reading_it_said(tmp_path: Path) -> None:
    kills = [kill_command(tmp_path / str(seed), seed) for seed in range(1)]
    assert sum(kill.acknowledged for kill in kills) > 0
