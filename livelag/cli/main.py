"""The `livelag` command: finds the command asked for, runs it, turns errors into one line."""

from __future__ import annotations


def run() -> int:
    """Entry point."""
    return 0
