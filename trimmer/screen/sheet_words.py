"""The sheet in lines of text, each with the kind of line it is."""

from __future__ import annotations

from trimmer.screen.sentences import first_things, percent
from trimmer.screen.view import View

Line = tuple[str, str]
"""Kind (``head``, ``figure``, ``remedy``, ``alarm``) and text."""


def sheet_lines(view: View) -> list[Line]:
    """Write the sheet of a session that came to its end."""
    if view.finished is None:
        return []
    end, done = view.finished, view.finished.done
    lines: list[Line] = [("plain", done.reason)]
    if end.thd is not None:
        floor = (
            "" if done.floor_thd is None else f", floor {percent(done.floor_thd, done.floor_sigma)}"
        )
        lines.append(("head", f"THD {percent(end.thd, end.thd_sigma)}{floor}"))
    if done.expected_thd_warm is not None:
        lines.append(("figure", f"{percent(done.expected_thd_warm)} expected once it is warm"))
    lines.append(("figure", _turns(view)))
    if view.reading is not None:
        lines.append(("figure", first_things(view.reading)))
    if done.remainder:
        lines.append(("head", "What is left, and what to do about it"))
        for cause in done.remainder:
            name = cause.cause.replace("-", " ")
            lines.append(("figure", f"{name}: {percent(cause.thd, cause.thd_sigma)}"))
            lines.append(("remedy", cause.remedy))
    lines.append(("head", _kept(view, end.sheet)))
    lines.append(("remedy", "Read it once more in a minute, and again when it is warm: recheck."))
    return lines


def failed_lines(view: View) -> list[Line]:
    """Write what went wrong and what to do."""
    if view.failed is None:
        return []
    lines: list[Line] = [("alarm", view.failed.message), ("head", view.failed.remedy)]
    if view.opened is not None:
        lines.append(("figure", _kept(view, view.opened.sheet)))
    return lines


def _turns(view: View) -> str:
    """Say the turns made and where the trims have come to."""
    done = view.finished.done if view.finished is not None else None
    if done is None:
        return ""
    net = ", ".join(f"{trim} {_net(turns)}" for trim, turns in done.net_turns.items())
    made = f"{done.turn} turn{'' if done.turn == 1 else 's'} made"
    return f"{made}; all together {net}" if net else made


def _net(turns: float) -> str:
    sense = "clockwise" if turns >= 0 else "counter-clockwise"
    return f"{360.0 * abs(turns):.0f}° {sense}"


def _kept(view: View, sheet: str) -> str:
    place = f" ({view.opened.book})" if view.opened is not None and view.opened.book else ""
    count = len(view.steps)
    return f"Sheet {sheet} with {count} reading{'' if count == 1 else 's'} is in the book{place}"
