"""The turn: its sign, its large words, the bar, and the trim that is to be left alone."""

from __future__ import annotations

from textual.geometry import Region, Size
from textual.reactive import reactive

from trimmer.guidance.advice import Say, Sense
from trimmer.screen.orders import Order, slot_radians
from trimmer.screen.pictures.bar import bar, cell_of, half_of
from trimmer.screen.pictures.runs import Picture, Role, fitted, picture, row, wrapped
from trimmer.screen.pictures.signs import sign
from trimmer.screen.pictures.words import words
from trimmer.screen.widgets.picture import PictureWidget

NOTHING = Order("wait", (("OPENING",),))


class SignWidget(PictureWidget):
    """The sign beside the words."""

    order: reactive[Order] = reactive(NOTHING)

    def picture(self, width: int, height: int) -> Picture:
        """Draw the sign in the middle of its space."""
        order = self.order
        wide, high = min(width - 2, 2 * height), height
        lines = sign(
            order.sign, wide, high, order.trim or "upper", order.sense, slot_radians(order)
        )
        return picture(lines, width, height, _role(order))


class WordsWidget(PictureWidget):
    """The large words."""

    order: reactive[Order] = reactive(NOTHING)

    def picture(self, width: int, height: int) -> Picture:
        """Draw the words as large as they fit."""
        return words(self.order.words, self.order.aside, width, height, self.order.ground)


class BarWidget(PictureWidget):
    """The bar that fills while the hand turns."""

    share: reactive[float | None] = reactive(None, repaint=False)
    sense: reactive[Sense] = reactive("clockwise")
    say: reactive[Say] = reactive("turn")
    asked: reactive[bool] = reactive(False)

    def watch_share(self, old: float | None, new: float | None) -> None:
        """Paint only the cells that change: a slow line has to carry them 20 times a second."""
        width, height = self.size.width, self.size.height
        if old is None or new is None or width == 0:
            self.refresh()
            return
        halves = [half_of(share, width) for share in (old, new)]
        begin, end = min(halves) // 2, max(halves) // 2 + 1
        if (old >= 1.0) != (new >= 1.0):
            end = max(end, cell_of(1.0, width) + 1)
        if halves[0] != halves[1]:
            left = begin if self.sense == "clockwise" else width - end
            self.refresh(Region(left, 0, end - begin, height))

    def picture(self, width: int, height: int) -> Picture:
        """Draw the bar, or nothing while no turn is asked for."""
        if not self.asked:
            return tuple(row("", width) for _ in range(height))
        return bar(self.share, width, height, self.sense, self.say)


class LineWidget(PictureWidget):
    """Lines of plain text, one to a row; what does not fit is counted on the last."""

    lines: reactive[tuple[str, ...]] = reactive(())
    role: reactive[Role] = reactive("plain")

    def picture(self, width: int, height: int) -> Picture:
        """Show the lines."""
        shown = list(self.lines[:height])
        left = len(self.lines) - height
        if left > 0 and shown:
            tail = f"  (+{left} more)"
            shown[-1] = fitted(shown[-1], max(0, width - len(tail))).rstrip() + tail
        return tuple(row(line, width, self.role) for line in shown)


class StatusWidget(PictureWidget):
    """Where things stand, in one row; the name of the place gives way where it is too long."""

    parts: reactive[tuple[str, str, str, str]] = reactive(("", "", "", ""))

    def picture(self, width: int, height: int) -> Picture:
        """Join the parts."""
        waits, fresh, place, book = self.parts
        room = width - len(waits) - len(fresh) - len(book) - 9
        shown = place if len(place) <= room else fitted(place, max(4, room))
        line = " │ ".join((waits, fresh, shown, book))
        return tuple(row(line, width) for _ in range(height))


class WordyWidget(PictureWidget):
    """Sentences over as many rows as they need, up to `MOST`."""

    MOST = 3
    sentences: reactive[tuple[str, ...]] = reactive(())

    def watch_sentences(self) -> None:
        """Ask for another height only where it changes: a layout costs ten times a painting."""
        width = self.size.width
        if width and len(self._broken(width, self.MOST)) not in (self.size.height, 1):
            self.refresh(layout=True)

    def get_content_height(self, _container: Size, _viewport: Size, width: int) -> int:
        """Count the rows."""
        return max(2, len(self._broken(width, self.MOST)))

    def picture(self, width: int, height: int) -> Picture:
        """Break the sentences at their spaces."""
        return tuple(row(line, width) for line in self._broken(width, height))

    def _broken(self, width: int, rows: int) -> list[str]:
        """Begin each sentence on a row of its own; the first one gives way to the others."""
        first, *others = self.sentences or ("",)
        after = [line for text in others for line in wrapped(text, width, max(1, rows - 1))]
        return [*wrapped(first, width, max(1, rows - len(after))), *after][:rows]


def _role(order: Order) -> Role:
    roles: dict[str, Role] = {"bars": "care", "solid": "halt", "checks": "halt", "slants": "halt"}
    return roles.get(order.ground, "go" if order.sign == "turn" else "strong")
