"""The pitch curve of a rendering: sampled on the way, written as CSV or kept for a picture."""

from __future__ import annotations

from pathlib import Path
from types import TracebackType

import numpy as np
from numpy.typing import NDArray

from livelag.circuit.stage import Scale
from livelag.errors import UnknownNameError
from livelag.units import volts_to_hz

Samples = NDArray[np.float64]

CSV_HEADER = "time_s,key_volts,glide_volts,pitch_hz\n"
CSV_SUFFIX = ".csv"


def check_curve(path: Path) -> None:
    """Refuse a pitch curve whose suffix is not that of its format.

    Raises:
        UnknownNameError: naming the suffix that exists.
    """
    if path.suffix.lower() != CSV_SUFFIX:
        raise UnknownNameError("pitch curve suffix", path.suffix, [CSV_SUFFIX], where=str(path))


class _Sampler:
    """Picks the frames nearest to so many moments a second, across blocks."""

    def __init__(self, rate_hz: int, per_second: float) -> None:
        self._spacing = rate_hz / per_second
        self._start = 0
        self._next = 0

    def pick(self, count: int) -> NDArray[np.intp]:
        """Places in the next block of ``count`` frames, and step past it."""
        end = self._start + count
        last = int(np.ceil((end + 0.5) / self._spacing))
        frames = np.rint(np.arange(self._next, last + 1) * self._spacing).astype(np.intp)
        inside = frames[frames < end]
        self._next += len(inside)
        picked: NDArray[np.intp] = inside - self._start
        self._start = end
        return picked


class CurveCsv:
    """Writes the curve as CSV: time_s, key_volts, glide_volts, pitch_hz. A context manager.

    A row stands at the frame nearest to its moment and says that frame's own time.

    Raises:
        OSError: if the file cannot be written.
    """

    def __init__(self, path: Path, rate_hz: int, rows_per_second: float, scale: Scale) -> None:
        self._sampler = _Sampler(rate_hz, rows_per_second)
        self._rate_hz = rate_hz
        self._scale = scale
        self._start = 0
        self._path = path
        self._file = path.open("w", encoding="ascii", newline="")
        self._file.write(CSV_HEADER)

    def __enter__(self) -> CurveCsv:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        try:
            self._file.close()
        except OSError as failure:
            raise self._failure(failure) from failure

    def _failure(self, error: OSError) -> OSError:
        """The same failure with the file's name, which a failed write does not tell."""
        return OSError(error.errno, error.strerror, str(self._path))

    def write(self, audio: Samples, key_volts: Samples, glide_volts: Samples) -> None:
        """Take the next block.

        Raises:
            OSError: if the disk is full or gone.
        """
        picked = self._sampler.pick(len(key_volts))
        glide = glide_volts[picked]
        pitch = volts_to_hz(glide, self._scale.zero_volt_note, self._scale.volts_per_octave)
        times = (self._start + picked) / self._rate_hz
        rows = zip(
            times.tolist(), key_volts[picked].tolist(), glide.tolist(), pitch.tolist(), strict=True
        )
        try:
            self._file.writelines(map("%.9f,%.12g,%.12g,%.9g\n".__mod__, rows))
        except OSError as error:
            raise self._failure(error) from error
        self._start += len(key_volts)


class CurveForPicture:
    """Keeps about as many points of the curve as a picture can show, however long it is."""

    POINTS = 24_000

    def __init__(self, rate_hz: int, frames: int) -> None:
        seconds = frames / rate_hz
        self._sampler = _Sampler(rate_hz, min(float(rate_hz), self.POINTS / seconds))
        self._rate_hz = rate_hz
        self._start = 0
        self._parts: list[tuple[Samples, Samples, Samples]] = []

    def write(self, audio: Samples, key_volts: Samples, glide_volts: Samples) -> None:
        """Take the next block."""
        picked = self._sampler.pick(len(key_volts))
        times = (self._start + picked) / self._rate_hz
        self._parts.append((times, key_volts[picked], glide_volts[picked]))
        self._start += len(key_volts)

    @property
    def curve(self) -> tuple[Samples, Samples, Samples]:
        """Times in seconds, key volts, glide volts, each (points,)."""
        times, key, glide = zip(*self._parts, strict=True)
        return np.concatenate(times), np.concatenate(key), np.concatenate(glide)
