"""Lets `python -m livelag` stand in for the `livelag` command."""

from livelag.cli.main import run

if __name__ == "__main__":
    raise SystemExit(run())
