import os
import pickle
import subprocess
import sys

import pytest

from livelag.errors import DeviceError
from livelag.live.panel_process import PanelProcess, can_show_panel
from livelag.live.snapshot import Snapshot

# The panel is on a pseudo-terminal; what the test asks for is reported through a pipe.
SHOWS_TO_A_STOPPED_CHILD = """
import multiprocessing, os, pickle, signal, sys, time
import numpy as np
from livelag.live.panel_process import PanelProcess
from livelag.live.snapshot import Snapshot

def main():
    points = np.zeros(4000, np.float32)
    snapshot = Snapshot(strip_key_volts=points, strip_glide_volts=points)
    with PanelProcess() as panel:
        while not panel.show(snapshot):
            time.sleep(0.01)
        child = multiprocessing.active_children()[0].pid
        os.kill(child, signal.SIGSTOP)
        worst = taken = 0
        for _ in range(3000):
            start = time.monotonic()
            taken += panel.show(snapshot)
            worst = max(worst, time.monotonic() - start)
        os.kill(child, signal.SIGCONT)
        end = time.monotonic() + 10
        while not panel.show(snapshot) and time.monotonic() < end:
            time.sleep(0.01)
        again = time.monotonic() < end
    after_close = panel.show(snapshot)
    report = (worst, taken, panel.dropped, again, panel.problem, after_close)
    os.write(2, pickle.dumps(report))

if __name__ == "__main__":
    main()
"""


def test_showing_never_waits_even_for_a_stopped_panel(tmp_path):
    script = tmp_path / "driver.py"
    script.write_text(SHOWS_TO_A_STOPPED_CHILD, encoding="utf-8")
    ours, theirs = os.openpty()
    done = subprocess.Popen(
        [sys.executable, script], stdin=theirs, stdout=theirs, stderr=subprocess.PIPE
    )
    os.close(theirs)
    screen = b""
    try:
        while True:
            try:
                data = os.read(ours, 65536)
            except OSError:
                break
            if not data:
                break
            screen += data
        report = done.stderr.read()
        assert done.wait(10) == 0, report
    finally:
        done.kill()
        done.wait()
        done.stderr.close()
        os.close(ours)
    worst, taken, dropped, again, problem, after_close = pickle.loads(report)
    assert worst < 0.1
    assert taken <= 1
    assert dropped >= 2999
    assert again
    assert problem == ""
    assert not after_close
    # The screen was taken and given back, cursor and wrapping included.
    assert screen.startswith(b"\x1b[?1049h")
    assert screen.endswith(b"\x1b[?7h\x1b[?25h\x1b[?1049l")


def test_without_a_terminal_there_is_no_panel(capfd):
    assert not can_show_panel()
    panel = PanelProcess()
    with pytest.raises(DeviceError, match="--plain"):
        panel.start()
    assert not panel.show(Snapshot())
    panel.close()
