"""A session's sheet in the bench book: each turn is there before it is told."""

from __future__ import annotations

import importlib.metadata
import platform
from collections.abc import Callable
from datetime import UTC, datetime

from drivers import SourceInfo
from trimmer import __version__
from trimmer.book import Book
from trimmer.book.entries import Resumed, SheetEnd, SheetStart, TurnEntry
from trimmer.errors import BookError
from trimmer.guidance import Guide, KindPrior, Learned
from trimmer.guidance.advice import Advice, Done
from trimmer.intake import Taken
from trimmer.reports import Opened, SheetNotes, Told


def versions() -> dict[str, str]:
    """Give the versions of the program and of what it computes with."""
    computes_with = {name: importlib.metadata.version(name) for name in ("numpy", "scipy")}
    return {"trimmer": __version__, "python": platform.python_version(), **computes_with}


def prior_of(book: Book, kind: str) -> KindPrior | None:
    """Give what the book has learned of a kind of unit; None where nothing was."""
    if not kind:
        return None
    learned = [Learned.from_document(dict(row.document)) for row in book.learned_of(kind)]
    return KindPrior.from_units(learned) if learned else None


class Keeper:
    """Writes one session's sheet.

    Parameters
    ----------
    book
        An open book.
    notes
        What the person said of the unit; where no kind was said, the unit's last one is taken.
    travel_turns
        Whole mechanical travel of the trims, turns of the screw.
    orders
        Highest harmonic order asked.
    """

    def __init__(self, book: Book, notes: SheetNotes, *, travel_turns: float, orders: int) -> None:
        self.book = book
        self.unit = notes.unit
        self.kind = notes.kind or (book.kind_of(notes.unit) if notes.unit else "") or ""
        self.sheet = ""
        self._notes = notes.notes
        self._travel_turns = travel_turns
        self._orders = orders
        self._advice: Advice | None = None
        self._ended = False

    def open(self, info: SourceInfo) -> Opened:
        """Begin the sheet, or go on with the one that was taken up."""
        if not self.sheet:
            self.sheet = self._begun(info)
        return Opened(
            source=info.name,
            identity=info.identity,
            dialect=info.dialect,
            unit=self.unit,
            kind=self.kind,
            sheet=self.sheet,
            book=self.book.location,
        )

    def _begun(self, info: SourceInfo) -> str:
        return self.book.begin_sheet(
            SheetStart(
                taken_at=datetime.now(UTC),
                unit=self.unit,
                kind=self.kind,
                source=info.name,
                identity=info.identity,
                dialect=info.dialect,
                settings=info.settings,
                notes=self._notes,
                travel_turns=self._travel_turns,
                orders=self._orders,
                versions=versions(),
            )
        )

    def take_up(self, resumed: Resumed) -> None:
        """Go on with a sheet that broke off, under its own unit and kind."""
        self.sheet = resumed.sheet.row.id
        self.unit, self.kind = resumed.sheet.row.unit, resumed.sheet.row.kind

    def notices(self) -> list[Told]:
        """Give what the book wants said since it was last asked."""
        return [Told(notice.message, notice.remedy) for notice in self.book.notices()]

    def advised(self, advice: Advice, guide: Guide) -> None:
        """Keep what the guide knows, so that a session that breaks off can be taken up again."""
        self._advice = advice
        self.book.save_state(self.sheet, guide.document())

    def measured(self, turn: int, taken: Taken) -> None:
        """Write a reading with the turn that led to it; it is in the book when this returns."""
        asked, self._advice = self._advice, None
        waveform = taken.waveform
        self.book.add_turn(
            self.sheet,
            TurnEntry(
                turn=turn,
                taken_at=waveform.taken_at,
                reading=taken.reading,
                source=waveform.source,
                advice=asked,
                waveform=waveform.samples,
                interval_s=waveform.interval_s,
                notes=waveform.notes,
            ),
        )

    def finish(self, done: Done, last: Taken | None, guide: Guide) -> str:
        """Close the sheet, and keep what the unit taught of its kind.

        Returns
        -------
        str
            The sheet's id.
        """
        reading = last.reading if last else None
        self.book.finish_sheet(self.sheet, SheetEnd(datetime.now(UTC), done, reading))
        self._ended = True
        learned = guide.learned() if self.kind else None
        if learned is not None:
            self.book.add_learned(self.sheet, self.unit, self.kind, learned.to_document())
        return self.sheet

    def abandon(self, ending: Callable[[], Done], last: Taken | None) -> None:
        """Close a sheet whose session broke off; what was measured is in it already."""
        if not self.sheet or self._ended:
            return
        try:
            reading = last.reading if last else None
            self.book.finish_sheet(self.sheet, SheetEnd(datetime.now(UTC), ending(), reading))
        except BookError:
            pass  # the book itself broke: the sheet stands there unfinished, which says as much
        self._ended = True
