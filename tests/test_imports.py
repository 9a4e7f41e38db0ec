"""The arrows that a graph of imports cannot see: what is really loaded at run time."""

from __future__ import annotations

import subprocess
import sys

import pytest

HEAVY = (
    "textual",
    "pyvisa",
    "sounddevice",
    "matplotlib",
    "sqlalchemy",
    "pydantic",
    "drivers.bench",
)


def loaded_after(statement: str) -> set[str]:
    """Run a statement in a fresh interpreter and give the modules it loaded."""
    code = f"{statement}\nimport sys\nprint('\\n'.join(sys.modules))"
    done = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True, timeout=60
    )
    return set(done.stdout.split())


@pytest.mark.parametrize(
    ("statement", "never"),
    [
        ("import drivers", (*HEAVY, "trimmer", "scipy")),
        ("import trimmer.__main__, trimmer.cli", (*HEAVY, "numpy", "scipy")),
        ("import trimmer.measurement", (*HEAVY, "drivers", "scipy.signal", "scipy.optimize")),
        ("import trimmer.guidance", (*HEAVY, "drivers", "scipy.signal")),
        ("import trimmer.session", ("textual", "pyvisa", "sounddevice", "matplotlib")),
        ("import drivers.files", (*HEAVY, "trimmer")),
        ("import drivers.visa", ("textual", "pyvisa", "trimmer", "drivers.bench", "drivers.files")),
        ("import drivers.bench", ("textual", "pyvisa", "trimmer", "drivers.visa", "drivers.files")),
    ],
)
def test_nothing_is_loaded_against_the_arrows(statement: str, never: tuple[str, ...]) -> None:
    loaded = loaded_after(statement)
    assert not [name for name in never if name in loaded]


@pytest.mark.parametrize("name", ["trimmer", "drivers"])
def test_the_probe_would_notice_a_loaded_module(name: str) -> None:
    assert name in loaded_after(f"import {name}")
