"""Fixtures for tests on a dummy JACK server. Without one they skip, but under CI they fail."""

import warnings

import pytest
from jack_server import PeerProcess, Server, why_not
from needed import require
from stolen_time import run_until_unspoilt
from tmux_terminal import Terminal, why_no_tmux


def pytest_runtest_protocol(item, nextitem):
    """Runs each test as usual, but see `stolen_time`."""
    item.ihook.pytest_runtest_logstart(nodeid=item.nodeid, location=item.location)
    for report in run_until_unspoilt(item, nextitem):
        item.ihook.pytest_runtest_logreport(report=report)
    item.ihook.pytest_runtest_logfinish(nodeid=item.nodeid, location=item.location)
    return True


@pytest.fixture
def terminal(tmp_path):
    """Starts terminals: `terminal(width=80, height=24)`, more of the environment by name."""
    require(why_no_tmux())
    started = []

    def start(width=80, height=24, **extra):
        started.append(Terminal(tmp_path, width, height, **extra))
        started[-1].prepare(width, height)
        return started[-1]

    yield start
    for one in started:
        one.stop()


@pytest.fixture
def jack_server(tmp_path, monkeypatch):
    """Starts servers: `jack_server(block=128, rate=48000)`; the last one is this process's."""
    require(why_not())
    started = []
    # Sockets and files of the server lie in TMPDIR's default place, names in the environment.
    monkeypatch.setenv("JACK_NO_START_SERVER", "1")
    monkeypatch.setenv("JACK_NO_AUDIO_RESERVATION", "1")

    def start(block=128, rate=48000):
        server = Server(block, rate, tmp_path)
        started.append(server)
        monkeypatch.setenv("JACK_DEFAULT_SERVER", server.name)
        if not server.realtime:
            with warnings.catch_warnings():
                warnings.simplefilter("default")
                warnings.warn("jackd runs without real-time priority here", stacklevel=2)
        return server

    yield start
    for server in started:
        server.stop()


@pytest.fixture
def jack_peer():
    """Starts peers: `jack_peer(server, name="keys", events=[...])`; see `jack_peer.py`."""
    started = []

    def start(server, **plan):
        peer = PeerProcess(server, plan)
        started.append(peer)
        return peer

    yield start
    for peer in started:
        peer.quit()
