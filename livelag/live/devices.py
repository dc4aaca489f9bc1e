"""What can be played through: sound outputs and inputs. MIDI inputs are listed in `ports`."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from livelag.errors import DeviceError, InputError, UnknownNameError
from livelag.live.quiet import stderr_silenced

_INSTALL = (
    "Debian: apt install libportaudio2; Fedora: dnf install portaudio; "
    "macOS and Windows: pip install --force-reinstall sounddevice, whose wheel brings it"
)


@dataclass(frozen=True)
class SoundDevice:
    """A sound device as the system offers it.

    Attributes:
        number: the number to ask for it by; changes when devices come and go.
        name: its name.
        host_api: the driver interface it is reached through.
        outputs: output channels, 0 or more.
        inputs: input channels, 0 or more.
        rate_hz: the sample rate it runs at unless asked otherwise.
        output_latency_s: delay of its output that it reports for quick response, seconds.
        is_default_output: whether it is the one used when none is named.
        is_default_input: the same for input.
    """

    number: int
    name: str
    host_api: str
    outputs: int
    inputs: int
    rate_hz: float
    output_latency_s: float
    is_default_output: bool
    is_default_input: bool

    @property
    def label(self) -> str:
        """Name and driver interface, which together tell apart the same device listed twice."""
        return f"{self.name}, {self.host_api}"


def sound_library() -> Any:
    """The `sounddevice` module, imported when first needed and without its probing on the screen.

    Raises:
        DeviceError: if PortAudio is missing or does not start, saying what to install.
    """
    try:
        with stderr_silenced():
            import sounddevice
    except ImportError as error:
        raise DeviceError(f"sounddevice is not installed ({error}); {_INSTALL}") from error
    except OSError as error:
        raise DeviceError(f"no sound: {_one_line(error)}; {_INSTALL}") from error
    except Exception as error:  # PortAudioError, which cannot be named before the import
        raise DeviceError(f"no sound: {_one_line(error)}") from error
    return sounddevice


def list_sound_devices() -> tuple[SoundDevice, ...]:
    """Every sound device there is, in the system's order.

    Raises:
        DeviceError: if PortAudio is missing, saying what to install.
    """
    library = sound_library()
    try:
        with stderr_silenced():
            hosts = library.query_hostapis()
            found = library.query_devices()
    except library.PortAudioError as error:
        raise DeviceError(f"sound devices cannot be listed: {_one_line(error)}") from error
    # `default.device` is -1 where there is none; a host's own default is not the system's.
    default_input, default_output = library.default.device
    if default_output < 0 and hosts:
        default_input = hosts[0]["default_input_device"]
        default_output = hosts[0]["default_output_device"]
    return tuple(
        SoundDevice(
            number=number,
            name=entry["name"],
            host_api=hosts[entry["hostapi"]]["name"],
            outputs=entry["max_output_channels"],
            inputs=entry["max_input_channels"],
            rate_hz=float(entry["default_samplerate"]),
            output_latency_s=float(entry["default_low_output_latency"]),
            is_default_output=number == default_output,
            is_default_input=number == default_input,
        )
        for number, entry in enumerate(found)
    )


def find_output(wanted: str | int | None = None) -> SoundDevice:
    """The sound output meant by a name or a number.

    A name is compared without regard to case: the whole `label` or name first, then any part of
    the label. Where the same name is listed under several driver interfaces the system's default
    one is taken.

    Args:
        wanted: a number, a name or part of one; None for the system's default.

    Raises:
        DeviceError: if PortAudio is missing or there is no output at all.
        InputError: if the name fits several devices, naming them.
        UnknownNameError: if it fits none, listing what exists.
    """
    return _find(wanted, "output", [d for d in list_sound_devices() if d.outputs > 0])


def find_input(wanted: str | int | None = None) -> SoundDevice:
    """The sound input meant by a name or a number; as `find_output`."""
    return _find(wanted, "input", [d for d in list_sound_devices() if d.inputs > 0])


def _find(wanted: str | int | None, kind: str, devices: list[SoundDevice]) -> SoundDevice:
    if not devices:
        raise DeviceError(f"there is no sound {kind} device; is one plugged in and not in use?")
    if wanted is None:
        return _preferred(devices, kind) or devices[0]
    asked = str(wanted).strip().casefold()
    if asked.isdecimal():
        found = [d for d in devices if d.number == int(asked)]
    else:
        found = [d for d in devices if asked in (d.label.casefold(), d.name.casefold())]
        found = found or [d for d in devices if asked and asked in d.label.casefold()]
    if not found:
        known = [f"{d.number} {d.label}" for d in devices]
        raise UnknownNameError(f"sound {kind}", wanted, known)
    if len(found) == 1:
        return found[0]
    main = _preferred(devices, kind)
    if len({d.name for d in found}) == 1 and main is not None:
        at_home = [d for d in found if d.host_api == main.host_api]
        if len(at_home) == 1:
            return at_home[0]
    fits = ", ".join(f"{d.number} {d.label}" for d in found)
    raise InputError(f"sound {kind} {wanted!r} fits several: {fits}; give more of it or a number")


def _preferred(devices: list[SoundDevice], kind: str) -> SoundDevice | None:
    flag = "is_default_output" if kind == "output" else "is_default_input"
    return next((device for device in devices if getattr(device, flag)), None)


def _one_line(error: BaseException) -> str:
    return " ".join(str(error).split()).rstrip(".") or type(error).__name__
