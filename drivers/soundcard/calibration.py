"""What full scale of a sound input is in volts, where the person has measured it.

One small TOML file in the settings folder, an entry for each device and channel.
"""

from __future__ import annotations

import json
import math
import os
import tempfile
import tomllib
from pathlib import Path

from drivers.contract import SourceRefused, clean

FILE = "sound.toml"
MOST_V = 1e4
_HEAD = """\
# Volts (peak) that give full scale, for each sound input. Measured once with the gain as it is
# used; moving a gain control or a mixer undoes it.
"""


def stored_calibration(settings_dir: Path, device: str, channel: int) -> float | None:
    """Look up the volts at full scale of a device's channel; None where there are none.

    Raises
    ------
    SourceRefused
        The file is damaged.
    """
    return _entries(settings_dir / FILE).get((device, channel))


def store_calibration(settings_dir: Path, device: str, channel: int, full_scale_v: float) -> None:
    """Keep the volts at full scale of a device's channel, in place of what was kept before.

    Raises
    ------
    SourceRefused
        The value is not possible, or the file is damaged or cannot be written.
    """
    if not (math.isfinite(full_scale_v) and 0.0 < full_scale_v < MOST_V):
        raise SourceRefused(
            f"{full_scale_v} V at full scale is not possible",
            "State the peak volts that just reach full scale, for example 1.8.",
        )
    path = settings_dir / FILE
    entries = _entries(path) | {(device, channel): full_scale_v}
    text = _HEAD + "".join(
        f"\n[[input]]\ndevice = {_quoted(name)}\nchannel = {number}\nfull_scale_v = {volts!r}\n"
        for (name, number), volts in sorted(entries.items())
    )
    try:
        settings_dir.mkdir(parents=True, exist_ok=True)
        # Written beside and renamed over: a crash leaves the old file or the new one.
        handle, beside = tempfile.mkstemp(dir=settings_dir, prefix=".sound-")
        with os.fdopen(handle, "w", encoding="utf-8") as file:
            file.write(text)
        os.replace(beside, path)
    except OSError as error:
        raise SourceRefused(
            f"the calibration cannot be written to {clean(str(path))}: {clean(str(error))}",
            "Check the permissions of the settings folder.",
        ) from error


def _quoted(text: str) -> str:
    """Write a TOML string: JSON's escapes, and DEL, which JSON leaves alone."""
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007f")


def _entries(path: Path) -> dict[tuple[str, int], float]:
    try:
        content = tomllib.loads(path.read_text(encoding="utf-8"))
    except FileNotFoundError:
        return {}
    except (OSError, ValueError) as error:
        raise _damaged(path, str(error)) from error
    inputs = content.get("input", [])
    if not isinstance(inputs, list):
        raise _damaged(path, "`input` is no list of tables")
    return dict(_entry(path, number, entry) for number, entry in enumerate(inputs, 1))


def _entry(path: Path, number: int, entry: object) -> tuple[tuple[str, int], float]:
    fields = entry if isinstance(entry, dict) else {}
    device, channel, volts = (fields.get(key) for key in ("device", "channel", "full_scale_v"))
    if (
        isinstance(device, str)
        and type(channel) is int
        and isinstance(volts, int | float)
        and 0.0 < volts < MOST_V
    ):
        return (device, channel), float(volts)
    raise _damaged(path, f"entry {number} wants device, channel and full_scale_v")


def _damaged(path: Path, why: str) -> SourceRefused:
    return SourceRefused(
        f"{clean(str(path))} is damaged: {clean(why)}",
        "Mend the file, or delete it and calibrate anew.",
    )
