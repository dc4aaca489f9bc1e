"""What a DC-coupled output really gives: two meter readings, kept for the next audition."""

from __future__ import annotations

import os
import sys
import tomllib
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from livelag.circuit.table import Table
from livelag.errors import FileError, InputError
from livelag.files import WholeFiles
from livelag.live.volts import check_full_scale

TEST_LEVEL = 0.5  # of full scale: 5 V on an interface of 10 V
RAMP_S = 0.5
_SMALLEST_STEP_V = 0.05


@dataclass(frozen=True, slots=True)
class Calibration:
    """An output channel, measured.

    Attributes:
        full_scale_v: volts per full scale, 0.1 to 100.
        zero_v: volts at digital zero.
    """

    full_scale_v: float
    zero_v: float


def calibration_file() -> Path:
    """Where calibrations are kept: the user's configuration folder."""
    if sys.platform == "win32":
        base = Path(os.environ.get("APPDATA", str(Path.home())))
    else:
        base = Path(os.environ.get("XDG_CONFIG_HOME", str(Path.home() / ".config")))
    return base / "livelag" / "calibration.toml"


def from_readings(zero_v: float, test_v: float) -> Calibration:
    """Calibration from what a meter shows at digital zero and at half of full scale.

    Raises:
        InputError: if the readings do not differ, or mean a full scale that cannot be.
    """
    if not abs(test_v - zero_v) >= _SMALLEST_STEP_V:
        raise InputError(
            f"readings {zero_v:g} V and {test_v:g} V hardly differ; the channel may be AC-coupled, "
            "muted, or another one"
        )
    full_scale_v = (test_v - zero_v) / TEST_LEVEL
    if full_scale_v < 0:
        raise InputError(
            f"readings {zero_v:g} V and {test_v:g} V fall; swap the meter's leads, or the output "
            "inverts and will not do"
        )
    return Calibration(check_full_scale(full_scale_v), zero_v)


def load_calibration(device: str, channel: int, file: Path | None = None) -> Calibration | None:
    """Calibration of a channel (from 1) of a device, if there is one.

    Raises:
        InputError: if the file is not what `save_calibration` writes.
        FileError: if it cannot be read.
    """
    path = file or calibration_file()
    entries = _read(path)
    entry = entries.get(_key(device, channel))
    if entry is None:
        return None
    table = Table(entry, str(path), _key(device, channel))
    full_scale_v = table.number("full_scale_v", "", required=True)
    zero_v = table.number("zero_v", "", required=True)
    table.finish()
    return Calibration(check_full_scale(full_scale_v), zero_v)


def save_calibration(
    device: str, channel: int, found: Calibration, file: Path | None = None
) -> Path:
    """Keep a calibration beside the others and return the file.

    Raises:
        FileError: if it cannot be written.
        InputError: if the file is there already and is not one of calibrations.
    """
    import tomli_w

    path = file or calibration_file()
    entries = _read(path)
    entries[_key(device, channel)] = {"full_scale_v": found.full_scale_v, "zero_v": found.zero_v}
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise FileError(f"{path.parent}: cannot be made: {error.strerror}") from error
    with WholeFiles() as files:
        files.temporary(path).write_text(tomli_w.dumps(entries), encoding="utf-8")
    return path


def _key(device: str, channel: int) -> str:
    return f"{device}, channel {channel}"


def _read(path: Path) -> dict[str, dict[str, Any]]:
    try:
        text = path.read_text(encoding="utf-8")
    except FileNotFoundError:
        return {}
    except (OSError, UnicodeDecodeError) as error:
        raise FileError(f"{path}: cannot be read: {error}") from error
    try:
        entries = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise InputError(f"{path}: not TOML: {' '.join(str(error).split())}") from error
    for name, entry in entries.items():
        if not isinstance(entry, dict):
            raise InputError(f"{path}: {name} is {entry!r}; it must be a table")
    return entries


class SteadyVolts:
    """Gives a channel a steady level, reached and left by a ramp; the callback's body."""

    def __init__(self, channel: int, rate_hz: float) -> None:
        self.target = 0.0
        self._level = 0.0
        self._channel = channel
        self._step = 1.0 / (RAMP_S * rate_hz)

    def fill(self, out: np.ndarray[Any, np.dtype[np.float32]]) -> None:
        """Fill (frames, channels)."""
        frames = len(out)
        way = self.target - self._level
        reach = self._step * np.arange(1, frames + 1)
        ramp = self._level + np.sign(way) * np.minimum(reach, abs(way))
        out[:] = 0.0
        out[:, self._channel] = ramp
        self._level = float(ramp[-1])


def measure(
    steady: SteadyVolts, ask: Callable[[str], str], settle: Callable[[float], None]
) -> Calibration:
    """Ask for both readings while the channel gives the volts, and leave it at zero.

    Raises:
        InputError: if an answer is not a number of volts, or the readings make no sense.
    """
    readings = []
    try:
        for target, words in ((0.0, "digital zero"), (TEST_LEVEL, "half of full scale")):
            steady.target = target
            settle(RAMP_S + 0.3)
            answer = ask(f"The channel is at {words}. Meter reading in volts: ").strip()
            try:
                readings.append(float(answer.removesuffix("V").strip()))
            except ValueError:
                raise InputError(
                    f"reading {answer!r} is not a number of volts such as 0.003 or 4.97"
                ) from None
    finally:
        steady.target = 0.0
        settle(RAMP_S)
    return from_readings(*readings)
