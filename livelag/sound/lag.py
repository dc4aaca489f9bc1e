"""The glide stage in discrete time: its modes as first-order filters, block by block.

Per mode with pole s, driven by g u, over a step T (frame n at time n T):

    exact     z[n+1] = e^(sT) z[n] + (e^(sT) - 1)/s g u[n]                              (1)
    bilinear  z[n+1] = ((1 + sT/2) z[n] + T/2 g (u[n] + u[n+1])) / (1 - sT/2)           (2)
    ramp      z[n+1] = e^(sT) z[n] + g (F0 u[n+1] + F1 u[n])                            (3)
              F0 = T (e^x - 1 - x)/x^2,  F1 = T (x e^x - e^x + 1)/x^2,  x = sT

(1) is exact for a source held over each step, as notes are; (3) for one that runs straight
between samples, as a digitised voltage does (first-order hold); (2) is Tustin's method.
All three are one recursion, y[n] = d[n] + b0 u[n], d[n+1] = b1 u[n] + p y[n], which
`scipy.signal.lfilter` runs (transposed direct form II) for any source. While the source is held
its solution is a decay toward the settled mode y_inf = -g u/s, which all three share:

    y[n] = y_inf + (y[0] - y_inf) p^n                                                   (4)

and `Lag.hold` takes p^n from two short tables, as p^(64 j) p^i, at a tenth of the recursion's
time.

State. Between blocks the lag holds, per mode, what frame n + 1 starts from before its source is
known: z[n+1] for exact, (1 + sT/2) z[n] + T/2 g u[n] for bilinear, e^(sT) z[n] + F1 g u[n] for
ramp. In volts (`Lag.state_v`) that is one voltage per capacitor and absorption branch. It stays
modal while the controls rest, so that the samples do not depend on the block sizes, and goes
through volts whenever they move, since a moving pot changes the modes but not the charges.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.signal import lfilter

from livelag.circuit.network import LinearNetwork, Vector
from livelag.circuit.stage import GlideStage, Setting
from livelag.errors import UnknownNameError

METHODS = ("exact", "bilinear", "ramp")
_CACHED_SETTINGS = 4096  # a kilobyte each
_NOTHING_V = 1e-18  # what is left of a decay when it changes no sample any more
_SHORT = 64
_LONG = 512
_ROW = _SHORT**2  # frames between powers taken anew, from the start of a run, never of a block


@dataclass(frozen=True, slots=True)
class _Filters:
    """One setting's modes as filters; arrays are (driven,) unless said.

    Attributes:
        network: the modes they come from.
        poles: p of equations 1 to 4.
        b0: weight of the source at the same frame.
        b1: weight of the source at the frame before.
        state_scale: d per unit of the documented state.
        settled: y_inf per volt of source.
        readout: what each mode adds to the bus.
        bus_per_volt: the settled bus per volt of source.
        powers: (driven, 1, _SHORT) p^0 to p^(_SHORT - 1).
        leaps: (driven, _SHORT, 1) p^0, p^_SHORT and so on below p^_ROW.
        silent_poles: (silent,) poles in 1/s that only leak.
    """

    network: LinearNetwork
    poles: Vector
    b0: Vector
    b1: Vector
    state_scale: Vector
    settled: Vector
    readout: Vector
    bus_per_volt: float
    powers: NDArray[np.float64]
    leaps: NDArray[np.float64]
    silent_poles: Vector


@dataclass(slots=True)
class _Run:
    """A held key, from the frame it began at.

    Attributes:
        key_volts: the key.
        source: what it is worth as a source.
        deviation: (driven,) y[0] - y_inf of equation 4.
        settled_bus: the bus once all has settled.
        decays: per mode that the bus shows, its number, its weight there at frame 0, and p.
        frames: how long it has been held.
        rows: (driven, _ROW) powers of p, once a long stretch has asked for them.
    """

    key_volts: float
    source: float
    deviation: Vector
    settled_bus: float
    decays: tuple[tuple[int, float, float], ...]
    frames: int = 0
    rows: NDArray[np.float64] | None = None


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


def _powers(bases: Vector) -> NDArray[np.float64]:
    """(driven, _SHORT) powers of each base, from the 0th."""
    powers = np.repeat(bases[:, np.newaxis], _SHORT, axis=1)
    powers[:, 0] = 1.0
    return np.multiply.accumulate(powers, axis=1, out=powers)


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
        self._source = float(self.stage.source_volts(key_volts, self.setting))
        self._enter(self.stage.settled_state(key_volts, self.setting))
        # At rest y = y_inf, so the state that waits for the next source is y_inf - b0 u.
        self._delay = self._filters.settled * self._source - self._filters.b0 * self._source

    def foresee(self, settings: Iterable[Setting]) -> None:
        """Work out settings ahead of time, so that a move to one of them costs less."""
        for setting in settings:
            self._filters_at(setting)

    def _filters_at(self, setting: Setting) -> _Filters:
        found = self._cache.get(setting)
        if found is None:
            if len(self._cache) >= _CACHED_SETTINGS:
                del self._cache[next(iter(self._cache))]
            found = self._cache[setting] = self._make_filters(self.stage.network(setting))
        return found

    def _make_filters(self, network: LinearNetwork) -> _Filters:
        n = network.driven_count
        poles, drive = network.poles[:n], network.drive[:n]
        p, b0, b1, scale = _coefficients(self.method, poles, self._step_s)
        powers = _powers(p)
        leaps = _powers(powers[:, -1] * p)
        settled = -drive / poles
        return _Filters(
            network=network,
            poles=p,
            b0=b0 * drive,
            b1=b1 * drive,
            state_scale=scale,
            settled=settled,
            readout=network.readout[:n],
            bus_per_volt=float(network.readout[:n] @ settled) + network.feedthrough,
            powers=powers[:, np.newaxis, :],
            leaps=leaps[:, :, np.newaxis],
            silent_poles=network.poles[n:],
        )

    def _enter(self, state_v: Vector) -> None:
        """Take up a state in volts at the present setting."""
        network = self._filters.network
        modes = network.to_modes @ state_v
        self._delay = modes[: network.driven_count] * self._filters.state_scale
        self._silent = modes[network.driven_count :]
        self._frames_since = 0
        self._run: _Run | None = None

    def _end_run(self) -> None:
        """Bring the recursion up to where the held key has taken it."""
        run, filters = self._run, self._filters
        if run is not None:
            y = filters.settled * run.source + run.deviation * filters.poles**run.frames  # eq. 4
            self._delay = y - filters.b0 * run.source
            self._run = None

    @property
    def state_v(self) -> Vector:
        """(states,) volts that the next frame starts from; see the module's text."""
        self._end_run()
        network = self._filters.network
        # Silent modes decay from the last move in one go, so that block sizes cannot matter.
        elapsed = self._frames_since * self._step_s
        silent = self._silent * np.exp(self._filters.silent_poles * elapsed)
        modes = np.concatenate((self._delay / self._filters.state_scale, silent))
        return network.to_volts @ modes + network.source_to_volts * self._source

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

    def hold(self, key_volts: float, frames: int) -> NDArray[np.float64]:
        """Run the stage with a key held, by equation 4.

        Args:
            key_volts: the key, in volts.
            frames: how many, 1 or more.

        Returns:
            (frames,) glide volts at the load.
        """
        run = self._run
        if run is None or run.key_volts != key_volts:
            run = self._begin_run(key_volts)
        bus = np.full(frames, run.settled_bus)
        done = 0
        while done < frames:
            row, start = divmod(run.frames + done, _ROW)
            count = min(_ROW - start, frames - done)
            part = bus[done : done + count]
            weights = [(mode, weight * pole ** (row * _ROW)) for mode, weight, pole in run.decays]
            weights = [(mode, weight) for mode, weight in weights if abs(weight) > _NOTHING_V]
            if weights:
                powers = self._powers_of(run, start, count)
                for mode, weight in weights:
                    part += weight * powers[mode]
            done += count
        run.frames += frames
        self._frames_since += frames
        return self.stage.output_volts(bus)

    def _powers_of(self, run: _Run, start: int, count: int) -> NDArray[np.float64]:
        """(driven, count) p^start and on; a long stretch pays for a whole row, a short one not."""
        leaps, powers = self._filters.leaps, self._filters.powers
        if count >= _LONG:
            if run.rows is None:
                run.rows = (leaps * powers).reshape(len(leaps), _ROW)
            return run.rows[:, start : start + count]
        first, last = start // _SHORT, (start + count - 1) // _SHORT + 1
        begin = start - first * _SHORT
        stretch: NDArray[np.float64] = leaps[:, first:last] * powers
        return stretch.reshape(len(leaps), -1)[:, begin : begin + count]

    def _begin_run(self, key_volts: float) -> _Run:
        self._end_run()
        filters = self._filters
        source = self._source = float(self.stage.source_volts(key_volts, self.setting))
        deviation = self._delay + filters.b0 * source - filters.settled * source
        weights = (filters.readout * deviation).tolist()
        decays = tuple(
            (mode, weight, pole)
            for mode, (weight, pole) in enumerate(zip(weights, filters.poles.tolist(), strict=True))
            if weight
        )
        self._run = _Run(key_volts, source, deviation, filters.bus_per_volt * source, decays)
        return self._run

    def process(self, key_volts: NDArray[np.float64]) -> NDArray[np.float64]:
        """Run the stage over any source, by recursion.

        Args:
            key_volts: (frames,) volts; frame n holds until frame n + 1 (exact), is the end of a
                ramp (ramp), or a sample (bilinear).

        Returns:
            (frames,) glide volts at the load.
        """
        if len(key_volts) == 0:
            return np.zeros(0)
        self._end_run()
        source = self.stage.source_volts(key_volts, self.setting)
        filters = self._filters
        network = filters.network
        bus: NDArray[np.float64] = network.feedthrough * source
        for mode in range(network.driven_count):
            z, end = lfilter(
                (filters.b0[mode], filters.b1[mode]),
                (1.0, -filters.poles[mode]),
                source,
                zi=self._delay[mode : mode + 1],
            )
            self._delay[mode] = end[0]
            bus += network.readout[mode] * z
        self._source = float(source[-1])
        self._frames_since += len(key_volts)
        return self.stage.output_volts(bus)
