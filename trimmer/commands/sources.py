"""`trimmer sources`: what can be read from this machine, and what each answers."""

from __future__ import annotations

import argparse
import sys
import threading
from collections.abc import Callable
from concurrent.futures import Future
from typing import Any

from drivers import SourceError, clean
from trimmer.commands.opening import settings_folder
from trimmer.console import complain
from trimmer.events import Event, line

PATIENCE_S = 8.0
"""How long the instruments are looked for, all together."""

Found = list[Event]


def instruments() -> Found:
    """Look for instruments that the VISA library sees, and ask each who it is."""
    from drivers.visa import list_instruments

    return [
        {
            "event": "source",
            "source": each.resource,
            "shape": "visa",
            "identity": each.identity,
            "dialect": each.dialect,
            "problem": each.problem,
        }
        for each in list_instruments(PATIENCE_S, settings_folder())
    ]


def sound_inputs() -> Found:
    """Look for sound inputs."""
    from drivers.soundcard import list_sound_devices

    return [
        {
            "event": "source",
            "source": f"sound:{each.name}",
            "shape": "sound",
            "identity": clean(each.name),
            "dialect": None,
            "problem": None,
        }
        for each in list_sound_devices()
    ]


def started(look: Callable[[], Found]) -> Future[Found]:
    """Look in a thread that dies with the process: a driver library may hang for good."""
    future: Future[Found] = Future()

    def run() -> None:
        try:
            future.set_result(look())
        except Exception as error:  # noqa: BLE001 - carried over to the caller, whatever it is
            future.set_exception(error)

    threading.Thread(target=run, daemon=True).start()
    return future


def run(options: argparse.Namespace) -> int:
    """Look everywhere at once; what cannot be looked at is said, and is no failure."""
    show: Callable[[Event], Any] = _json if options.json else _plain
    bench = {"source": "bench", "shape": "bench", "identity": "the built-in simulated unit"}
    show({"event": "source", **bench, "dialect": None, "problem": None})
    looks = [("instruments", started(instruments)), ("sound inputs", started(sound_inputs))]
    for what, future in looks:
        try:
            for event in future.result(timeout=PATIENCE_S + 4.0):
                show(event)
        except SourceError as error:
            complain(f"{what}: {error}", error.remedy)
        except TimeoutError:
            complain(f"{what}: no answer within {PATIENCE_S + 4.0:.0f} s", "Unplug what hangs.")
    if not options.json:
        print(
            "A raw socket is in no list: try TCPIP::ADDRESS::5025::SOCKET with `trimmer measure`."
        )
    sys.stdout.flush()
    return 0


def _json(event: Event) -> None:
    print(line(event), flush=True)


def _plain(event: Event) -> None:
    dialect = f", dialect {event['dialect']}" if event["dialect"] else ""
    name = clean(event["source"])
    said = event["problem"] or event["identity"] or "no answer"
    print(f"{name}: {said}{dialect}", flush=True)
