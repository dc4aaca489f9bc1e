"""`livelag audition` as a process of its own, its keys typed through a pseudo-terminal."""

import json
import os
import pty
import subprocess
import sys
import time

from jack_server import BACKEND, environment


class Audition:
    """Runs an audition on a JACK server, in a folder, until told to leave."""

    def __init__(self, server, folder, *options, midi=True):
        self.folder = folder
        self._ours, theirs = pty.openpty()
        extra = [] if midi else ["--no-midi-in"]
        self.process = subprocess.Popen(
            [sys.executable, "-m", "livelag", "audition", *map(str, options), *extra, "--json"],
            stdin=theirs, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True, cwd=folder,
            env={**environment(server.name), "MIDO_BACKEND": BACKEND},
        )  # fmt: skip
        os.close(theirs)
        self.said = []
        self.wait_for("sound", "saw at", "sine at")

    def wait_for(self, *words, seconds=20.0):
        """Read what it says until one of these words is among it."""
        end = time.monotonic() + seconds
        while time.monotonic() < end:
            line = self.process.stderr.readline()
            if not line:
                break
            self.said.append(line.rstrip())
            if any(word in line for word in words):
                return line
        raise AssertionError(f"none of {words} was said:\n" + "\n".join(self.said))

    def type(self, keys):
        os.write(self._ours, keys.encode())

    def leave(self, key="q"):
        """Type the key that leaves, and return the answer."""
        self.type(key)
        return self.answer()

    def answer(self, seconds=20.0):
        out, err = self.process.communicate(timeout=seconds)
        self.said += err.splitlines()
        return json.loads(out) if out.strip() else None

    def stop(self):
        if self.process.poll() is None:
            self.process.kill()
            self.process.communicate()
        os.close(self._ours)
