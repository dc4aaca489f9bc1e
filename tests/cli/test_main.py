"""The command itself: help, start-up, exit statuses, and what it does when nobody listens."""

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

import livelag as package
from livelag.cli.main import COMMANDS

# argparse itself passes over help that cannot be written at once, so let it be buffered.
BUFFERED = {key: value for key, value in os.environ.items() if key != "PYTHONUNBUFFERED"}
HEAVY = ("numpy", "scipy", "matplotlib", "sounddevice", "soundfile", "mido", "rich", "quantiphy")


def python(*arguments, cwd=None, **options):
    return subprocess.run(
        [sys.executable, *arguments], capture_output=True, text=True, cwd=cwd, timeout=60, **options
    )


def loaded_after(command, cwd):
    """Which of the heavy packages are imported once a command line has run."""
    code = (
        "import sys, json\n"
        "from livelag.cli.main import run\n"
        "try:\n    status = run(json.loads(sys.argv[1]))\n"
        "except SystemExit as end:\n    status = end.code\n"
        f"found = [name for name in {HEAVY!r} if name in sys.modules]\n"
        "print(json.dumps([status, found]), file=sys.stderr)"
    )
    ended = python("-c", code, json.dumps(command), cwd=cwd)
    status, found = json.loads(ended.stderr.splitlines()[-1])
    assert status == 0, ended.stderr
    return set(found)


@pytest.mark.parametrize("command", [["--help"], ["--version"], ["render", "--help"]])
def test_help_imports_nothing_heavy(tmp_path, command):
    assert loaded_after(command, tmp_path) == set()


def test_rendering_imports_neither_sound_device_nor_plots(tmp_path):
    command = ["render", "--phrase", "run", "--rate", "8000", "--out", "x.wav", "--cv", "x.csv"]
    loaded = loaded_after(command, tmp_path)
    assert "numpy" in loaded
    assert not loaded & {"matplotlib", "sounddevice"}
    loaded = loaded_after([*command, "--picture", "x.png"], tmp_path)
    assert "matplotlib" in loaded
    assert "sounddevice" not in loaded


@pytest.mark.parametrize("command", [["presets"], ["ranges", "--json"]])
def test_looking_things_up_imports_no_sound_and_no_plots(tmp_path, command):
    assert not loaded_after(command, tmp_path) & {"matplotlib", "sounddevice", "soundfile"}


@pytest.mark.parametrize("start", [["-m", "livelag"], None])
def test_both_ways_to_start_are_the_same_command(tmp_path, start):
    if start is None:
        script = Path(sys.executable).with_name("livelag")
        if not script.exists():
            pytest.skip("livelag is on the path but not installed")
        ended = subprocess.run(
            [script, "--version"], capture_output=True, text=True, cwd=tmp_path, timeout=60
        )
    else:
        ended = python(*start, "--version", cwd=tmp_path)
    assert (ended.returncode, ended.stdout) == (0, f"livelag {package.__version__}\n")


def test_a_fault_is_one_line_and_status_1_through_the_shell(tmp_path):
    ended = python("-m", "livelag", "render", "--midi", "no.mid", cwd=tmp_path)
    assert (ended.returncode, ended.stdout) == (1, "")
    assert ended.stderr == "livelag: no.mid: does not exist; name a Standard MIDI File\n"


def test_help_names_every_command(livelag):
    answer = livelag("--help")
    assert answer.status == 0
    for name in COMMANDS:
        assert f"\n    {name}" in answer.out
    assert "Protect your ears" in answer.out


@pytest.mark.parametrize("name", COMMANDS)
def test_every_command_has_json_and_an_example(livelag, name):
    answer = livelag(name, "--help")
    assert answer.status == 0
    assert "--json" in answer.out
    assert answer.out.count(f"Example: livelag {name}") == 1


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        ((), "livelag: the following arguments are required: COMMAND; see livelag --help"),
        (("rendr",), "livelag: COMMAND: invalid choice: 'rendr'"),
        (("ranges", "a", "b"), "livelag ranges: 'b' is one argument too many; see livelag"),
        (("--json", "ranges"), "livelag ranges: --json goes after the command's name; see"),
        (("audition", "--output", "1"), "livelag audition: there is no option --output; see"),
        (("--nope", "ranges"), "livelag ranges: there is no option --nope; see"),
        (
            ("render", "--rotaton=1"),
            "livelag render: there is no option --rotaton; did you mean --rotation; see livelag",
        ),
        (("render", "--rate", "fast"), "livelag render: --rate: 'fast' is not a whole number; see"),
        (("render", "--rotation", "1/2"), "livelag render: --rotation: '1/2' is not a number; see"),
        (("render", "--rotation"), "livelag render: --rotation: expected one argument; see"),
        (("render", "--rate", "a\nb"), "livelag render: --rate: 'a\\nb' is not a whole"),
    ],
)
def test_a_wrong_command_line_is_one_line_and_status_2(livelag, arguments, said):
    answer = livelag(*arguments)
    assert (answer.status, answer.out) == (2, "")
    assert answer.err.startswith(said)
    assert len(answer.err.splitlines()) == 1


def test_a_message_stays_on_one_line_whatever_the_name(livelag):
    answer = livelag("render", "--midi", "two\nlines\r.mid", "--out", "x.wav")
    assert answer.status == 1
    assert len(answer.err.splitlines()) == 1
    assert "two lines .mid" in answer.err


@pytest.mark.skipif(sys.platform == "win32", reason="file names are bytes only on POSIX")
def test_a_file_name_that_is_no_text_is_shown_somehow(tmp_path):
    name = os.fsdecode(b"\xff.wav")
    command = ["render", "--phrase", "run", "--rate", "8000", "--out", name]
    ended = python("-m", "livelag", *command, cwd=tmp_path)
    assert (ended.returncode, ended.stderr) == (0, "")
    assert "udcff.wav" in ended.stdout
    assert [os.fsencode(path.name) for path in tmp_path.iterdir()] == [b"\xff.wav"]


def test_output_in_another_encoding_loses_no_answer(tmp_path):
    ended = python(
        "-m", "livelag", "ranges", cwd=tmp_path, env={**os.environ, "PYTHONIOENCODING": "ascii"}
    )
    assert (ended.returncode, ended.stderr) == (0, "")
    assert "fast" in ended.stdout


@pytest.mark.skipif(sys.platform == "win32", reason="pipes break otherwise there")
@pytest.mark.parametrize("command", ["presets", "--help", "ranges --json"])
def test_a_reader_that_has_gone_is_no_traceback(tmp_path, command):
    read, write = os.pipe()
    os.close(read)
    ended = subprocess.run(
        [sys.executable, "-m", "livelag", *command.split()],
        stdout=write, stderr=subprocess.PIPE, text=True, cwd=tmp_path, timeout=60,
        env=BUFFERED,
    )  # fmt: skip
    os.close(write)
    assert (ended.returncode, ended.stderr) == (1, "")


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="needs /dev/full")
@pytest.mark.parametrize("command", ["presets", "--help"])
def test_a_standard_output_that_is_full_is_one_line(tmp_path, command):
    with Path("/dev/full").open("w") as full:
        ended = subprocess.run(
            [sys.executable, "-m", "livelag", command],
            stdout=full, stderr=subprocess.PIPE, text=True, cwd=tmp_path, timeout=60,
            env=BUFFERED,
        )  # fmt: skip
    assert ended.returncode == 1
    assert ended.stderr == "livelag: standard output: No space left on device\n"


@pytest.mark.skipif(sys.platform == "win32", reason="needs a POSIX shell")
def test_a_standard_output_that_is_closed_still_renders(tmp_path):
    command = f"{sys.executable} -m livelag render --phrase run --rate 8000 --out x.wav >&-"
    ended = subprocess.run(
        command, shell=True, stderr=subprocess.PIPE, text=True, cwd=tmp_path, timeout=60
    )
    assert (ended.returncode, ended.stderr) == (0, "")
    assert (tmp_path / "x.wav").exists()
