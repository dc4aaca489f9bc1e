"""Control voltages through a DC-coupled interface: glide volts out, an outside voltage in.

An AC-coupled output or input will not do: it lets the voltage sag within a second.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from livelag.errors import InputError

LOWEST_FULL_SCALE_V, HIGHEST_FULL_SCALE_V = 0.1, 100.0
AC_WARNING = "volts need a DC-coupled channel; on an AC-coupled one they sag: it will not do"


def check_full_scale(full_scale_v: float) -> float:
    """Return a full scale if it can be one.

    Raises:
        InputError: if it is outside 0.1 to 100 V.
    """
    if not LOWEST_FULL_SCALE_V <= full_scale_v <= HIGHEST_FULL_SCALE_V:
        raise InputError(
            f"full scale is {full_scale_v:g} V; it must be "
            f"{LOWEST_FULL_SCALE_V:g} to {HIGHEST_FULL_SCALE_V:g} V"
        )
    return full_scale_v


@dataclass
class VoltsOut:
    """Sends volts to an output channel: muted at first, faded in with the sound, clamped.

    Attributes:
        channel: output channel, from 0.
        full_scale_v: volts at full scale, 0.1 to 100.
        zero_v: volts measured at digital zero.
        clamped_frames: frames whose volts were beyond full scale.

    Raises:
        InputError: if the full scale is out of bounds.
    """

    channel: int
    full_scale_v: float
    zero_v: float = 0.0
    clamped_frames: int = 0

    def __post_init__(self) -> None:
        check_full_scale(self.full_scale_v)

    def write(
        self,
        out: NDArray[np.float32],
        volts: NDArray[np.float64],
        ramp: NDArray[np.float64] | None,
    ) -> None:
        """Write a block into (frames, channels), times a ramp if the sound is being faded."""
        scaled = (volts - self.zero_v) / self.full_scale_v
        beyond = np.abs(scaled) > 1.0
        if beyond.any():
            self.clamped_frames += int(np.count_nonzero(beyond))
            np.clip(scaled, -1.0, 1.0, out=scaled)
        out[:, self.channel] = scaled if ramp is None else scaled * ramp


@dataclass(frozen=True)
class VoltsIn:
    """Reads volts from an input channel.

    Attributes:
        channel: input channel, from 0.
        full_scale_v: volts at full scale, 0.1 to 100.

    Raises:
        InputError: if the full scale is out of bounds.
    """

    channel: int
    full_scale_v: float

    def __post_init__(self) -> None:
        check_full_scale(self.full_scale_v)

    def read(self, inputs: NDArray[np.float32]) -> NDArray[np.float64]:
        """(frames,) volts of a block of (frames, channels)."""
        return inputs[:, self.channel].astype(np.float64) * self.full_scale_v
