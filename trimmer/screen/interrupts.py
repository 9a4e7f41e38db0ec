"""An interrupt from outside (a signal, not a key) ends a session as the key does."""

from __future__ import annotations

import asyncio
import signal
from collections.abc import Callable


def on_interrupt(leave: Callable[[], None]) -> None:
    """Call `leave` when the process is interrupted; does nothing where signals cannot be had."""
    try:
        asyncio.get_running_loop().add_signal_handler(signal.SIGINT, leave)
    except (NotImplementedError, RuntimeError, ValueError):
        return
