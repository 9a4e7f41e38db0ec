"""The command line: words in, one command run, one exit status out."""

from __future__ import annotations

import argparse
import importlib
import os
import signal
import sys
from collections.abc import Sequence
from pathlib import Path
from types import FrameType
from typing import NoReturn

from trimmer import __version__
from trimmer.console import INTERRUPTED, SIGNAL_UNUSABLE, SOURCE_FAILED, complain
from trimmer.errors import CommandError, TrimmerError

SOURCE_HELP = (
    "bench, a VISA resource (TCPIP::192.0.2.10::INSTR), sound or sound:DEVICE, "
    "a .csv .txt .tsv or .wav file, or a folder whose new files are the captures"
)


def positive(text: str) -> float:
    """Read a positive, finite number."""
    try:
        value = float(text)
    except ValueError:
        raise argparse.ArgumentTypeError(f"{text!r} is not a number") from None
    if not 0.0 < value < float("inf"):
        raise argparse.ArgumentTypeError(f"{text!r} is not a positive number")
    return value


def count(text: str) -> int:
    """Read a whole number of at least 1."""
    try:
        value = int(text)
    except ValueError:
        raise argparse.ArgumentTypeError(f"{text!r} is not a whole number") from None
    if value < 1:
        raise argparse.ArgumentTypeError(f"{text!r} is less than 1")
    return value


def orders(text: str) -> int:
    """Read the highest order to report, 3 to 64."""
    value = count(text)
    if not 3 <= value <= 64:
        raise argparse.ArgumentTypeError(f"{text!r} is not between 3 and 64")
    return value


def seed(text: str) -> int:
    """Read a whole number of at least 0."""
    try:
        value = int(text)
    except ValueError:
        raise argparse.ArgumentTypeError(f"{text!r} is not a whole number") from None
    if value < 0:
        raise argparse.ArgumentTypeError(f"{text!r} is less than 0")
    return value


def note(text: str) -> tuple[str, str]:
    """Read KEY=VALUE."""
    key, sign, value = text.partition("=")
    if not sign or not key.strip():
        raise argparse.ArgumentTypeError(f"{text!r} is not KEY=VALUE")
    return key.strip(), value.strip()


def port(text: str) -> int:
    """Read a TCP port; 0 lets the system choose."""
    try:
        value = int(text)
    except ValueError:
        raise argparse.ArgumentTypeError(f"{text!r} is not a port") from None
    if not 0 <= value <= 65535:
        raise argparse.ArgumentTypeError(f"{text!r} is not between 0 and 65535")
    return value


def _output(parser: argparse.ArgumentParser) -> None:
    group = parser.add_argument_group("output")
    group.add_argument("--plain", action="store_true", help="lines of text, no screen")
    group.add_argument("--json", action="store_true", help="lines of JSON on stdout, nothing else")


def _book(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("--book", metavar="FILE_OR_URL", help="bench book to use")


def _sheet(parser: argparse.ArgumentParser) -> None:
    group = parser.add_argument_group("sheet")
    group.add_argument("--unit", metavar="NAME", default="", help="the unit's name")
    group.add_argument("--kind", metavar="NAME", help="the unit's kind (default: its last one)")
    group.add_argument(
        "--note", metavar="KEY=VALUE", type=note, action="append", default=[], help="a remark"
    )
    _book(group)  # type: ignore[arg-type]


def _reading(parser: argparse.ArgumentParser) -> None:
    group = parser.add_argument_group("reading")
    group.add_argument(
        "--channel", metavar="N", type=count, help="channel, or Nth column of values"
    )
    group.add_argument(
        "--dialect", metavar="NAME", help="waveform dialect (default: found by asking)"
    )
    group.add_argument(
        "--interval", metavar="SECONDS", type=positive, help="for files without a time column"
    )
    group.add_argument("--orders", metavar="K", type=orders, default=15, help="highest order (15)")
    group.add_argument(
        "--until-sigma",
        metavar="POINTS",
        type=positive,
        help="average until THD is known this well, in percentage points",
    )
    group.add_argument(
        "--reference", metavar="NAME", help="a stored clean source, to be taken into account"
    )
    group.add_argument("--set-range", action="store_true", help="let the instrument's range be set")


def _tuning(parser: argparse.ArgumentParser) -> None:
    parser.add_argument(
        "--travel",
        metavar="TURNS",
        type=positive,
        default=0.75,
        help="the trims' whole travel (0.75)",
    )
    parser.add_argument(
        "--resume",
        metavar="SHEET",
        help="go on with a sheet that broke off (its id, or part of it)",
    )
    _limit(parser)
    parser.add_argument("--follow", action="store_true", help="watch the hand, without being told")


def _bench(parser: argparse.ArgumentParser) -> None:
    group = parser.add_argument_group("simulated unit")
    group.add_argument(
        "--seed", metavar="N", type=seed, help="the same unit, hand and noise each time"
    )


def build_parser() -> argparse.ArgumentParser:
    """Build the whole command line."""
    parser = argparse.ArgumentParser(
        prog="trimmer",
        description="Guides the two sine-shaping trims of an analog function generator.",
        allow_abbrev=False,
    )
    parser.add_argument("--version", action="version", version=f"trimmer {__version__}")
    commands = parser.add_subparsers(dest="command", metavar="COMMAND", required=True)

    def command(name: str, words: str) -> argparse.ArgumentParser:
        made = commands.add_parser(name, help=words, description=words, allow_abbrev=False)
        made.set_defaults(module=f"trimmer.commands.{name}")
        return made

    demo = command("demo", "run the whole job on the built-in simulated unit")
    demo.add_argument(
        "--hands", choices=["keys", "auto"], default="keys", help="who turns the trims"
    )
    _bench(demo)
    for add in (_output, _sheet, _reading, _tuning):
        add(demo)

    tune = command("tune", "guide the two trims and log the result")
    tune.add_argument("source", metavar="SOURCE", help=SOURCE_HELP)
    for add in (_output, _sheet, _reading, _tuning, _bench):
        add(tune)

    measure = command("measure", "take one reading; with several files, one each")
    measure.add_argument("sources", metavar="SOURCE", nargs="+", help=SOURCE_HELP)
    for add in (_output, _reading, _bench, _book):
        add(measure)

    _limit(measure)
    measure.add_argument(
        "--store", action="store_true", help="store the reading as the reference of that name"
    )

    warmup = command("warmup", "watch a unit settle, and say when it is worth trimming")
    warmup.add_argument("source", metavar="SOURCE", help=SOURCE_HELP)
    warmup.add_argument(
        "--cold", action="store_true", help="the simulated unit has just been switched on"
    )
    for add in (_output, _sheet, _reading, _bench):
        add(warmup)

    survey = command("survey", "check the set unit over its frequency range, following the dial")
    survey.add_argument("source", metavar="SOURCE", help=SOURCE_HELP)
    _survey(survey)
    for add in (_output, _sheet, _reading, _bench):
        add(survey)

    recheck = command("recheck", "compare a unit with its logged sheet")
    recheck.add_argument("source", metavar="SOURCE", help=SOURCE_HELP)
    for add in (_output, _sheet, _reading, _bench):
        add(recheck)

    sources = command("sources", "what can be read from this machine, and what each answers")
    _output(sources)

    bench = command("bench", "run the simulated unit alone, as an SCPI instrument on loopback")
    bench.add_argument(
        "--port", metavar="P", type=port, required=True, help="TCP port; 0: any free one"
    )
    bench.add_argument("--dialect", metavar="NAME", default="ten-field", help="dialect it speaks")
    bench.add_argument("--fault", metavar="NAME", help="a fault to show")
    bench.add_argument(
        "--travel",
        metavar="TURNS",
        type=positive,
        default=0.75,
        help="the trims' whole travel (0.75)",
    )
    _bench(bench)

    report = command("report", "one page of a unit, or of a kind, to hand on")
    report.add_argument("unit", metavar="UNIT", nargs="?", default="", help="the unit's name")
    report.add_argument("--kind", metavar="NAME", help="a page of this kind instead")
    report.add_argument(
        "-o", "--output", metavar="FILE", required=True, help=".html, .pdf, .svg or .png"
    )
    for add in (_book, _output):
        add(report)

    log = command("log", "the bench book: list, show, export, import")
    _log(log)
    return parser


def _limit(parser: argparse.ArgumentParser) -> None:
    parser.add_argument(
        "--limit-thd",
        metavar="RATIO",
        type=positive,
        help="largest THD allowed (0.01 is 1 percent)",
    )


def _survey(parser: argparse.ArgumentParser) -> None:
    group = parser.add_argument_group("survey")
    group.add_argument("--from", metavar="HZ", type=positive, default=47.0, help="lowest (47)")
    group.add_argument("--to", metavar="HZ", type=positive, default=18e3, help="highest (18000)")
    group.add_argument("--points", metavar="N", type=count, default=7, help="how many (7)")
    group.add_argument("--limit-thd", metavar="RATIO", type=positive, help="largest THD allowed")
    group.add_argument(
        "--limit-symmetry", metavar="SHARE", type=positive, help="largest rise share off one half"
    )
    group.add_argument("--limit-offset", metavar="VOLTS", type=positive, help="largest offset")
    group.add_argument(
        "--limit-flatness", metavar="RATIO", type=positive, help="largest change of amplitude"
    )
    group.add_argument(
        "--keep-limits", action="store_true", help="keep these limits for the kind, in the book"
    )


def _log(parser: argparse.ArgumentParser) -> None:
    actions = parser.add_subparsers(dest="action", metavar="ACTION", required=True)
    listing = actions.add_parser("list", help="the sheets, a line each", allow_abbrev=False)
    listing.add_argument("--unit", metavar="NAME", help="only this unit's")
    listing.add_argument("--kind", metavar="NAME", help="only this kind's")
    listing.add_argument("--since", metavar="DATE", help="from this date on (YYYY-MM-DD)")
    listing.add_argument("--until", metavar="DATE", help="up to this date, inclusive")
    listing.add_argument("--limit-thd", metavar="RATIO", type=positive, help="only THD above this")
    show = actions.add_parser("show", help="one whole sheet", allow_abbrev=False)
    show.add_argument(
        "sheet", metavar="SHEET", help="a sheet's id, the beginning of one, or a unit"
    )
    export = actions.add_parser("export", help="write sheets to a file", allow_abbrev=False)
    export.add_argument("-o", "--output", metavar="FILE", required=True, help=".json or .csv")
    export.add_argument("--unit", metavar="NAME", help="only this unit's")
    export.add_argument("--kind", metavar="NAME", help="only this kind's")
    bring = actions.add_parser("import", help="merge another bench's export", allow_abbrev=False)
    bring.add_argument("file", metavar="FILE", help="a .json export")
    for action in (listing, show, export, bring):
        _book(action)
        _output(action)


def _interrupt(_number: int, _frame: FrameType | None) -> NoReturn:
    raise KeyboardInterrupt


def run(arguments: Sequence[str] | None = None) -> int:
    """Run one command.

    Returns
    -------
    int
        The documented exit status.
    """
    try:
        signal.signal(signal.SIGTERM, _interrupt)
        return _run(build_parser().parse_args(arguments))
    except SystemExit as end:  # argparse ends so, with its message said
        return int(end.code or 0)
    except KeyboardInterrupt:
        return INTERRUPTED
    except BrokenPipeError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 0


def _run(options: argparse.Namespace) -> int:
    from drivers import SourceError, UnusableCapture

    if getattr(options, "plain", False) and getattr(options, "json", False):
        complain(CommandError("--plain and --json exclude each other"), "Choose one of them.")
        return CommandError.exit_status
    try:
        module = importlib.import_module(options.module)
        status: int = module.run(options)
        return status
    except TrimmerError as error:
        complain(error, error.remedy)
        return error.exit_status
    except UnusableCapture as error:
        complain(error, error.remedy)
        return SIGNAL_UNUSABLE
    except SourceError as error:
        complain(error, error.remedy)
        return SOURCE_FAILED
    except Exception as error:
        from trimmer.measurement import MeasurementError

        if not isinstance(error, MeasurementError):
            raise
        complain(error, error.remedy)
        return SIGNAL_UNUSABLE


def home() -> Path | None:
    """Give the folder that overrides all others, where `TRIMMER_HOME` names one."""
    named = os.environ.get("TRIMMER_HOME")
    return Path(named) if named else None
