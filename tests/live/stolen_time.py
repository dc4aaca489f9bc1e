"""Another turn for a test that failed while the host took the processor away.

A virtual machine is stopped now and then so that others on the same host can run; Linux counts
that as stolen time. Real-time sound cannot survive it and a test on a sound server proves
nothing then, neither that livelag is right nor that it is wrong. Without stolen time a failure
stands at once.
"""

import os
import time
from pathlib import Path

from _pytest.runner import runtestprotocol

MOST_TURNS = 4
SPOILS_S = 0.02
WAIT_S = 30.0


def stolen_s():
    """Seconds stolen so far, all processors together; 0 where the system does not tell."""
    try:
        first = Path("/proc/stat").read_text("ascii").splitlines()[0]
        return int(first.split()[8]) / os.sysconf("SC_CLK_TCK")
    except (OSError, IndexError, ValueError):
        return 0.0


def wait_for_quiet():
    """Until a busy second has gone by with nothing stolen from it, or WAIT_S have."""
    end = time.monotonic() + WAIT_S
    while time.monotonic() < end:
        before = stolen_s()
        second = time.monotonic() + 1.0
        while time.monotonic() < second:
            pass
        if stolen_s() == before:
            return


def run_until_unspoilt(item, nextitem):
    """Run a test, again while it fails with time stolen from it; the last turn's reports."""
    turns_left = MOST_TURNS
    while True:
        before = stolen_s()
        reports = runtestprotocol(item, log=False, nextitem=nextitem)
        taken_s = stolen_s() - before
        turns_left -= 1
        failed = any(report.failed for report in reports)
        if not failed or taken_s < SPOILS_S or not turns_left:
            return reports
        print(f"\n{item.nodeid} failed, {taken_s:.2f} s were stolen: {turns_left} turns left")
        wait_for_quiet()
        item._initrequest()  # fresh fixtures
