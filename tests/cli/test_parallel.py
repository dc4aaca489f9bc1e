"""Calls spread over processes."""

import math
import os
import signal
import subprocess
import sys
import time

import pytest

from livelag.cli.parallel import in_parallel
from livelag.errors import InputError, LivelagError, UnknownNameError
from livelag.units import parse_value

pytestmark = pytest.mark.skipif(sys.platform == "win32", reason="signals of POSIX")


def test_answers_keep_the_order_of_their_tasks():
    assert in_parallel(math.factorial, [(n,) for n in range(12)]) == [
        math.factorial(n) for n in range(12)
    ]


def test_the_first_task_that_failed_tells():
    with pytest.raises(InputError, match="one ohm"):
        in_parallel(parse_value, [("4k7", "ohm"), ("one ohm", "ohm"), ("two", "ohm")])


def test_an_error_with_a_shape_of_its_own_comes_across():
    from livelag.circuit.presets import load_stage

    with pytest.raises(UnknownNameError, match="nowhere"):
        in_parallel(load_stage, [("ideal",), ("nowhere",)])


def test_what_a_call_prints_does_not_get_among_the_answers(capfd):
    assert in_parallel(print, [("one",), ("two",)]) == [None, None]
    assert capfd.readouterr().out == ""


def test_a_process_that_ends_in_mid_call_is_an_error():
    with pytest.raises(LivelagError, match="ended from outside"):
        in_parallel(os._exit, [(3,), (3,)])


def test_workers_do_not_outlive_a_command_that_is_killed():
    program = (
        "import time; from livelag.cli.parallel import in_parallel as p; p(time.sleep, [(60,)] * 2)"
    )
    command = subprocess.Popen([sys.executable, "-c", program], start_new_session=True)
    deadline = time.monotonic() + 20
    while len(session_of(command.pid)) < 1 + min(2, os.cpu_count()):
        assert time.monotonic() < deadline
        time.sleep(0.05)
    time.sleep(0.5)
    command.send_signal(signal.SIGKILL)
    command.wait()
    while session_of(command.pid):
        assert time.monotonic() < deadline
        time.sleep(0.05)


def session_of(leader):
    answer = subprocess.run(["ps", "-o", "pid=", "-s", str(leader)], capture_output=True, text=True)
    return answer.stdout.split()
