"""Naming sound devices, and what is said where there are none."""

import subprocess
import sys
from types import SimpleNamespace

import pytest

from livelag.errors import DeviceError, InputError, UnknownNameError
from livelag.live import devices


def entry(name, host, outputs=2, inputs=0):
    return {
        "name": name,
        "hostapi": host,
        "max_output_channels": outputs,
        "max_input_channels": inputs,
        "default_samplerate": 48000.0,
        "default_low_output_latency": 0.01,
    }


@pytest.fixture
def bench(monkeypatch):
    """A system with two driver interfaces, in the shape sounddevice describes one."""
    library = SimpleNamespace(
        PortAudioError=OSError,
        query_hostapis=lambda: (
            {"name": "Old", "default_input_device": 1, "default_output_device": 0},
            {"name": "New", "default_input_device": -1, "default_output_device": 3},
        ),
        query_devices=lambda: [
            entry("Speakers", 0),
            entry("Microphone", 0, outputs=0, inputs=1),
            entry("Bench interface", 0, outputs=8, inputs=8),
            entry("Speakers", 1),
            entry("Bench interface (line 3/4)", 1),
        ],
        default=SimpleNamespace(device=(1, 3)),
    )
    monkeypatch.setattr(devices, "sound_library", lambda: library)
    return library


@pytest.mark.parametrize(
    ("asked", "number"),
    [
        (None, 3),
        (2, 2),
        ("2", 2),
        ("bench INTERFACE", 2),
        ("bench interface, old", 2),
        ("line 3/4", 4),
        ("Speakers, Old", 0),
        ("speakers", 3),  # twice there: the default's interface wins
        ("speak", 3),
    ],
)
def test_an_output_is_found_by_number_name_or_part_of_it(bench, asked, number):
    assert devices.find_output(asked).number == number


def test_what_exists_is_listed_when_a_name_is_not_known(bench):
    with pytest.raises(UnknownNameError) as caught:
        devices.find_output("headphones")
    for text in ("0 Speakers, Old", "2 Bench interface, Old", "4 Bench interface (line 3/4), New"):
        assert text in str(caught.value)
    assert "Microphone" not in str(caught.value)


@pytest.mark.parametrize("asked", [1, "microphone", 99, "", -1])
def test_an_input_is_no_output(bench, asked):
    with pytest.raises(UnknownNameError):
        devices.find_output(asked)


def test_an_input_is_found(bench):
    assert devices.find_input().number == 1
    assert devices.find_input("bench").number == 2


def test_a_name_that_fits_two_devices_is_refused(bench):
    with pytest.raises(InputError, match=r"'bench' fits several: 2 Bench.*4 Bench"):
        devices.find_output("bench")


def test_a_system_without_outputs_says_so(bench):
    bench.query_devices = lambda: [entry("Microphone", 0, outputs=0, inputs=1)]
    with pytest.raises(DeviceError, match="no sound output"):
        devices.find_output()


def test_a_missing_portaudio_is_one_line_that_says_what_to_install(tmp_path):
    # The real module, kept from finding the real library.
    code = (
        "import ctypes.util\n"
        "ctypes.util.find_library = lambda name: None\n"
        "from livelag.live import devices\n"
        "from livelag.errors import DeviceError\n"
        "try:\n"
        "    devices.list_sound_devices()\n"
        "except DeviceError as error:\n"
        "    print(error)\n"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True)
    if sys.platform in ("darwin", "win32"):
        pytest.skip("the wheel brings PortAudio here")
    assert done.stderr == ""
    assert done.stdout.count("\n") == 1
    for word in ("PortAudio", "libportaudio2", "dnf install portaudio", "macOS and Windows"):
        assert word in done.stdout


def test_importing_the_room_does_not_import_sounddevice_or_mido():
    code = (
        "import sys, livelag.live.devices, livelag.live.clock\n"
        "print(sorted({'sounddevice', 'mido', 'numpy'} & set(sys.modules)))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True)
    assert done.stdout.strip() == "[]"


def test_a_real_server_is_listed(jack_server):
    jack_server(block=128)
    code = (
        "from livelag.live.devices import find_output\n"
        "d = find_output('jack')\n"
        "print(d.host_api, d.outputs, d.rate_hz, d.number == find_output(d.number).number)"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True)
    assert done.stderr == ""
    assert done.stdout.split("\n")[0].startswith("JACK")
    assert done.stdout.rstrip().endswith("48000.0 True")
