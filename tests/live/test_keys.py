import contextlib
import os
import pty
import signal
import subprocess
import sys
import termios
import time

import pytest
from hypothesis import given
from hypothesis import strategies as st

from livelag.live.key_decoder import KeyDecoder
from livelag.live.keys import MOST_KEYS, KeyReader


def decode(*pieces):
    decoder = KeyDecoder()
    return [key for piece in pieces for key in decoder.feed(piece)] + decoder.give_up()


@pytest.mark.parametrize(
    ("data", "keys"),
    [
        (b"rg-+=_?", ["r", "g", "-", "+", "=", "_", "?"]),
        (b" \t\r\n\x7f", ["space", "tab", "enter", "enter", "backspace"]),
        # ECMA-48 cursor keys, and the same in application mode (from memory).
        (b"\x1b[A\x1b[B\x1b[C\x1b[D", ["up", "down", "right", "left"]),
        (b"\x1bOA\x1bOB\x1bOC\x1bOD", ["up", "down", "right", "left"]),
        (b"\x1b", ["escape"]),
        (b"\x1b\x1b[C", ["right"]),
        # Sequences of keys that are none of ours, and of no key at all.
        (b"\x1b[5~\x1b[1;5C\x1b[15~\x1b[Z\x1bOP\x1b[<0;3;4Mq", ["q"]),
        (b"\x1bqx", ["x"]),
        (b"\x1b]0;quit now\x07r", ["r"]),
        (b"\x1bPquit\x1b\\r", ["r"]),
        (b"\x1b[\x1b[A", ["up"]),
        ("é鍵".encode(), ["é", "鍵"]),
        (b"\xff\xfea\x01\x02", ["a"]),
        ("\x9b".encode(), []),
    ],
)
def test_decoding(data, keys):
    assert decode(data) == keys
    assert decode(*(bytes([byte]) for byte in data)) == keys


@given(st.lists(st.binary(max_size=30), max_size=10))
def test_any_bytes_split_anywhere_give_the_same_keys(pieces):
    assert decode(*pieces) == decode(b"".join(pieces))


def test_endless_sequence_is_given_up():
    decoder = KeyDecoder()
    assert decoder.feed(b"\x1b]" + b"q" * 100_000) == []
    assert decoder.pending
    assert decoder.give_up() == []
    assert decoder.feed(b"q") == ["q"]


@pytest.fixture
def terminal():
    ours, theirs = pty.openpty()
    yield ours, theirs
    for fd in (ours, theirs):
        with contextlib.suppress(OSError):
            os.close(fd)


def local_flags(fd):
    return termios.tcgetattr(fd)[3] & (termios.ICANON | termios.ECHO | termios.ISIG)


def test_keys_come_at_once_without_echo_and_the_terminal_is_put_back(terminal):
    ours, theirs = terminal
    before = termios.tcgetattr(theirs)
    handlers = [signal.getsignal(s) for s in (signal.SIGTSTP, signal.SIGCONT, signal.SIGTERM)]
    with KeyReader(theirs) as reader:
        assert local_flags(theirs) == termios.ISIG
        assert reader.read_keys(0.0) == []
        os.write(ours, b"r\x1b[C")
        assert reader.read_keys(1.0) == ["r", "right"]
        os.write(ours, b"\x1b[")
        os.write(ours, b"D")
        assert reader.read_keys(1.0) == ["left"]
        os.write(ours, b"\x1b")
        assert reader.read_keys(1.0) == ["escape"]
    assert termios.tcgetattr(theirs) == before
    assert [signal.getsignal(s) for s in (signal.SIGTSTP, signal.SIGCONT, signal.SIGTERM)] == (
        handlers
    )


def test_terminal_is_put_back_after_an_exception(terminal):
    _, theirs = terminal
    before = termios.tcgetattr(theirs)
    with pytest.raises(ZeroDivisionError), KeyReader(theirs):
        raise ZeroDivisionError
    assert termios.tcgetattr(theirs) == before


def test_a_paste_is_no_typing(terminal):
    ours, theirs = terminal
    with KeyReader(theirs) as reader:
        os.write(ours, b"q" * (MOST_KEYS + 1))
        assert reader.read_keys(1.0) == []
        os.write(ours, b"qqq")  # its end
        assert reader.read_keys(1.0) == []
        assert reader.pasted == 1
        time.sleep(0.25)
        os.write(ours, b"r" * MOST_KEYS)
        assert reader.read_keys(1.0) == ["r"] * MOST_KEYS


def test_waiting_takes_as_long_as_asked_and_no_longer(terminal):
    with KeyReader(terminal[1]) as reader:
        start = time.monotonic()
        assert reader.read_keys(0.1) == []
        assert 0.09 <= time.monotonic() - start < 0.5


def test_hang_up_is_told(terminal):
    ours, theirs = terminal
    with KeyReader(theirs) as reader:
        assert not reader.gone
        os.close(ours)
        assert reader.read_keys(0.5) == []
        assert reader.gone
        assert reader.read_keys(0.01) == []


def test_what_is_no_terminal_gives_no_keys(tmp_path):
    read_end, write_end = os.pipe()
    os.write(write_end, b"qqq")
    with KeyReader(read_end) as reader:
        assert reader.read_keys(0.01) == []
        assert not reader.gone
    assert os.read(read_end, 9) == b"qqq"
    os.close(read_end)
    os.close(write_end)
    with KeyReader() as reader:  # pytest's standard input is closed or a file
        assert reader.read_keys(0.0) == []


CHILD = """
import sys
from livelag.live.keys import KeyReader
with KeyReader() as reader:
    print("ready", flush=True)
    while True:
        for key in reader.read_keys(0.05):
            print("key", key, flush=True)
"""


@pytest.fixture
def child(terminal):
    _, theirs = terminal
    # In a group of its own: the system stops nobody in a group that has lost its shell.
    process = subprocess.Popen(
        [sys.executable, "-c", CHILD], stdin=theirs, stdout=subprocess.PIPE, text=True,
        process_group=0,
    )  # fmt: skip
    assert process.stdout.readline() == "ready\n"
    yield process
    process.kill()
    process.wait()
    process.stdout.close()


def wait_for(condition, seconds=5.0):
    end = time.monotonic() + seconds
    while not condition():
        assert time.monotonic() < end
        time.sleep(0.01)


@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGHUP, signal.SIGINT])
def test_terminal_is_put_back_when_told_to_end(terminal, child, number, capfd):
    _, theirs = terminal
    cooked = termios.ICANON | termios.ECHO | termios.ISIG
    assert local_flags(theirs) == termios.ISIG
    child.send_signal(number)
    status = child.wait(5)
    assert local_flags(theirs) == cooked
    assert status == -number


def test_terminal_is_itself_while_stopped(terminal, child):
    ours, theirs = terminal
    cooked = termios.ICANON | termios.ECHO | termios.ISIG
    for _ in range(2):
        child.send_signal(signal.SIGTSTP)
        wait_for(lambda: os.waitid(os.P_PID, child.pid, os.WSTOPPED | os.WNOHANG) is not None)
        assert local_flags(theirs) == cooked
        child.send_signal(signal.SIGCONT)
        wait_for(lambda: local_flags(theirs) == termios.ISIG)
        os.write(ours, b"r")
        assert child.stdout.readline() == "key r\n"
