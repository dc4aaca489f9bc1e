"""Sound files: WAV and FLAC, streamed block by block; 16 and 24 bit with dither, or float.

Integer samples are rounded after adding triangular dither of two steps' width, peak to peak,
which makes the rounding error independent of the signal (Lipshitz, Wannamaker and Vanderkooy
1992, from memory). The dither comes from a seeded generator, so a render repeats to the bit.
"""

from __future__ import annotations

import errno
import os
from pathlib import Path
from types import TracebackType
from typing import Any

import numpy as np
from numpy.typing import NDArray

from livelag.errors import InputError, UnknownNameError

FORMATS = {".wav": "WAV", ".flac": "FLAC"}
DEPTHS = {"16": "PCM_16", "24": "PCM_24", "float": "FLOAT"}
_LARGEST_WAV_BYTES = 2**32 - 4096  # RIFF sizes have 32 bits; the rest is for the header
_DITHER_SEED = 20


def check_format(path: Path, depth: str, channels: int, rate_hz: int, frames: int) -> None:
    """Refuse what the file cannot hold, before anything is written.

    Raises:
        UnknownNameError: if the suffix or the depth is none of those known.
        InputError: if FLAC is asked for floats, or a WAV would outgrow its 4 GB.
    """
    if path.suffix.lower() not in FORMATS:
        raise UnknownNameError("sound file suffix", path.suffix, FORMATS, where=str(path))
    if depth not in DEPTHS:
        raise UnknownNameError("depth", depth, DEPTHS)
    kind = FORMATS[path.suffix.lower()]
    if kind == "FLAC" and depth == "float":
        raise InputError(f"{path}: FLAC holds 16 or 24 bit; write float to a .wav")
    size = frames * channels * (4 if depth == "float" else int(depth) // 8)
    if kind == "WAV" and size > _LARGEST_WAV_BYTES:
        raise InputError(f"{path}: {size / 1e9:.1f} GB does not fit a WAV file (4 GB); write .flac")


class SoundFileOut:
    """A sound file open for writing; a context manager.

    Raises:
        OSError: if the system will not let it be written.
    """

    def __init__(self, path: Path, rate_hz: int, channels: int, depth: str) -> None:
        import soundfile

        self._path = path
        self._depth = depth
        self._errors: tuple[type[Exception], ...] = (soundfile.LibsndfileError, AssertionError)
        self._dither = np.random.default_rng(_DITHER_SEED)
        try:
            self._file: Any = soundfile.SoundFile(
                path, "w", rate_hz, channels, DEPTHS[depth], format=FORMATS[path.suffix.lower()]
            )
        except soundfile.LibsndfileError as error:
            raise self._failure() from error

    def __enter__(self) -> SoundFileOut:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self.close()

    def close(self) -> None:
        """Finish the file; what has been written until now is whole.

        Raises:
            OSError: if the disk is full or gone.
        """
        try:
            self._file.close()
        except self._errors as failure:
            raise self._failure() from failure
        if self._depth == "float":
            _clear_time_stamp(self._path)

    def write(self, samples: NDArray[np.float64]) -> None:
        """Append a block.

        Args:
            samples: (frames, channels), full scale 1; integers clip beyond it.

        Raises:
            OSError: if the disk is full or gone.
        """
        block = samples.astype(np.float32) if self._depth == "float" else self._integers(samples)
        before = self._file.frames
        try:
            self._file.write(block)
        except self._errors as error:
            raise self._failure() from error
        if self._file.frames - before != len(samples):
            raise self._failure()

    def _failure(self) -> OSError:
        """Why the system will take no more; libsndfile tells no more than that it failed."""
        try:
            with self._path.open("ab") as file:
                file.write(bytes(2**16))
                file.flush()
                os.fsync(file.fileno())
        except OSError as error:
            return OSError(error.errno, error.strerror, str(self._path))
        return OSError(errno.EIO, "the system would not take all of it", str(self._path))

    def _integers(self, samples: NDArray[np.float64]) -> NDArray[Any]:
        bits = int(self._depth)
        full = 2.0 ** (bits - 1)
        uniform = self._dither.random((*samples.shape, 2))
        rounded = np.rint(samples * full + uniform[..., 0] - uniform[..., 1])
        steps = np.clip(rounded, -full, full - 1)
        if bits == 16:
            return steps.astype(np.int16)
        return steps.astype(np.int32) << 8  # libsndfile takes the top 24 of 32 bits


def _clear_time_stamp(path: Path) -> None:
    """Blank the time of day in the PEAK chunk of a float WAV, so that a render repeats.

    The chunk holds its name, its size, a version and the time in seconds, four bytes each.
    """
    with path.open("r+b") as file:
        head = file.read(256)
        at = head.find(b"PEAK")
        if 0 < at < head.find(b"data"):
            file.seek(at + 12)
            file.write(bytes(4))
