"""A real terminal emulator for tests: a shell in a tmux server of its own."""

import os
import shutil
import subprocess
import time
from pathlib import Path

import livelag


def why_no_tmux():
    """Reason why there is no terminal here, or None."""
    return None if shutil.which("tmux") else "tmux is not installed"


class Terminal:
    """A shell in a tmux server of its own."""

    def __init__(self, folder, width, height, **extra):
        self._tmux = ["tmux", "-u", "-S", str(folder / "tmux"), "-f", os.devnull]
        package = Path(livelag.__file__).parents[1]
        environment = {
            "PATH": os.environ["PATH"],
            "PYTHONPATH": str(package),
            "LC_ALL": "C.UTF-8",
            **extra,
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
