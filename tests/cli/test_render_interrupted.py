"""A render that is stopped from outside: by a full disk, Ctrl-C or a polite kill."""

import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

resource = pytest.importorskip("resource", reason="limits and signals of POSIX")

LIVELAG = [sys.executable, "-m", "livelag", "render"]


def ended_within(process, seconds=60):
    """Wait for a process; returns its status, standard output and standard error."""
    out, err = process.communicate(timeout=seconds)
    return process.returncode, out, err


@pytest.fixture
def start():
    """Start a render in a group of its own; whatever still runs after the test is ended."""
    started = []

    def begin(*arguments, cwd, **options):
        process = subprocess.Popen(
            [*LIVELAG, *map(str, arguments)], cwd=cwd, text=True, start_new_session=True,
            stdout=subprocess.PIPE, stderr=subprocess.PIPE, **options,
        )  # fmt: skip
        started.append(process)
        return process

    yield begin
    for process in started:
        if process.poll() is None:
            os.killpg(process.pid, signal.SIGKILL)
            process.communicate()


@pytest.fixture
def limited(start):
    """Run with a limit on how large a file may grow, as a full disk would set."""

    def run(*arguments, cwd, size):
        def limit():
            resource.setrlimit(resource.RLIMIT_FSIZE, (size, size))

        return ended_within(start(*arguments, cwd=cwd, preexec_fn=limit))

    return run


def wait_for(condition, seconds=60):
    deadline = time.monotonic() + seconds
    while not (found := condition()):
        assert time.monotonic() < deadline, "it did not begin to write"
        time.sleep(0.005)
    return found


# --- no room ----------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("depth", "name", "size"),
    [
        ("16", "x.wav", 10), ("24", "x.wav", 100_000), ("float", "x.wav", 100_000),
        ("24", "x.flac", 10), ("16", "x.flac", 100_000),
    ],
)  # fmt: skip
def test_no_room_for_the_sound(limited, tmp_path, depth, name, size):
    (tmp_path / "x.wav").write_text("older")
    status, out, err = limited("--depth", depth, "--out", name, cwd=tmp_path, size=size)
    assert (status, out) == (1, "")
    assert err == f"livelag: {name}: cannot be written: File too large\n"
    assert [path.name for path in tmp_path.iterdir()] == ["x.wav"]
    assert (tmp_path / "x.wav").read_text() == "older"


@pytest.mark.parametrize(
    ("option", "name", "size"), [("--cv", "x.csv", 200_000), ("--picture", "x.png", 90_000)]
)
def test_no_room_for_what_goes_beside_it(limited, tmp_path, option, name, size):
    small = ("--phrase", "run", "--rate", 8000, "--depth", 16, "--out", "x.wav")
    more = ("--cv-rate", 8000) if option == "--cv" else ()
    status, out, err = limited(*small, option, name, *more, cwd=tmp_path, size=size)
    assert (status, out) == (1, "")
    assert err == f"livelag: {name}: cannot be written: File too large\n"
    assert not any(tmp_path.iterdir())


def test_no_room_for_a_set(limited, tmp_path):
    status, out, err = limited("--rotations", "0,1", "--out", "set", cwd=tmp_path, size=100_000)
    assert (status, out) == (1, "")
    assert err == "livelag: set/01-fast-0.000.wav: cannot be written: File too large\n"
    assert not any(tmp_path.iterdir())


@pytest.fixture
def small_disk(tmp_path):
    """A file system of 256 kB, where the system lets us mount one."""
    folder = tmp_path / "disk"
    folder.mkdir()
    command = ["mount", "-t", "tmpfs", "-o", "size=256k", "tmpfs", str(folder)]
    try:
        mounted = subprocess.run(command, capture_output=True, check=False).returncode == 0
    except FileNotFoundError:
        mounted = False
    if not mounted:
        pytest.skip("mounting a small disk needs rights that we have not")
    yield folder
    subprocess.run(["umount", str(folder)], check=True)


def test_a_disk_that_is_full(start, small_disk, tmp_path):
    out = small_disk / "x.wav"
    status, shown, err = ended_within(start("--out", out, cwd=tmp_path))
    assert (status, shown) == (1, "")
    assert err == f"livelag: {out}: cannot be written: No space left on device\n"
    assert not any(small_disk.iterdir())


# --- stopped ----------------------------------------------------------------------------------


@pytest.fixture
def long_song(make_song, tmp_path):
    """Twenty hours of music, so that nobody can be too late to stop it."""
    song = make_song((60, 62) * 20, ticks=960 * 20 * 90)
    folder = tmp_path / "out"
    folder.mkdir()
    return song, folder


def growing(folder, least):
    return [p for p in folder.rglob("*.part*") if p.is_file() and p.stat().st_size > least]


@pytest.mark.parametrize(("number", "name"), [(signal.SIGINT, "x.wav"), (signal.SIGTERM, "x.flac")])
def test_stopped_in_mid_render(start, long_song, number, name):
    song, folder = long_song
    (folder / "x.csv").write_text("older")
    process = start(
        "--midi", song, "--rate", 8000, "--depth", 16, "--out", name, "--cv", "x.csv", cwd=folder
    )
    wait_for(lambda: growing(folder, 20_000))
    process.send_signal(number)
    status, out, err = ended_within(process)
    assert (status, out) == (130, "")
    assert err == "livelag: interrupted; nothing was left half-written\n"
    assert [path.name for path in folder.iterdir()] == ["x.csv"]
    assert (folder / "x.csv").read_text() == "older"


@pytest.mark.parametrize(
    ("option", "number", "wait_s"),
    [
        ("--out", signal.SIGINT, 0.0), ("--out", signal.SIGINT, 0.3),
        ("--out", signal.SIGTERM, 0.0), ("--out", signal.SIGHUP, 0.1),
        ("--out", signal.SIGINT, None), ("--out", signal.SIGTERM, None),
        ("--page", signal.SIGINT, None),
    ],
)  # fmt: skip
def test_a_set_stopped_at_any_time(start, long_song, option, number, wait_s):
    song, folder = long_song
    process = start(
        "--midi", song, "--rate", 8000, "--depth", 16, "--rotations", "0,0.5,1", option, "set",
        cwd=folder,
    )  # fmt: skip
    wait_for(lambda: any(folder.iterdir()))
    if wait_s is None:  # in mid-render
        wait_for(lambda: growing(folder, 20_000))
    else:  # while its processes start
        time.sleep(wait_s)
    os.killpg(process.pid, number)  # as a terminal does: to every process of the command
    status, out, err = ended_within(process)
    assert (status, out) == (130, "")
    assert err == "livelag: interrupted; nothing was left half-written\n"
    assert not any(folder.iterdir())
    wait_for(lambda: not _session_lives(process.pid))


def _session_lives(session):
    """Whether any process of a session still runs; one that only waits to be buried does not."""
    for stat in Path("/proc").glob("[0-9]*/stat"):
        try:
            state, _, _, its_session = stat.read_text().rpartition(")")[2].split()[:4]
        except OSError:
            continue
        if int(its_session) == session and state != "Z":
            return True
    return False


def test_a_worker_that_is_killed_is_one_line(start, long_song):
    song, folder = long_song
    process = start(
        "--midi", song, "--rate", 8000, "--rotations", "0,1", "--out", "set", cwd=folder
    )
    wait_for(lambda: growing_wavs(folder))
    children = Path(f"/proc/{process.pid}/task/{process.pid}/children")
    if not children.exists():
        pytest.skip("needs /proc to find a worker")
    workers = [
        int(pid)
        for pid in children.read_text().split()
        if b"import worker" in Path(f"/proc/{pid}/cmdline").read_bytes()
    ]
    os.kill(workers[0], signal.SIGKILL)
    status, out, err = ended_within(process)
    assert (status, out) == (1, "")
    assert len(err.splitlines()) == 1
    assert err.startswith("livelag: a rendering process was ended from outside")
    assert not any(folder.iterdir())


def growing_wavs(folder):
    return [p for p in folder.rglob("*.wav") if p.stat().st_size > 20_000]
