"""The panes under the turn: the shape, its parts, THD by turn."""

from __future__ import annotations

from textual.reactive import reactive

from trimmer.screen.pictures.course import Floor, Step, course
from trimmer.screen.pictures.parts import Split, parts_table
from trimmer.screen.pictures.raster import Dots
from trimmer.screen.pictures.runs import Picture
from trimmer.screen.pictures.wave import Trace, wave
from trimmer.screen.widgets.picture import PictureWidget


class ShapeWidget(PictureWidget):
    """One period against its ideal sine."""

    trace: reactive[Trace | None] = reactive(None)
    dots: reactive[Dots] = reactive(Dots.BRAILLE)

    def picture(self, width: int, height: int) -> Picture:
        """Draw the period and its magnified difference."""
        return wave(self.trace, width, height, self.dots)


class PartsWidget(PictureWidget):
    """Crest and skew parts by order."""

    split: reactive[Split | None] = reactive(None)

    def picture(self, width: int, height: int) -> Picture:
        """Draw the parts."""
        return parts_table(self.split, width, height)


class CourseWidget(PictureWidget):
    """THD by turn."""

    steps: reactive[tuple[Step, ...]] = reactive(())
    floor: reactive[Floor | None] = reactive(None)

    def picture(self, width: int, height: int) -> Picture:
        """Draw the columns and the floor."""
        return course(self.steps, self.floor, width, height)
