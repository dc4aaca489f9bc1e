"""Captures of a simulated stage, made without livelag: what a generator, a circuit and an
oscilloscope would give.

The circuit is the full one: series resistance, capacitor with insulation and absorption branches,
bias current, offsets, load divider. Its state matrix is taken apart by `numpy.linalg.eig` and
driven by ramps in closed form; `test_capture_maker.py` holds it against
`scipy.integrate.solve_ivp`.
"""

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True)
class Circuit:
    resistance_ohms: float = 236e3
    capacitance_f: float = 330e-9
    absorption: tuple = ()  # (fraction, time in seconds)
    insulation_ohms: float = np.inf
    bias_a: float = 0.0
    offset_in_v: float = 0.0
    offset_out_v: float = 0.0
    divider: float = 1.0

    @property
    def time_constant_s(self):
        return self.resistance_ohms * self.capacitance_f

    @property
    def gain(self):
        return self.divider / (1.0 + self.resistance_ohms / self.insulation_ohms)

    @property
    def offset_v(self):
        pulled = self.offset_in_v - self.bias_a * self.resistance_ohms
        return self.gain * pulled + self.divider * self.offset_out_v

    def matrices(self):
        """dx/dt = A x + b (u + offset_in - bias R), x = (v, w_1, w_2, ..)."""
        count = 1 + len(self.absorption)
        A, b = np.zeros((count, count)), np.zeros(count)
        RC = self.time_constant_s
        A[0, 0] = -1.0 / RC - 1.0 / (self.insulation_ohms * self.capacitance_f)
        b[0] = 1.0 / RC
        for k, (fraction, time_s) in enumerate(self.absorption, start=1):
            A[0, 0] -= fraction / time_s
            A[0, k] = fraction / time_s
            A[k, 0] = 1.0 / time_s
            A[k, k] = -1.0 / time_s
        return A, b


@dataclass(frozen=True)
class Generator:
    """Levels held from each edge on; edges are ramps of `rise_s`."""

    levels_v: tuple = (0.0, 4.0)
    edges_s: tuple = (0.0,)
    rise_s: float = 20e-9

    def corners(self):
        """(times, change of slope) of the piecewise linear voltage."""
        found = []
        for at, low, high in zip(self.edges_s, self.levels_v[:-1], self.levels_v[1:], strict=True):
            slope = (high - low) / self.rise_s
            found += [(at, slope), (at + self.rise_s, -slope)]
        return found

    def volts(self, t):
        total = np.full_like(t, self.levels_v[0])
        for at, slope in self.corners():
            total += slope * np.clip(t - at, 0.0, None)
        return total


def true_output(circuit, generator, t):
    """Output volts at any times, having rested on the first level for ever."""
    A, b = circuit.matrices()
    poles, modes = np.linalg.eig(A)
    drive = np.linalg.solve(modes, b)
    first = generator.levels_v[0] + circuit.offset_in_v - circuit.bias_a * circuit.resistance_ohms
    v = np.full_like(t, -(np.linalg.solve(A, b) * first)[0])
    for at, slope in generator.corners():
        late = np.clip(t - at, 0.0, None)[:, None]
        # x' = s x + g slope t  from rest:  x = g slope ((e^(st) - 1)/s - t)/s
        v = v + slope * ((np.expm1(poles * late) / poles - late) / poles * drive) @ modes[0]
    return circuit.divider * (np.real(v) + circuit.offset_out_v)


@dataclass(frozen=True)
class Scope:
    samples: int = 600
    interval_s: float = 1e-3
    start_s: float = -0.05  # of the first sample, against the generator's time 0
    noise_v: tuple = (0.02, 0.02)
    step_v: tuple = (0.04, 0.04)  # of the converter; 0 is none
    clip_v: tuple = (np.inf, np.inf)  # the highest code
    jitter_s: float = 0.0
    trigger_s: float = 0.0  # what its own zero is away from the generator's
    hum_v: tuple = (0.0, 0.0)
    hum_hz: float = 50.0
    seed: int = 1


def record(circuit, generator, scope):
    """(times as the oscilloscope states them, input volts, output volts)."""
    rng = np.random.default_rng(scope.seed)
    grid = scope.start_s + scope.interval_s * np.arange(scope.samples)
    true = grid + scope.jitter_s * rng.standard_normal(scope.samples)
    channels = [generator.volts(true), true_output(circuit, generator, true)]
    seen = []
    for volts, noise, step, top, hum in zip(
        channels, scope.noise_v, scope.step_v, scope.clip_v, scope.hum_v, strict=True
    ):
        volts = volts + noise * rng.standard_normal(scope.samples)
        volts = volts + hum * np.sin(2 * np.pi * scope.hum_hz * true + 1.0)
        volts = np.round(volts / step) * step if step else volts
        seen.append(np.minimum(volts, top))
    return grid - scope.trigger_s, *seen


def write_capture(
    path, times, *channels, preamble=(), names=("Time", "CH1", "CH2"), units=None, separator=",",
    decimal=".", encoding="utf-8", newline="\n", trailing="", digits=7, with_time=True,
):  # fmt: skip
    """Write a capture as some oscilloscope might."""
    lines = list(preamble)
    if names:
        lines.append(separator.join(names) + trailing)
    if units:
        lines.append(separator.join(units) + trailing)
    columns = ([times] if with_time else []) + list(channels)
    for row in zip(*columns, strict=True):
        cells = [f"{value + 0.0:.{digits}g}".replace(".", decimal) for value in row]
        lines.append(separator.join(cells) + trailing)
    path.write_bytes((newline.join(lines) + newline).encode(encoding))
    return path


# The captures in tests/captures: one built unit of the shipped two-range stage, whose parts are all
# within their tolerances, as four kinds of oscilloscope would export it.
BUILT_POT_OHMS, BUILT_SERIES_OHMS, BUILT_SMALL_F, BUILT_LARGE_F = 512e3, 1.004e3, 318e-9, 4.95e-6
SHIPPED = {
    "fast-0.csv": (0, 0.0, {"units": ("s", "V", "V")}),
    "fast-half.csv": (
        0, 0.5,
        {"preamble": ("Record Length,300", "Comment,simulated puppet theatre glide"),
         "units": ("s", "V", "V")},
    ),
    "fast-1.csv": (0, 1.0, {"separator": ";", "decimal": ","}),
    "slow-1.csv": (1, 1.0, {"separator": "\t", "names": ("Time (s)", "key (V)", "glide (V)")}),
}  # fmt: skip


def write_shipped(folder):
    """Write the captures of tests/captures to a folder: the square of the bench sheet, 1 to 5 V."""
    for seed, (name, (large, rotation, shape)) in enumerate(SHIPPED.items(), start=21):
        capacitance = BUILT_SMALL_F + large * BUILT_LARGE_F
        circuit = Circuit(
            BUILT_SERIES_OHMS + BUILT_POT_OHMS * rotation, capacitance, ((0.00225, 1.0),),
            1e4 / capacitance, bias_a=30e-12, offset_in_v=2e-3, offset_out_v=-3e-3, divider=0.999,
        )  # fmt: skip
        tau = circuit.time_constant_s
        interval = float(f"{tau / 40:.1g}")
        generator = Generator((1.0, 5.0), (0.3 * interval,), rise_s=1e-4 * tau)
        scope = Scope(300, interval, -40 * interval, seed=seed)
        write_capture(folder / name, *record(circuit, generator, scope), digits=5, **shape)
