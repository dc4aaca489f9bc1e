"""The last seconds of key and glide volts, kept by the callback and read by the panel."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

INTERVAL_S = 0.01
LENGTH_S = 8.0


class Strip:
    """A ring of points, one every ten milliseconds; written by one thread, read by another.

    Attributes:
        interval_s: seconds between points.
    """

    interval_s = INTERVAL_S

    def __init__(self, rate_hz: float) -> None:
        self._spacing = max(1, round(INTERVAL_S * rate_hz))
        size = round(LENGTH_S / INTERVAL_S)
        self._points = np.zeros((2, size), np.float32)
        self._place = 0

    def write(self, start: int, key: NDArray[np.float64], glide: NDArray[np.float64]) -> None:
        """Keep the points that fall into a block that begins at frame ``start``."""
        first = -start % self._spacing
        for frame in range(first, len(key), self._spacing):
            self._points[0, self._place] = key[frame]
            self._points[1, self._place] = glide[frame]
            self._place = (self._place + 1) % self._points.shape[1]

    def read(self) -> NDArray[np.float32]:
        """(2, points): key volts and glide volts, oldest first."""
        return np.roll(self._points, -self._place, axis=1)
