"""The panel in a real terminal emulator, and what it leaves behind, however it ends."""

import os
import pickle
import shutil
import subprocess
import sys
import time
from pathlib import Path

import pytest
from panel_snapshots import played_snapshot
from rich.cells import cell_len

import livelag

HERE = Path(__file__).parent

if not shutil.which("tmux"):
    if os.environ.get("CI"):
        pytest.fail("tmux is not installed", pytrace=False)
    pytest.skip("tmux is not installed", allow_module_level=True)


class Terminal:
    """A shell in a tmux server of its own."""

    def __init__(self, folder, snapshot, width, height):
        self._snapshot = snapshot
        self._tmux = ["tmux", "-u", "-S", str(folder / "tmux"), "-f", os.devnull]
        package = Path(livelag.__file__).parents[1]
        environment = {
            "PATH": os.environ["PATH"],
            "PYTHONPATH": str(package),
            "LC_ALL": "C.UTF-8",
        }
        subprocess.run(
            [*self._tmux, "new-session", "-d", "-x", str(width), "-y", str(height), "sh"],
            env=environment,
            check=True,
        )

    def prepare(self, width, height):
        self.run("set-option", "-g", "status", "off")
        self.run("resize-window", "-x", str(width), "-y", str(height))
        self.wait(lambda: self.text().strip())

    def run(self, *arguments):
        done = subprocess.run(
            [*self._tmux, *arguments], capture_output=True, text=True, check=True, timeout=10
        )
        return done.stdout

    def text(self):
        return self.run("capture-pane", "-p", "-N")

    def lines(self):
        return self.text().removesuffix("\n").split("\n")

    def type(self, text):
        self.run("send-keys", "-l", text)

    def enter(self, command):
        self.type(command)
        self.run("send-keys", "Enter")

    def ask(self, name):
        return self.run("display-message", "-p", f"#{{{name}}}").strip()

    def wait(self, condition, seconds=20.0):
        end = time.monotonic() + seconds
        while not condition():
            assert time.monotonic() < end, self.text()
            time.sleep(0.02)

    def start_driver(self):
        driver = f"{sys.executable} {HERE / 'panel_driver.py'} {self._snapshot}"
        self.enter(f"clear; {driver}; echo status $?")
        self.wait(lambda: "counted 0" in self.text())

    def assert_clean(self):
        """The first screen, the cursor, wrapping and the line settings are as they were."""
        self.wait(lambda: self.ask("alternate_on") == "0")
        assert self.ask("cursor_flag") == "1"
        assert self.ask("wrap_flag") == "1"
        self.enter("clear; stty -a")
        self.wait(lambda: "echoke" in self.text())
        words = self.text().replace(";", " ").split()
        for setting in ("icanon", "echo", "isig", "icrnl", "opost"):
            assert setting in words

    def stop(self):
        self.run("kill-server")


def is_filled(lines, width, height):
    """Whether the panel stands on the whole screen; trailing blanks are not captured."""
    in_place = len(lines) == height and max(map(cell_len, lines)) <= width
    small = width < 60 or height < 20
    ruled = small or lines[1].rstrip() == " " + "─" * (width - 2)
    return in_place and ruled and "? help" in lines[-1]


def assert_filled(lines, width, height):
    assert is_filled(lines, width, height), "\n".join(lines)


@pytest.fixture(scope="module")
def snapshot_file(tmp_path_factory):
    path = tmp_path_factory.mktemp("panel") / "snapshot"
    path.write_bytes(pickle.dumps(played_snapshot()))
    return path


@pytest.fixture
def terminal(tmp_path, snapshot_file):
    started = []

    def start(width=80, height=24):
        started.append(Terminal(tmp_path, snapshot_file, width, height))
        started[-1].prepare(width, height)
        return started[-1]

    yield start
    for one in started:
        one.stop()


@pytest.mark.parametrize(("width", "height"), [(60, 20), (80, 24), (200, 50)])
def test_panel_fills_the_terminal_and_leaves_it_clean(terminal, width, height):
    screen = terminal(width, height)
    screen.start_driver()
    lines = screen.lines()
    assert_filled(lines, width, height)
    assert lines[0].startswith(" Two ranges")
    assert "▐fast▌" in lines[0]
    assert "? help" in lines[-1]
    text = "\n".join(lines)
    assert "◆" in text
    assert "C4" in text
    assert sum(0x2800 < ord(c) < 0x2900 for c in text) > 60
    assert screen.ask("alternate_on") == "1"
    assert screen.ask("cursor_flag") == "0"
    screen.type("?")
    screen.wait(lambda: "Turn the pot far" in screen.text())
    assert_filled(screen.lines(), width, height)
    screen.type("?n")
    screen.wait(lambda: "counted 1" in screen.text())
    assert "Turn the pot" not in screen.text()
    screen.type("q")
    screen.wait(lambda: "status 0" in screen.text())
    assert "driver left" in screen.text()
    assert "◆" not in screen.text()
    screen.assert_clean()


def test_panel_follows_the_size_of_the_terminal(terminal):
    screen = terminal()
    screen.start_driver()
    for width, height in ((120, 40), (50, 15), (60, 20)):
        screen.run("resize-window", "-x", str(width), "-y", str(height))
        screen.wait(lambda w=width, h=height: is_filled(screen.lines(), w, h))
        assert ("make room" in screen.text()) == (width < 60)
    screen.type("q")
    screen.wait(lambda: "driver left" in screen.text())


@pytest.mark.parametrize(
    ("key", "said"),
    [
        ("x", ("RuntimeError: driver failed", "status 1")),
        ("k", ("status 137",)),
        ("c", ("panel: its process ended with status -9", "status 0")),
    ],
)
def test_terminal_is_clean_after(terminal, key, said):
    screen = terminal()
    screen.start_driver()
    screen.type(key)
    screen.wait(lambda: screen.ask("alternate_on") == "0")
    if key == "k":  # the shell's words may have gone to the screen that was left
        time.sleep(0.2)
        screen.assert_clean()
        return
    screen.wait(lambda: all(words in screen.text() for words in said))
    screen.assert_clean()


def test_interrupt_key_reaches_the_audition_only(terminal):
    screen = terminal()
    screen.start_driver()
    screen.run("send-keys", "C-c")
    screen.wait(lambda: "KeyboardInterrupt" in screen.text())
    assert "panel_child" not in screen.text()
    screen.assert_clean()


def test_stop_key_gives_the_terminal_back_and_going_on_takes_it_again(terminal):
    screen = terminal()
    screen.start_driver()
    screen.type("n")
    screen.wait(lambda: "counted 1" in screen.text())
    screen.run("send-keys", "C-z")
    screen.wait(lambda: screen.ask("alternate_on") == "0")
    screen.wait(lambda: "Stopped" in screen.text())
    screen.assert_clean()
    screen.enter("fg")
    screen.wait(lambda: "counted 1" in screen.text() and screen.ask("alternate_on") == "1")
    screen.type("n")
    screen.wait(lambda: "counted 2" in screen.text())
    assert_filled(screen.lines(), 80, 24)
    screen.type("q")
    screen.wait(lambda: "driver left" in screen.text())
    screen.assert_clean()
