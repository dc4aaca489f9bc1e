"""Silencing a descriptor: nothing gets out meanwhile, everything does afterwards."""

import os
import subprocess
import sys
from pathlib import Path

import pytest

from livelag.live.quiet import stderr_silenced


def test_nothing_reaches_the_descriptor_inside_and_everything_after(capfd):
    os.write(2, b"before\n")
    with stderr_silenced(), stderr_silenced():
        os.write(2, b"inside\n")
        subprocess.run([sys.executable, "-c", "import os; os.write(2, b'child\\n')"], check=True)
    os.write(2, b"after\n")
    assert capfd.readouterr().err == "before\nafter\n"


def test_it_is_put_back_after_an_error(capfd):
    with pytest.raises(KeyError), stderr_silenced():
        raise KeyError("x")
    os.write(2, b"after\n")
    assert capfd.readouterr().err == "after\n"


def test_no_descriptor_is_leaked():
    descriptors = Path("/proc/self/fd")
    if not descriptors.exists():
        pytest.skip("this system does not list its descriptors")
    before = len(list(descriptors.iterdir()))
    for _ in range(50):
        with stderr_silenced():
            pass
    assert len(list(descriptors.iterdir())) == before


def test_a_closed_descriptor_is_no_reason_to_stop():
    code = (
        "import os; os.close(2)\n"
        "from livelag.live.quiet import stderr_silenced\n"
        "with stderr_silenced(): print('went on')"
    )
    done = subprocess.run([sys.executable, "-c", code], stdout=subprocess.PIPE, text=True)
    assert (done.returncode, done.stdout) == (0, "went on\n")
