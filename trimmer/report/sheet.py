"""The page as one drawn sheet of A4: PDF, SVG, PNG."""

from __future__ import annotations

import contextlib
import io
import re
import textwrap
import warnings
from collections.abc import Iterator, Sequence
from typing import Any, Final

import matplotlib as mpl
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.text import Text

from trimmer.report.drawing import DARK, MIDDLE, Drawing, drawings
from trimmer.report.page import Page, Row, Section

WIDE_IN, HIGH_IN = 8.27, 11.69
LEFT, RIGHT = 0.07, 0.95
LINE: Final = 0.0118
"""Height of a line of small text, share of the page."""
COLUMN: Final = 0.45
"""Width of a column of facts, share of the page."""
HIGHEST: Final = 0.27
"""Height of a row of pictures at most, share of the page."""
SETTINGS: Final[dict[Any, Any]] = {
    "svg.hashsalt": "trimmer",
    "svg.fonttype": "path",
    "pdf.fonttype": 42,
    "font.family": "DejaVu Sans",
    "font.size": 8.0,
    "hatch.linewidth": 0.6,
    "path.simplify": True,
    "text.usetex": False,
    "text.parse_math": False,
}
METADATA: Final[dict[str, dict[Any, Any]]] = {
    "svg": {"Date": None, "Creator": "trimmer"},
    "pdf": {"CreationDate": None, "ModDate": None, "Creator": "trimmer", "Producer": "trimmer"},
    "png": {"Software": "trimmer"},
}
_IDS = re.compile(r'(\bid="|href="#|url\(#)')


@contextlib.contextmanager
def drawing_rules() -> Iterator[None]:
    """Draw the same everywhere, and let a letter that the font lacks be a box without a word."""
    with mpl.rc_context(SETTINGS), warnings.catch_warnings():
        warnings.filterwarnings("ignore", message="Glyph .* missing")
        warnings.filterwarnings("ignore", message="Matplotlib currently does not support")
        yield


def sheet_bytes(page: Page, form: str) -> bytes:
    """Draw a page.

    Parameters
    ----------
    page
        What stands on it.
    form
        ``pdf``, ``svg`` or ``png``.
    """
    with drawing_rules():
        figure = Figure(figsize=(WIDE_IN, HIGH_IN), facecolor="white", dpi=150)
        FigureCanvasAgg(figure)
        _draw(figure, page)
        out = io.BytesIO()
        figure.savefig(out, format=form, metadata=METADATA[form])
        return out.getvalue()


def picture_svg(draw: Drawing, name: str, wide_in: float = 3.6, high_in: float = 2.3) -> str:
    """Draw one picture as SVG without the declaration, to stand inside a page of HTML.

    Its ids begin with `name`, so that several pictures may stand in one page.
    """
    with drawing_rules():
        figure = Figure(figsize=(wide_in, high_in), facecolor="white", layout="constrained")
        draw(figure.add_subplot())
        out = io.StringIO()
        figure.savefig(out, format="svg", metadata=METADATA["svg"])
        text = out.getvalue()
    return _IDS.sub(rf"\1{name}-", text[text.index("<svg") :])


def _draw(figure: Figure, page: Page) -> None:
    top = _head(figure, page)
    top = min(
        _table(figure, page.facts, LEFT, top, 0.13), _table(figure, page.figures, 0.55, top, 0.19)
    )
    bottom = _foot(figure, page)
    _pictures(figure, [draw for _, draw in drawings(page)], top - 0.012, bottom + 0.01)


def _head(figure: Figure, page: Page) -> float:
    result = figure.text(RIGHT, 0.955, page.result, fontsize=13, ha="right", color=DARK)
    result.set_fontweight("bold")
    room = RIGHT - LEFT - _width(figure, result) - 0.03
    title = figure.text(LEFT, 0.955, page.title, fontsize=15, fontweight="bold", color=DARK)
    for size in range(14, 8, -1):
        if _width(figure, title) <= room:
            break
        title.set_fontsize(float(size))
    _fit(figure, title, room)
    figure.text(LEFT, 0.936, page.subtitle, fontsize=9, color=MIDDLE)
    _rule(figure, 0.928)
    return 0.913


def _rule(figure: Figure, at: float) -> None:
    axes = figure.add_axes((LEFT, at, RIGHT - LEFT, 0.001))
    axes.set_axis_off()
    axes.axhline(0.5, color=DARK, linewidth=0.8)


def _table(figure: Figure, rows: Sequence[Row], left: float, top: float, wide: float) -> float:
    for name, said in rows:
        _fit(figure, figure.text(left, top, name, fontsize=7.2, color=MIDDLE), wide - 0.01)
        value = figure.text(left + wide, top, said, fontsize=7.2, color=DARK)
        _fit(figure, value, COLUMN - wide)
        top -= LINE
    return top


def _width(figure: Figure, text: Text) -> float:
    """Width of a text, share of the page."""
    return float(text.get_window_extent().width / figure.bbox.width)


def _fit(figure: Figure, text: Text, room: float) -> None:
    """Cut a text to the room it has; what is cut is marked by an ellipsis."""
    whole = text.get_text()
    kept = len(whole)
    while kept > 1 and _width(figure, text) > room:
        kept = min(kept - 1, int(kept * room / _width(figure, text)) + 1)
        text.set_text(whole[: kept - 1] + "\N{HORIZONTAL ELLIPSIS}")


def _foot(figure: Figure, page: Page) -> float:
    """Write the sections from the bottom up; give where they begin."""
    lines = _wrapped(page.sections, page.cautions)
    bottom = 0.03
    for text, head in reversed(lines):
        weight = "bold" if head else "normal"
        figure.text(LEFT, bottom, text, fontsize=7.2, fontweight=weight, color=DARK)
        bottom += LINE * (1.05 if head else 1.0)
    _rule(figure, bottom + 0.004)
    return bottom + 0.008


def _wrapped(sections: Sequence[Section], cautions: str) -> list[tuple[str, bool]]:
    lines: list[tuple[str, bool]] = []
    for section in (*sections, Section("Cautions", (cautions,))):
        lines.append((section.heading, True))
        for text in section.lines:
            lines += [(each, False) for each in textwrap.wrap(text, 132)]
    return lines


def _pictures(figure: Figure, draws: Sequence[Drawing], top: float, bottom: float) -> None:
    """Set the pictures in two columns between `top` and `bottom`."""
    if not draws:
        return
    rows = (len(draws) + 1) // 2
    high = min((top - bottom) / rows, HIGHEST)
    half = (RIGHT - LEFT) / 2
    for place, draw in enumerate(draws):
        row, column = divmod(place, 2)
        alone = column == 0 and place == len(draws) - 1
        wide = (2 * half if alone else half) - 0.06
        left = LEFT + 0.045 + column * half
        low = top - (row + 1) * high + 0.034
        draw(figure.add_axes((left, low, wide, high - 0.056)))
