"""The application's own errors, each with a remedy for the person at the bench."""

from __future__ import annotations


class TrimmerError(Exception):
    """Something went wrong that a person can mend.

    The message says what happened, with the numbers; `remedy` is one imperative sentence.
    """

    exit_status = 1
    default_remedy = "Try again; if it happens again, report it with `trimmer --version`."

    def __init__(self, message: str, remedy: str | None = None) -> None:
        super().__init__(message)
        self.remedy = remedy if remedy is not None else self.default_remedy


class CommandError(TrimmerError):
    """The command was wrong."""

    exit_status = 2
    default_remedy = "See `trimmer --help`."


class BookError(TrimmerError):
    """The bench book could not be opened, read or written."""

    exit_status = 5
    default_remedy = (
        "Check the path, the space left and the permissions, or choose another with `--book`."
    )
