"""Runs the real command in a process of its own, as its user or a script would."""

from __future__ import annotations

import json
import os
import subprocess
import sys
import threading
from collections.abc import Iterator, Mapping
from pathlib import Path
from queue import Empty, Queue
from typing import Any, Self

COMMAND = (sys.executable, "-m", "trimmer")


def trimmer(
    *words: str | Path, stdin: str | None = None, timeout_s: float = 120.0, **more: str
) -> subprocess.CompletedProcess[str]:
    """Run the command to its end."""
    return subprocess.run(
        [*COMMAND, *map(str, words)],
        input=stdin,
        stdin=subprocess.DEVNULL if stdin is None else None,
        capture_output=True,
        text=True,
        timeout=timeout_s,
        check=False,
        env={**os.environ, **more},
    )


class Running:
    """A command that runs while the test talks to it."""

    def __init__(self, *words: str | Path, env: Mapping[str, str] | None = None) -> None:
        self.process = subprocess.Popen(
            [*COMMAND, *map(str, words)],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
            bufsize=1,
            env={**os.environ, **(env or {})},
        )
        self._lines: Queue[str | None] = Queue()
        self.messages: list[str] = []
        threading.Thread(target=self._pump, daemon=True).start()
        threading.Thread(target=self._listen, daemon=True).start()

    def _pump(self) -> None:
        assert self.process.stdout is not None
        for text in self.process.stdout:
            self._lines.put(text.rstrip("\n"))
        self._lines.put(None)

    def _listen(self) -> None:
        assert self.process.stderr is not None
        for text in self.process.stderr:
            self.messages.append(text.rstrip("\n"))

    def line(self, timeout_s: float = 60.0) -> str | None:
        """Give the next line of stdout; None at its end."""
        try:
            return self._lines.get(timeout=timeout_s)
        except Empty:
            told = "\n".join(self.messages)
            raise AssertionError(f"no line within {timeout_s} s; stderr:\n{told}") from None

    def events(self, timeout_s: float = 60.0) -> Iterator[dict[str, Any]]:
        """Give stdout's lines as JSON until its end."""
        while (text := self.line(timeout_s)) is not None:
            yield json.loads(text)

    def say(self, text: str = "") -> None:
        """Write a line to stdin."""
        assert self.process.stdin is not None
        self.process.stdin.write(text + "\n")
        self.process.stdin.flush()

    def end(self, timeout_s: float = 30.0) -> int:
        """Wait for the exit status."""
        return self.process.wait(timeout=timeout_s)

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *exc: object) -> None:
        if self.process.poll() is None:
            self.process.kill()
            self.process.wait(timeout=10)
        for stream in (self.process.stdin, self.process.stdout, self.process.stderr):
            if stream is not None:
                stream.close()
