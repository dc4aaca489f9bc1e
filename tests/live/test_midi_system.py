"""Which back end, and what is said where there is none."""

import importlib.util
import sys
import types

import mido
import pytest

from livelag.errors import DeviceError
from livelag.live import midi_system
from livelag.live.midi_system import MidiSystem


def test_no_back_end_is_one_line_that_says_what_to_install(monkeypatch):
    monkeypatch.delenv("MIDO_BACKEND", raising=False)
    monkeypatch.setattr(importlib.util, "find_spec", lambda name: None)
    with pytest.raises(DeviceError) as caught:
        MidiSystem()
    said = str(caught.value)
    assert "\n" not in said
    for word in ("Debian", "python3-rtmidi", "Fedora", "macOS", "Windows", "pip install"):
        assert word in said


def test_rtmidi2_stands_in_where_python_rtmidi_is_missing(monkeypatch):
    monkeypatch.setattr(importlib.util, "find_spec", lambda name: name == "rtmidi2" or None)
    assert midi_system._wrapper() == "rtmidi2"


def test_the_environment_variable_is_honoured(monkeypatch):
    monkeypatch.setenv("MIDO_BACKEND", "no_such_back_end/THERE")
    with pytest.raises(DeviceError, match=r"no_such_back_end/THERE cannot be loaded"):
        MidiSystem()


def test_an_unknown_interface_is_one_line():
    pytest.importorskip("rtmidi")
    with pytest.raises(DeviceError, match="unknown interface CARRIER_PIGEON"):
        MidiSystem("mido.backends.rtmidi/CARRIER_PIGEON")


@pytest.mark.parametrize(
    ("api", "name", "stable"),
    [
        ("LINUX_ALSA", "Keys:Keys MIDI 1 24:0", "Keys:Keys MIDI 1"),
        ("WINDOWS_MM", "Keys 3", "Keys"),
        ("MACOSX_CORE", "Keys 3", "Keys 3"),
        (
            "UNIX_JACK",
            "bridge:Keys [24] (capture): Keys MIDI 1",
            "bridge:Keys (capture): Keys MIDI 1",
        ),
        ("", "Keys 3", "Keys 3"),
    ],
)
def test_the_numbers_that_change_are_no_part_of_a_name(api, name, stable):
    system = MidiSystem.__new__(MidiSystem)
    system.api = api
    assert system.stable_name(name) == stable


class _Asked(mido.ports.BaseInput):
    """A port of a back end that has no callbacks."""

    waiting: list = []  # noqa: RUF012

    def _open(self, **options):
        if options.get("callback"):
            raise ValueError("callbacks are not supported by this back end")

    def _receive(self, block=True):
        return self.waiting.pop(0) if self.waiting else None


class _Calling(mido.ports.BaseInput):
    """A port of a back end that calls back."""

    opened: list = []  # noqa: RUF012

    def _open(self, callback=None, **_):
        self.callback = callback
        self.opened.append(self)


@pytest.fixture
def back_end(monkeypatch):
    """Any other mido back end: a module with Input and get_devices."""
    module = types.ModuleType("some_back_end")
    module.get_devices = lambda **_: [{"name": "Keys", "is_input": True, "is_output": False}]
    monkeypatch.setitem(sys.modules, "some_back_end", module)
    monkeypatch.setenv("MIDO_BACKEND", "some_back_end")
    return module


def test_a_back_end_without_callbacks_is_asked(back_end):
    back_end.Input = _Asked
    system = MidiSystem()
    assert system.input_names() == ["Keys"]
    port = system.open_input("Keys", lambda: 4.5)
    note = mido.Message("note_on", note=60)
    _Asked.waiting[:] = [note, mido.Message("clock")]
    assert port.fetch() == [(4.5, note)]
    assert port.fetch() == []


def test_a_back_end_with_callbacks_is_stamped_as_it_calls(back_end):
    back_end.Input = _Calling
    times = iter([1.0, 2.0])
    port = MidiSystem().open_input("Keys", lambda: next(times))
    notes = [mido.Message("note_on", note=60), mido.Message("note_off", note=60)]
    for note in notes:
        _Calling.opened[-1].callback(note)
    assert port.fetch() == [(1.0, notes[0]), (2.0, notes[1])]


def test_a_virtual_input_is_refused_where_there_are_none(back_end):
    back_end.Input = _Calling
    system = MidiSystem()
    assert not system.has_virtual
    with pytest.raises(DeviceError, match=r"'livelag'.*some_back_end has none"):
        system.open_input("livelag", lambda: 0.0, virtual=True)
