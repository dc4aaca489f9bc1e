"""The panel in a real terminal emulator, and what it leaves behind, however it ends."""

import pickle
import sys
import time
from pathlib import Path

import pytest
from panel_snapshots import played_snapshot
from rich.cells import cell_len

HERE = Path(__file__).parent


def start_driver(terminal, snapshot):
    driver = f"{sys.executable} {HERE / 'panel_driver.py'} {snapshot}"
    terminal.enter(f"clear; {driver}; echo status $?")
    terminal.wait(lambda: "counted 0" in terminal.text())


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


@pytest.mark.parametrize(("width", "height"), [(60, 20), (80, 24), (200, 50)])
def test_panel_fills_the_terminal_and_leaves_it_clean(terminal, snapshot_file, width, height):
    screen = terminal(width, height)
    start_driver(screen, snapshot_file)
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


def test_panel_follows_the_size_of_the_terminal(terminal, snapshot_file):
    screen = terminal()
    start_driver(screen, snapshot_file)
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
def test_terminal_is_clean_after(terminal, snapshot_file, key, said):
    screen = terminal()
    start_driver(screen, snapshot_file)
    screen.type(key)
    screen.wait(lambda: screen.ask("alternate_on") == "0")
    if key == "k":  # the shell's words may have gone to the screen that was left
        time.sleep(0.2)
        screen.assert_clean()
        return
    screen.wait(lambda: all(words in screen.text() for words in said))
    screen.assert_clean()


def test_interrupt_key_reaches_the_audition_only(terminal, snapshot_file):
    screen = terminal()
    start_driver(screen, snapshot_file)
    screen.run("send-keys", "C-c")
    screen.wait(lambda: "KeyboardInterrupt" in screen.text())
    assert "panel_child" not in screen.text()
    screen.assert_clean()


def test_stop_key_gives_the_terminal_back_and_going_on_takes_it_again(terminal, snapshot_file):
    screen = terminal()
    start_driver(screen, snapshot_file)
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
