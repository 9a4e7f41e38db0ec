"""Where the command starts."""


def main() -> int:
    """Run the command line and give its exit status."""
    from trimmer.cli import run

    return run()


if __name__ == "__main__":
    raise SystemExit(main())
