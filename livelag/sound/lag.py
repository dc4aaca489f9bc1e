"""The glide stage in discrete time: its modes as first-order filters, block by block.

Per mode with pole s, driven by g u, over a step T (frame n at time n T):

    exact     z[n+1] = e^(sT) z[n] + (e^(sT) - 1)/s g u[n]                              (1)
    bilinear  z[n+1] = ((1 + sT/2) z[n] + T/2 g (u[n] + u[n+1])) / (1 - sT/2)           (2)
    ramp      z[n+1] = e^(sT) z[n] + g (F0 u[n+1] + F1 u[n])                            (3)
              F0 = T (e^x - 1 - x)/x^2,  F1 = T (x e^x - e^x + 1)/x^2,  x = sT

(1) is exact for a source held over each step, as notes are; (3) for one that runs straight
between samples, as a digitised voltage does (first-order hold); (2) is Tustin's method.
All three are one recursion, y[n] = d[n] + b0 u[n], d[n+1] = b1 u[n] + p y[n], which
`scipy.signal.lfilter` runs (transposed direct form II).

State. Between blocks the lag holds, per mode, what frame n + 1 starts from before its source is
known: z[n+1] for exact, (1 + sT/2) z[n] + T/2 g u[n] for bilinear, e^(sT) z[n] + F1 g u[n] for
ramp. In volts (`Lag.state_v`) that is one voltage per capacitor and absorption branch. It stays
modal while the controls rest, so that the samples do not depend on the block sizes, and goes
through volts whenever they move, since a moving pot changes the modes but not the charges.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.signal import lfilter

from livelag.circuit.network import LinearNetwork, Vector
from livelag.circuit.stage import GlideStage, Setting
from livelag.errors import UnknownNameError

METHODS = ("exact", "bilinear", "ramp")
_CACHED_SETTINGS = 512  # a controller's 128 positions in four ranges


@dataclass(frozen=True, slots=True)
class _Filters:
    """One setting's modes as filters.

    Attributes:
        network: the modes they come from.
        forward: per driven mode, (b0, b1).
        backward: per driven mode, (1, -p).
        state_scale: (driven,) d[n+1] per unit of the documented state.
        silent_poles: (silent,) poles that only leak.
    """

    network: LinearNetwork
    forward: tuple[Vector, ...]
    backward: tuple[Vector, ...]
    state_scale: Vector
    silent_poles: Vector


def _coefficients(
    method: str, poles: Vector, step_s: float
) -> tuple[Vector, Vector, Vector, Vector]:
    """Per mode: p, and b0, b1 per unit of g, and the scale of the state; equations 1 to 3."""
    x = poles * step_s
    if method == "bilinear":
        scale = 1.0 / (1.0 - x / 2.0)
        b = step_s / 2.0 * scale
        p = (1.0 + x / 2.0) * scale
        return p, b, b, scale
    p = np.exp(x)
    held = np.expm1(x) / poles
    if method == "exact":
        return p, np.zeros_like(p), held, np.ones_like(p)
    # Below 1e-3 the closed form cancels; its series is exact there to the last bits.
    small = np.abs(x) < 1e-3
    safe = np.where(small, -1.0, x)
    f0 = step_s * np.where(small, 0.5 + x / 6 + x**2 / 24, (np.expm1(safe) - safe) / safe**2)
    return p, f0, held - f0, np.ones_like(p)


class Lag:
    """The stage as a filter from key volts to glide volts.

    Attributes:
        stage: the stage it models.
        method: ``exact``, ``bilinear`` or ``ramp``.
        setting: where the controls stand from the next frame on.

    Raises:
        UnknownNameError: if there is no such method.
    """

    def __init__(
        self,
        stage: GlideStage,
        sample_rate_hz: float,
        method: str = "exact",
        setting: Setting | None = None,
        key_volts: float = 0.0,
    ) -> None:
        if method not in METHODS:
            raise UnknownNameError("method", method, METHODS)
        self.stage = stage
        self.method = method
        self.setting = setting or Setting()
        self._step_s = 1.0 / sample_rate_hz
        self._cache: dict[Setting, _Filters] = {}
        self.reset(key_volts)

    def reset(self, key_volts: float = 0.0) -> None:
        """Rest on a key: every capacitor, parked ones too, holds what it settles at."""
        self._filters = self._filters_at(self.setting)
        self._last_source = float(self.stage.source_volts(key_volts, self.setting))
        self._enter(self.stage.settled_state(key_volts, self.setting))
        if self.method != "exact":
            self._modes = self._half_step(self._modes)

    def _half_step(self, settled: Vector) -> Vector:
        """The documented state of a method that waits for the next source, from settled modes."""
        network = self._filters.network
        n = network.driven_count
        waiting = settled.copy()
        for mode in range(n):
            b0 = self._filters.forward[mode][0]
            # y = d + b0 u at rest, so d = y - b0 u.
            d = settled[mode] - b0 * self._last_source
            waiting[mode] = d / self._filters.state_scale[mode]
        return waiting

    def _filters_at(self, setting: Setting) -> _Filters:
        found = self._cache.get(setting)
        if found is None:
            network = self.stage.network(setting)
            n = network.driven_count
            p, b0, b1, scale = _coefficients(self.method, network.poles[:n], self._step_s)
            g = network.drive[:n]
            found = _Filters(
                network,
                tuple(np.array(pair) for pair in zip(b0 * g, b1 * g, strict=True)),
                tuple(np.array((1.0, -pole)) for pole in p),
                scale,
                network.poles[n:],
            )
            if len(self._cache) >= _CACHED_SETTINGS:
                del self._cache[next(iter(self._cache))]
            self._cache[setting] = found
        return found

    def _enter(self, state_v: Vector) -> None:
        """Take up a state in volts at the present setting."""
        self._modes = self._filters.network.to_modes @ state_v
        self._frames_since = 0

    @property
    def state_v(self) -> Vector:
        """(states,) volts that the next frame starts from; see the module's text."""
        network = self._filters.network
        modes = self._modes.copy()
        # Silent modes decay from the last move in one go, so that block sizes cannot matter.
        elapsed = self._frames_since * self._step_s
        modes[network.driven_count :] *= np.exp(self._filters.silent_poles * elapsed)
        return network.to_volts @ modes + network.source_to_volts * self._last_source

    def move(self, setting: Setting) -> None:
        """Set pot, range and bypass from the next frame on; charge is shared as the switch closes.

        Args:
            setting: the new setting, with a range that the stage has.
        """
        if setting == self.setting:
            return
        state = self.state_v
        if setting.range_index != self.setting.range_index:
            state = self.stage.wiring.share_charge(state, setting.range_index)
        self.setting = setting
        self._filters = self._filters_at(setting)
        self._enter(state)

    def jump(self, key_volts: float) -> None:
        """Force the connected capacitors to where a key would settle; the rest keeps its charge."""
        bus = self._filters.network.gain * self.stage.source_volts(key_volts, self.setting)
        state = self.stage.wiring.jump(self.state_v, self.setting.range_index, float(bus))
        self._enter(state)

    def process(self, key_volts: NDArray[np.float64]) -> NDArray[np.float64]:
        """Run the stage over a block.

        Args:
            key_volts: (frames,) volts; frame n holds until frame n + 1 (exact), is the end of a
                ramp (ramp), or a sample (bilinear).

        Returns:
            (frames,) glide volts at the load.
        """
        if len(key_volts) == 0:
            return np.zeros(0)
        source = self.stage.source_volts(key_volts, self.setting)
        filters = self._filters
        network = filters.network
        bus: NDArray[np.float64] = (
            source if network.feedthrough else np.zeros(len(key_volts), np.float64)
        )
        for mode in range(network.driven_count):
            scale = filters.state_scale[mode]
            zi = np.array((self._modes[mode] * scale,))
            z, zf = lfilter(filters.forward[mode], filters.backward[mode], source, zi=zi)
            self._modes[mode] = zf[0] / scale
            weight = network.readout[mode]
            if weight:
                z *= weight
                bus += z
        self._last_source = float(source[-1])
        self._frames_since += len(key_volts)
        return self.stage.output_volts(bus)
