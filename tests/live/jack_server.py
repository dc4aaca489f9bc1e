"""A dummy JACK server and peers on it, started and stopped by process id."""

import json
import os
import re
import select
import shutil
import subprocess
import sys
import time
import uuid
from contextlib import suppress
from pathlib import Path

PEER = Path(__file__).with_name("jack_peer.py")
BACKEND = "mido.backends.rtmidi/UNIX_JACK"


def why_not():
    """Reason why no server can be started here, or None."""
    if not shutil.which("jackd"):
        return "jackd is not installed (Debian: jackd2)"
    try:
        import jack  # noqa: F401
    except (ImportError, OSError) as error:
        return f"JACK-Client is not usable: {error}"
    return None


def environment(name):
    """Environment for a process that should find the server called `name`."""
    return {
        **os.environ,
        "JACK_DEFAULT_SERVER": name,
        "JACK_NO_START_SERVER": "1",
        "JACK_NO_AUDIO_RESERVATION": "1",
    }


class Server:
    """jackd with the dummy driver, under a name of its own.

    Attributes:
        name: what to set JACK_DEFAULT_SERVER to.
        realtime: whether it runs with real-time priority; without it dropouts prove nothing.
    """

    def __init__(self, block, rate, folder):
        self.block, self.rate, self.folder = block, rate, Path(folder)
        self.name = f"livelag-{os.getpid()}-{uuid.uuid4().hex[:6]}"
        self.log = self.folder / f"{self.name}.log"
        self.realtime = True
        self.crashed = False
        self._start(["-R", "-P", "60"])
        if not self._ready():
            self.stop()
            self.realtime = False
            self._start(["-r"])
            if not self._ready():
                text = self.log.read_text("utf-8", "replace")
                self.stop()
                raise RuntimeError(f"jackd did not start:\n{text}")

    def _start(self, scheduling):
        command = ["jackd", "-n", self.name, *scheduling, "-d", "dummy"]
        command += ["-r", str(self.rate), "-p", str(self.block)]
        with self.log.open("w") as log:
            self.process = subprocess.Popen(
                command, stdout=log, stderr=log, env=environment(self.name)
            )

    def _ready(self):
        """Whether the server answers, and runs as asked; jackd only logs it when it cannot."""
        probe = "import jack; jack.Client('ready', no_start_server=True).close()"
        for _ in range(50):
            if self.process.poll() is not None:
                return False
            done = subprocess.run(
                [sys.executable, "-c", probe], env=environment(self.name), capture_output=True
            )
            if done.returncode == 0:
                text = self.log.read_text("utf-8", "replace")
                refused = re.search(r"cannot (use|set) real-?time|Cannot lock down", text, re.I)
                return not (self.realtime and refused)
            time.sleep(0.1)
        return False

    def crash(self):
        """End the server without a goodbye; `stop` is still due."""
        self.process.kill()
        self.process.wait(5)
        self.crashed = True

    def stop(self):
        """End the server politely."""
        if self.crashed:
            # JACK keeps eight places for servers, and gives a dead one's only to its namesake.
            self.crashed = False
            self._start([])
            self._ready()
        if self.process.poll() is None:
            self.process.terminate()
            try:
                self.process.wait(5)
            except subprocess.TimeoutExpired:
                self.crash()
        for left in Path("/dev/shm").glob(f"jack_*{self.name}_*"):
            left.unlink(missing_ok=True)


class PeerProcess:
    """A `jack_peer.py` at work on a server; see there for the plan."""

    def __init__(self, server, plan):
        self.path = server.folder / f"{plan['name']}-{uuid.uuid4().hex[:6]}.json"
        self.path.write_text(json.dumps(plan), "utf-8")
        self.process = subprocess.Popen(
            [sys.executable, str(PEER), str(self.path)],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
            env=environment(server.name),
        )
        self.ready = self.answer(10)

    def answer(self, timeout_s):
        """The next line the peer says."""
        readable, _, _ = select.select([self.process.stdout], [], [], timeout_s)
        line = self.process.stdout.readline() if readable else ""
        if not line:
            self.kill()
            said = self.process.stderr.read() if self.process.stderr else ""
            raise RuntimeError(f"jack_peer said nothing within {timeout_s} s: {said}")
        return json.loads(line)

    def tell(self, word):
        self.process.stdin.write(word + "\n")
        self.process.stdin.flush()

    def go(self):
        self.tell("go")

    def done(self, timeout_s=30):
        """Wait for the end of the plan; its report."""
        report = self.answer(timeout_s)
        assert report["error"] is None, report
        return report

    def quit(self):
        with suppress(OSError, ValueError):
            self.tell("quit")
        try:
            self.process.wait(5)
        except subprocess.TimeoutExpired:
            self.kill()
        self._shut()

    def kill(self):
        """End it as a crash would: no goodbye to the server."""
        self.process.kill()
        self.process.wait(5)

    def _shut(self):
        for stream in (self.process.stdin, self.process.stdout, self.process.stderr):
            with suppress(OSError):
                stream.close()
