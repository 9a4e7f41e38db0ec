"""A widget that shows a picture: runs of text with roles, coloured by the style sheet."""

from __future__ import annotations

from typing import ClassVar, Self, get_args

from rich.segment import Segment
from rich.style import Style
from textual.geometry import Region
from textual.strip import Strip
from textual.widget import Widget

from trimmer.screen.pictures.runs import Picture, Role

_CONTROL = dict.fromkeys((*range(32), *range(127, 160)), "�")
"""Nothing that a terminal would obey leaves a picture, should a text have come in uncleaned."""


class PictureWidget(Widget):
    """Shows what `picture` draws; drawn again when a reactive or the size changes."""

    COMPONENT_CLASSES: ClassVar[set[str]] = {f"role--{role}" for role in get_args(Role)}
    can_focus = False

    _drawn: tuple[tuple[int, int], Picture] | None = None

    def picture(self, width: int, height: int) -> Picture:
        """Draw the picture in a space of `width` by `height` cells."""
        raise NotImplementedError

    def refresh(
        self, *regions: Region, repaint: bool = True, layout: bool = False, recompose: bool = False
    ) -> Self:
        """Forget the drawn picture along with the painted one."""
        self._drawn = None
        return super().refresh(*regions, repaint=repaint, layout=layout, recompose=recompose)

    def render_line(self, y: int) -> Strip:
        """Paint one row."""
        size = (self.size.width, self.size.height)
        if self._drawn is None or self._drawn[0] != size:
            self._drawn = (size, self.picture(*size) if min(size) > 0 else ())
        rows = self._drawn[1]
        if y >= len(rows):
            return Strip.blank(size[0], self.rich_style)
        segments = []
        for run in rows[y]:
            style = self.get_component_rich_style(f"role--{run.role}")
            if run.action:
                style += Style(meta={"@click": run.action})
            segments.append(Segment(run.text.translate(_CONTROL), style))
        return Strip(segments).adjust_cell_length(size[0], self.rich_style)
