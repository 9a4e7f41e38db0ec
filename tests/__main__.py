"""Everything that must hold, by one command: `python -m tests` (further words go to pytest)."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent
TOOLS = Path(sys.executable).parent

CHECKS = (
    ("ruff", "format", "--check", "."),
    ("ruff", "check", "."),
    ("mypy",),
    ("lint-imports",),
)


def main() -> int:
    """Run the static checks, then the tests; give the first status that is not 0, after all ran."""
    status = 0
    for tool, *words in CHECKS:
        print(f"+ {tool} {' '.join(words)}", flush=True)
        status = (
            subprocess.run([str(TOOLS / tool), *words], cwd=ROOT, check=False).returncode or status
        )
    words = sys.argv[1:] or ["-n", "2"]
    print(f"+ pytest {' '.join(words)}", flush=True)
    command = [sys.executable, "-m", "pytest", "-q", *words]
    tests = subprocess.run(command, cwd=ROOT, check=False).returncode
    return tests or status


if __name__ == "__main__":
    raise SystemExit(main())
