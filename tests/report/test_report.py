"""Pages to hand on: what stands on them, that they stand alone, and that no text does harm."""

from __future__ import annotations

import re
import subprocess
import sys
import xml.etree.ElementTree as ET
from datetime import UTC, datetime
from html.parser import HTMLParser
from pathlib import Path

import matplotlib.image
import numpy as np
import pytest

from drivers.bench import Bench
from tests.command import trimmer
from trimmer.book import Book, RecordStart, SheetEnd, SheetStart, TurnEntry, open_book
from trimmer.book.readings import reading_document
from trimmer.guidance.advice import Cause, Done
from trimmer.intake import Intake, Taken, Wanted
from trimmer.report.html import html_bytes
from trimmer.report.kind import kind_page
from trimmer.report.sheet import sheet_bytes
from trimmer.report.unit import unit_page
from trimmer.report.words import percent, shown

HOSTILE = "<script>alert(1)</script> $\\frac{1}{0}$ & \u202egnp\u202c \"' 漢字 \x1b[31m"
AT = datetime(2026, 5, 4, 3, 2, 1, tzinfo=UTC)


@pytest.fixture(scope="module")
def taken() -> list[Taken]:
    """Read a unit at three settings, through its socket."""
    from drivers.visa import open_instrument

    found = []
    with Bench(3) as bench, open_instrument(bench.resource) as source:
        intake = Intake(source, Wanted(frames=2))
        for _ in range(3):
            found.append(intake.still())
            bench.turn("upper", 0.03)
    return found


def filled(book: Book, taken: list[Taken], unit: str, kind: str, note: str = "21 C") -> None:
    """Put a sheet with all that may belong to it into a book."""
    notes = {"ambient": note, note[:20]: "odd"}
    sheet = book.begin_sheet(
        SheetStart(AT, unit, kind, "bench", note, notes=notes, travel_turns=0.75, orders=15)
    )
    for turn, each in enumerate(taken):
        wave = each.waveform
        book.add_turn(
            sheet,
            TurnEntry(turn, AT, each.reading, waveform=wave.samples, interval_s=wave.interval_s),
        )
    net = {"upper": 0.06, "lower": -0.01}
    causes = (Cause("shaper", 0.003, "Leave the trims.", 1e-4),)
    done = Done(len(taken), "at-floor", 0.011, 1e-4, net, causes, note)  # type: ignore[arg-type]
    book.finish_sheet(sheet, SheetEnd(AT, done, taken[-1].reading))
    limits = {"limits": {"thd": 0.02}}
    survey = book.begin_record(RecordStart("survey", AT, unit, kind, document=limits))
    for each in taken:
        book.add_point(survey, AT, {"reading": reading_document(each.reading)})
    book.finish_record(
        survey, "outside", {"points": 3, "worst_thd": 0.03, "worst_thd_sigma": 1e-3, "at_hz": 18e3}
    )
    book.add_record(
        RecordStart("recheck", AT, unit, kind, sheet=sheet),
        "holds",
        {"thd": 0.011, "change": 1e-5, "change_sigma": 2e-5},
    )
    course = {"minutes": [0.0, 2.0, 9.0], "parts": [[0.01] * 28, [0.004] * 28, [0.003] * 28]}
    settled = {"minutes": 9.0, "settled_thd": [0.011, 1e-4, 0.0108, 0.0112], "course": course}
    book.add_record(RecordStart("warmup", AT, unit, kind), "settled", settled)


@pytest.fixture
def book(tmp_path: Path, taken: list[Taken]) -> Path:
    path = tmp_path / "book.sqlite"
    with open_book(str(path)) as one:
        filled(one, taken, "G7", "four-knee")
        filled(one, taken[:2], "G8", "four-knee")
        filled(one, taken, HOSTILE, HOSTILE, HOSTILE)
    return path


class Tags(HTMLParser):
    """Collects tags and attributes."""

    def __init__(self) -> None:
        super().__init__()
        self.tags: set[str] = set()
        self.attributes: list[tuple[str, str | None]] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.add(tag)
        self.attributes += attrs


@pytest.mark.parametrize("form", ["html", "pdf", "svg", "png"])
def test_the_command_writes_each_form(form: str, book: Path, tmp_path: Path) -> None:
    out = tmp_path / f"page.{form}"
    done = trimmer("report", "G7", "--book", book, "-o", out)
    assert done.returncode == 0, done.stderr
    starts = {"html": b"<!DOCTYPE html>", "pdf": b"%PDF-", "svg": b"<?xml", "png": b"\x89PNG"}
    assert out.read_bytes().startswith(starts[form])
    if form == "pdf":
        assert len(re.findall(rb"/Type /Page\b", out.read_bytes())) == 1  # one page


def test_the_page_says_unit_result_turns_survey_recheck_and_cautions(book: Path) -> None:
    with open_book(str(book), writes=False) as one:
        page = unit_page(one, "G7")
        reading = one.sheet(one.sheets()[0].id).turns[-1].reading
    text = html_bytes(page).decode()
    for wanted in (
        "G7",
        "four-knee",
        "ambient",
        percent(reading.thd.value, reading.thd.sigma),
        "Both trims are at their best.",
        "upper 0.060 turns clockwise, lower 0.010 turns counter-clockwise",
        "Outside its limits.",
        "It was still as logged.",
        "It settled within 9 minutes",
        "standard uncertainty",
        "lethal voltage",
    ):
        assert wanted in text, wanted


def test_the_wave_on_the_page_is_the_one_that_was_read(book: Path, taken: list[Taken]) -> None:
    with open_book(str(book), writes=False) as one:
        wave = unit_page(one, "G7").wave
    assert wave is not None
    fitted = np.interp(wave.samples_theta, wave.theta, wave.shape, period=2.0 * np.pi)
    noise = taken[-1].reading.noise / taken[-1].reading.amplitude
    # the samples lie on the shape: their mean in a bin is better than one sample
    assert float(np.std(wave.samples - fitted)) < noise
    rms = float(np.sqrt(2.0 * np.mean(wave.difference**2)))
    assert rms == pytest.approx(float(np.linalg.norm(taken[-1].reading.parts)), rel=1e-6)


def test_html_stands_alone_and_runs_nothing(book: Path) -> None:
    with open_book(str(book), writes=False) as one:
        text = html_bytes(unit_page(one, HOSTILE)).decode()
    seen = Tags()
    seen.feed(text)
    assert not seen.tags & {"script", "img", "iframe", "link", "object", "embed", "form", "a"}
    assert not [name for name, _ in seen.attributes if name.startswith("on")]
    links = [v for name, v in seen.attributes if name in ("src", "href", "xlink:href", "action")]
    assert all(link is not None and link.startswith("#") for link in links)
    assert not re.findall(r"url\((?!#)", text)
    assert "@import" not in text
    assert "&lt;script&gt;" in text
    ids = re.findall(r'\bid="([^"]+)"', text)
    assert len(ids) == len(set(ids))
    assert not [each for each in text if each in "\u202e\u202c\x1b"]


@pytest.mark.parametrize("form", ["svg", "pdf", "png"])
def test_hostile_text_is_drawn_as_text(form: str, book: Path) -> None:
    with open_book(str(book), writes=False) as one:
        drawn = sheet_bytes(unit_page(one, HOSTILE), form)
        kind = sheet_bytes(kind_page(one, HOSTILE), form)
    assert len(drawn) > 10_000
    assert len(kind) > 10_000
    if form == "svg":
        root = ET.fromstring(drawn)  # well-formed; made here, not from outside
        names = {element.tag.rpartition("}")[2] for element in root.iter()}
        assert not names & {"script", "image", "foreignObject", "a"}


@pytest.mark.parametrize("form", ["html", "svg", "pdf", "png"])
def test_the_same_book_gives_the_same_bytes(form: str, book: Path, tmp_path: Path) -> None:
    pages = []
    for n in (1, 2):  # in processes of their own: no counter may carry over
        out = tmp_path / f"{n}.{form}"
        assert trimmer("report", "G7", "--book", book, "-o", out).returncode == 0
        pages.append(out.read_bytes())
    assert pages[0] == pages[1]


def test_the_page_has_no_colour(book: Path, tmp_path: Path) -> None:
    with open_book(str(book), writes=False) as one:
        for page in (unit_page(one, "G7"), kind_page(one, "four-knee")):
            path = tmp_path / "page.png"
            path.write_bytes(sheet_bytes(page, "png"))
            pixels = matplotlib.image.imread(path)[..., :3]
            assert float(np.ptp(pixels, axis=2).max()) < 0.02  # red, green and blue alike
            dark = float(np.mean(pixels.mean(axis=2) < 0.5))
            assert 0.005 < dark < 0.2  # and it is not empty


def test_a_kinds_page_has_the_spread_over_its_units(book: Path) -> None:
    with open_book(str(book), writes=False) as one:
        page = kind_page(one, "four-knee")
    assert page.units is not None
    assert sorted(page.units.labels) == ["G7", "G8"]
    assert sorted(page.needed) == [2, 3]
    assert page.drift is not None
    assert page.drift.value[0] == pytest.approx(0.007 * np.sqrt(28))


def test_a_sheet_that_broke_off_still_gives_a_page(tmp_path: Path, taken: list[Taken]) -> None:
    with open_book(str(tmp_path / "b.sqlite")) as one:
        sheet = one.begin_sheet(SheetStart(AT, "H1"))
        one.add_turn(sheet, TurnEntry(0, AT, taken[0].reading))
        page = unit_page(one, "H1")
    assert page.survey is None
    assert sheet_bytes(page, "pdf").startswith(b"%PDF-")


def test_wrong_commands_say_what_to_do(book: Path, tmp_path: Path) -> None:
    cases = [
        (("report", "nobody", "-o", tmp_path / "a.pdf"), "log list"),
        (("report", "G7", "-o", tmp_path / "a.docx"), ".pdf"),
        (("report", "-o", tmp_path / "a.pdf"), "--kind"),
        (("report", "G7", "--kind", "four-knee", "-o", tmp_path / "a.pdf"), "--kind"),
        (("report", "G7", "-o", tmp_path / "none" / "a.pdf"), "-o"),
    ]
    for words, remedy in cases:
        done = trimmer(*words, "--book", book)
        assert done.returncode == 2
        assert remedy in done.stderr
        assert "Traceback" not in done.stderr
    assert not list(tmp_path.glob("*.pdf"))


@pytest.mark.parametrize(("missing", "form"), [("matplotlib", "pdf"), ("jinja2", "html")])
def test_without_the_libraries_that_draw_the_remedy_is_said(
    missing: str, form: str, book: Path, tmp_path: Path
) -> None:
    code = (
        f"import sys; sys.modules[{missing!r}] = None\n"
        "from trimmer.cli import run\n"
        f"sys.exit(run(['report', 'G7', '--book', {str(book)!r}, '-o', 'x.{form}']))"
    )
    done = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, cwd=tmp_path, timeout=60
    )
    assert done.returncode == 2
    assert "trimmer[report]" in done.stderr
    assert not list(tmp_path.glob("x.*"))


def test_words_of_figures() -> None:
    assert percent(0.0123456, 0.00012) == "(1.235 ± 0.012) %"
    assert percent(None) == "not known"
    assert percent(float("nan")) == "not known"
    assert shown("a\u202eb\nc\x00") == "ab\N{REPLACEMENT CHARACTER}c\N{REPLACEMENT CHARACTER}"
