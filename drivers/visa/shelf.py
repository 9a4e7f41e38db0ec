"""The dialects there are: those that come with the project, and a person's own files.

A file with faults is refused with all of them, each with its place: the line where it can be
told, and the key.
"""

from __future__ import annotations

import re
import tomllib
from functools import cache
from pathlib import Path

from pydantic import ValidationError

from drivers.contract import SourceRefused, clean
from drivers.visa.dialect import Dialect
from drivers.visa.soundness import faults_between_parts

_SHIPPED = Path(__file__).parent / "dialects"
_MOST_BYTES = 1 << 18


class DialectFault(SourceRefused):
    """A dialect file cannot be used."""

    default_remedy = "Mend the dialect file at the places named, or take it out of the folder."


def read_dialect(text: str, name: str) -> Dialect:
    """Read one dialect.

    Parameters
    ----------
    text
        The TOML text.
    name
        The file's name, for messages.

    Raises
    ------
    DialectFault
        With every fault and its place.
    """
    try:
        raw = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise DialectFault(f"{clean(name)}: {clean(str(error))}") from error
    try:
        dialect = Dialect.model_validate(raw)
    except ValidationError as error:
        faults = [
            (
                tuple(part for part in fault["loc"] if part not in _SHAPES),
                _SAID.get(fault["type"], fault["msg"].removeprefix("Value error, ")),
            )
            for fault in error.errors(include_url=False, include_input=False)
        ]
        raise _fault(text, name, faults) from error
    between = faults_between_parts(dialect)
    if between:
        raise _fault(text, name, [(_location(place), fault) for place, fault in between])
    return dialect


def shelf(settings_dir: Path | None = None) -> tuple[dict[str, Dialect], list[DialectFault]]:
    """Give all dialects by name, and the faults of those of the person's files that have any.

    A person's file takes the place of a shipped dialect of the same name.
    """
    dialects = dict(_shipped())
    faults = []
    folder = settings_dir / "dialects" if settings_dir is not None else None
    for path in sorted(folder.glob("*.toml")) if folder is not None and folder.is_dir() else []:
        try:
            dialect = read_dialect(_text_of(path), path.name)
        except DialectFault as fault:
            faults.append(fault)
        else:
            dialects[dialect.name] = dialect
    return dialects, faults


def chosen(name: str, settings_dir: Path | None = None) -> Dialect:
    """Give the dialect of a name.

    Raises
    ------
    SourceRefused
        There is none of that name, or the files have faults that may hide it.
    """
    dialects, faults = shelf(settings_dir)
    if name in dialects:
        return dialects[name]
    if faults:
        raise faults[0]
    raise SourceRefused(
        f"there is no dialect {clean(name)!r}",
        f"Choose one of {', '.join(sorted(dialects))}, or add a file of your own.",
    )


@cache
def _shipped() -> dict[str, Dialect]:
    found = (read_dialect(_text_of(path), path.name) for path in sorted(_SHIPPED.glob("*.toml")))
    return {dialect.name: dialect for dialect in found}


def _text_of(path: Path) -> str:
    try:
        if path.stat().st_size > _MOST_BYTES:
            raise DialectFault(f"{clean(path.name)}: larger than {_MOST_BYTES} bytes")
        return path.read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError) as error:
        raise DialectFault(f"{clean(path.name)}: {clean(str(error))}") from error


_SHAPES = ("numbers", "keywords", "asked", "prefix", "descriptor", "[key]")
_SAID = {
    "extra_forbidden": "there is no such key here",
    "missing": "is missing",
    "string_type": "text in quotes is needed",
    "int_type": "a whole number is needed",
    "bool_type": "true or false is needed",
    "list_type": "a list in [ ] is needed",
    "dict_type": "a table is needed",
    "model_type": "a table is needed",
    "too_short": "must not be empty",
}
"""The checker's kinds of fault in the words of someone who writes a file."""

_Location = tuple[str | int, ...]


def _location(place: str) -> _Location:
    parts = re.findall(r"([A-Za-z_]+)|\[(\d+)\]", place)
    return tuple(int(index) if index else word for word, index in parts)


def _fault(text: str, name: str, faults: list[tuple[_Location, str]]) -> DialectFault:
    told = []
    for location, fault in faults:
        line = _line_of(text, location)
        where = f"line {line}, " if line else ""
        told.append(f"{where}{_shown(location)}: {fault}")
    return DialectFault(f"{clean(name)}: " + "; ".join(clean(item, 300) for item in told))


def _shown(location: _Location) -> str:
    shown = ""
    for part in location:
        shown += f"[{part}]" if isinstance(part, int) else (f".{part}" if shown else part)
    return shown or "the file"


def _line_of(text: str, location: _Location) -> int | None:
    """Find the line of a key, as far as plain tables and keys go."""
    words = [part for part in location if isinstance(part, str)]
    index = next((part for part in location if isinstance(part, int)), 0)
    lines = text.splitlines()
    begin = 0
    if (words and len(words) > 1) or (words and _headers(lines, words[0])):
        for depth in range(min(len(words), 2), 0, -1):
            headers = _headers(lines, ".".join(words[:depth]))
            if headers:
                begin = headers[min(index, len(headers) - 1)]
                break
    for key in reversed(words):
        for number in range(begin, len(lines)):
            if number > begin and lines[number].lstrip().startswith("["):
                break
            if re.match(rf"\s*\"?{re.escape(key)}\"?\s*=", lines[number]):
                return number + 1
    return begin + 1 if begin else None


def _headers(lines: list[str], table: str) -> list[int]:
    pattern = re.compile(rf"\s*\[\[?\s*{re.escape(table)}\s*\]\]?")
    return [number for number, line in enumerate(lines) if pattern.match(line)]
