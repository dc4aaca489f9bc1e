"""`livelag audition` and `livelag devices`: what they refuse, and what they say without sound."""

import json
import subprocess
import sys

import pytest


@pytest.mark.parametrize(
    ("options", "message"),
    [
        (("--pulse-width", "0.3"), "--pulse-width goes with --waveform pulse"),
        (("--marks", "m.toml"), "--marks goes with --by-ear"),
        (("--by-ear", "--range", "slow"), "--range does not go with --by-ear"),
        (("--cv-device", "x"), "--cv-device goes with --cv-in"),
        (("--full-scale-volts", "5"), "--full-scale-volts goes with"),
        (("--cv-in", "1"), "--cv-in needs --full-scale-volts"),
        (("--cv-in", "1", "--full-scale-volts", "5", "--phrase", "run"), "takes no phrase"),
        (("--no-midi-in", "--midi-in", "keys"), "--no-midi-in excludes"),
        (("--cv-out", "0"), "channels count from 1"),
        (("--block", "8"), "--block is 8; it must be 16 to 8192"),
        (("--seconds", "0"), "--seconds is 0"),
        (("--phrase", "run", "--midi", "x.mid"), "not allowed with argument"),
    ],
)
def test_options_that_do_not_apply_are_a_wrong_command_line(livelag, options, message):
    answer = livelag("audition", *options)
    assert answer.status == 2
    assert message in answer.err.splitlines()[-1]


@pytest.mark.parametrize(
    ("options", "message"),
    [
        (("nosuch",), "unknown preset 'nosuch'"),
        (("--method", "sloppy"), "unknown method 'sloppy'; known: exact, bilinear"),
        (("--waveform", "square"), "unknown waveform 'square'"),
        (("--rotation", "2"), "rotation is 2; it must be 0 to 1"),
        (("--phrase", "nosuch"), "unknown phrase 'nosuch'"),
        (("--midi", "nosuch.mid"), "nosuch.mid"),
        (("--pot-cc", "64"), "pot_controller is 64"),
        (("--pot-cc", "7", "--range-cc", "7"), "range_controller is 7"),
        (("--by-ear", "--marks", "gone/m.toml"), "gone/m.toml: folder 'gone' does not exist"),
        (("--by-ear", "--marks", "."), ".: is a folder; name a file"),
        (("--takes", "taken"), "taken: is a file; name a folder for the takes"),
    ],
)
def test_bad_input_is_one_line_before_anything_sounds(livelag, tmp_path, options, message):
    (tmp_path / "taken").write_text("")
    answer = livelag("audition", *options)
    assert answer.status == 1
    (line,) = answer.err.splitlines()
    assert line.startswith("livelag: ")
    assert message in line


def test_devices_answers_whatever_is_missing(livelag):
    answer = livelag("devices", "--json")
    assert answer.status == 0
    found = json.loads(answer.out)
    assert set(found) == {"outputs", "midi_inputs", "sound_problem", "midi_problem"}
    assert livelag("devices").status == 0


def test_a_device_to_calibrate_goes_with_calibrating(livelag):
    answer = livelag("devices", "--device", "x")
    assert answer.status == 2
    assert "--device goes with --calibrate" in answer.err


WITHOUT = """
import sys
sys.modules["sounddevice"] = None  # as on a machine where it cannot be imported
from livelag.cli.main import run
sys.exit(run(sys.argv[1:]))
"""


@pytest.mark.parametrize(
    ("arguments", "status"),
    [(("audition", "--no-midi-in"), 1), (("devices",), 0), (("render", "--phrase", "run"), 0)],
)
def test_without_portaudio_it_says_what_to_install_and_renders_all_the_same(
    tmp_path, arguments, status
):
    done = subprocess.run(
        [sys.executable, "-c", WITHOUT, *arguments], cwd=tmp_path, capture_output=True, text=True
    )
    assert done.returncode == status
    assert "Traceback" not in done.stderr
    if arguments[0] != "render":
        for system in ("Debian", "Fedora", "macOS", "Windows"):
            assert system in done.stderr
