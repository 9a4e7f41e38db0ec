"""Where the command starts."""

import os

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
"""Set before numpy loads: a reading solves many small systems, which waking a second thread for makes
slower (seen: 5 ms a reading with one thread, 26 ms with two on a busy two-core machine)."""


def main() -> int:
    """Run the command line and give its exit status."""
    from trimmer.cli import run

    return run()


if __name__ == "__main__":
    raise SystemExit(main())
