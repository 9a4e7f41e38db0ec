"""What every command shares towards its caller: the exit statuses and how trouble is said."""

from __future__ import annotations

import sys

INTERRUPTED = 130
SIGNAL_UNUSABLE = 3
SOURCE_FAILED = 4


def complain(message: object, remedy: str) -> None:
    """Say on stderr what happened and what to do."""
    print(f"trimmer: {message}", file=sys.stderr)
    if remedy:
        print(f"  {remedy}", file=sys.stderr)
    sys.stderr.flush()
