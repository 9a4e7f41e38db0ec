"""From the session's thread to the screen: nothing is lost but live readings that are out of date."""

from __future__ import annotations

from collections import deque
from collections.abc import Callable, Iterator
from threading import Lock

from drivers import SourceError
from drivers.contract import clean
from trimmer.errors import TrimmerError
from trimmer.measurement.reading import MeasurementError
from trimmer.reports import Conversation, Failed, Finished, Followed, Report

REPORT = "Report this; what was measured so far is in the book."


class Mailbox:
    """Holds reports until the screen has time for them.

    A live reading takes the place of the one before it, as long as both say the same word; so the
    box holds no more live readings than there were changes of word, however slow the screen is.
    """

    def __init__(self) -> None:
        self._reports: deque[Report] = deque()
        self._lock = Lock()

    def put(self, report: Report) -> bool:
        """Add a report; tell whether the box was empty. Safe from any thread."""
        with self._lock:
            first = not self._reports
            if not first and _replaces(self._reports[-1], report):
                self._reports[-1] = report
            else:
                self._reports.append(report)
            return first

    @property
    def empty(self) -> bool:
        """Whether nothing lies in it. Safe from any thread."""
        return not self._reports

    def take(self) -> list[Report]:
        """Empty the box, oldest first. Safe from any thread."""
        with self._lock:
            reports = list(self._reports)
            self._reports.clear()
            return reports


def _replaces(old: Report, new: Report) -> bool:
    """Tell whether the old report says nothing that the new one does not."""
    return (
        isinstance(old, Followed)
        and isinstance(new, Followed)
        and old.word.say == new.word.say
        and old.word.turn == new.word.turn
    )


def reports(session: Conversation, stop: Callable[[], bool]) -> Iterator[Report]:
    """Run a session to its end, turning what it raises into its last report."""
    last: Report | None = None
    try:
        for last in session.run(stop=stop):
            yield last
        if not isinstance(last, Finished | Failed) and not stop():
            yield Failed(1, "The session ended without saying how.", REPORT)
    except SourceError as error:
        yield Failed(4, clean(str(error)), error.remedy)
    except MeasurementError as error:
        yield Failed(3, clean(str(error)), error.remedy)
    except TrimmerError as error:
        yield Failed(error.exit_status, clean(str(error)), error.remedy)
    except Exception as error:  # noqa: BLE001 - a thread that ends unseen leaves a person waiting
        message = clean(f"Something unforeseen happened ({type(error).__name__}: {error}).")
        yield Failed(1, message, REPORT)
