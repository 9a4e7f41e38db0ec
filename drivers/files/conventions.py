"""Which of point and comma is the decimal mark, found from the numbers of a file."""

from __future__ import annotations

from collections.abc import Iterable

from drivers.files.cells import NUMBER, Convention, is_date, plain_digits


def find_convention(columns: Iterable[Iterable[str]]) -> Convention | None:
    """Find the decimal mark from the numbers themselves.

    A column of grouped numbers has ungrouped ones among them, where the sine passes through zero,
    and none that begin with `0,`. Without either it stays in doubt. A point in every number is a
    decimal mark.

    Parameters
    ----------
    columns
        Stripped cells, column by column.

    Returns
    -------
    Convention or None
        None where points and commas contradict each other.
    """
    by_column = [_bodies(cells) for cells in columns]
    bodies = [body for column in by_column for body in column]
    points = [body for body in bodies if "." in body]
    commas = [body for body in bodies if "," in body]
    both = [body for body in bodies if "." in body and "," in body]
    if both:
        last = {"," if body.rfind(",") > body.rfind(".") else "." for body in both}
        return _chosen(last.pop(), bodies) if len(last) == 1 else None
    if points and commas:
        fits = [mark for mark in ".," if _fits(_other(mark), mark, bodies)]
        return _chosen(fits[0], bodies) if len(fits) == 1 else None
    mark = "," if commas else "."
    marked = [body for column in by_column for body in column if _has(column, mark)]
    return _one_mark(mark, marked) if marked else Convention()


def _bodies(cells: Iterable[str]) -> list[str]:
    return [found["body"] for cell in cells if (found := NUMBER.match(cell)) and not is_date(cell)]


def _has(bodies: list[str], mark: str) -> bool:
    return any(mark in body for body in bodies)


def _other(mark: str) -> str:
    return "," if mark == "." else "."


def _fits(thousands: str, decimal: str, bodies: list[str]) -> bool:
    convention = Convention(decimal, thousands)
    return all(plain_digits(body, convention) is not None for body in bodies)


def _chosen(decimal: str, bodies: list[str]) -> Convention | None:
    thousands = _other(decimal)
    return Convention(decimal, thousands) if _fits(thousands, decimal, bodies) else None


def _one_mark(mark: str, bodies: list[str]) -> Convention | None:
    """Settle columns whose numbers show only commas, or only points."""
    if any(body.count(mark) > 1 for body in bodies):
        return _chosen(_other(mark), bodies)
    whole = [body for body in bodies if mark not in body]
    small = all(len(body) <= 3 for body in whole)
    if not _fits(mark, _other(mark), bodies):
        return Convention(mark)
    if mark == ".":
        return Convention(mark, doubtful=bool(whole) and small)
    if not whole:
        return Convention(mark, doubtful=True)
    return Convention(_other(mark), mark) if small else Convention(mark)
