"""The oscillator against published series, a closed form and general libraries.

`python -m pytest tests/outside/test_oscillator_outside.py -s -k "alias or droop"` prints what is
measured: the worst alias by rate and waveform, and the droop at the top of the band.
"""

import math

import numpy as np
import pytest
from scipy import fft, integrate, signal, special

from livelag.sound import edges
from livelag.sound.oscillator import Oscillator
from livelag.units import note_to_hz

FRAMES = 2**16


def odd_cycles(pitch_hz, rate_hz):
    """An odd number of cycles in FRAMES, so that no alias meets a harmonic's bin."""
    return 2 * round((pitch_hz * FRAMES / rate_hz - 1) / 2) + 1


def spectrum(waveform, width, rate_hz, cycles):
    """Amplitudes of a steady tone, bin by bin; harmonic k is bin k x cycles."""
    oscillator = Oscillator(waveform, width)
    onset = 2 * edges.TAPS
    oscillator.prepare(rate_hz, FRAMES + onset)
    output = oscillator.process(np.full(FRAMES + onset, cycles * rate_hz / FRAMES))
    return np.abs(fft.rfft(output[onset:])) / (FRAMES / 2)


def worst_alias_db(waveform, width, rate_hz, note):
    cycles = odd_cycles(note_to_hz(note), rate_hz)
    amplitude = spectrum(waveform, width, rate_hz, cycles)
    fundamental = amplitude[cycles]
    amplitude[::cycles] = 0.0
    return 20 * np.log10(amplitude[: int(20000 * FRAMES / rate_hz) + 1].max() / fundamental)


@pytest.mark.parametrize("rate_hz", [44100.0, 48000.0, 96000.0])
@pytest.mark.parametrize(
    ("waveform", "width"),
    [("saw", 0.5), ("pulse", 0.5), ("pulse", 0.02), ("triangle", 0.5), ("sine", 0.5)],
)
def test_worst_alias_of_the_keyboard(waveform, width, rate_hz):
    # Discrete Fourier transform over whole cycles (scipy.fft); notes 21 to 108, ISO 16.
    worst, note = max((worst_alias_db(waveform, width, rate_hz, n), n) for n in range(21, 109))
    print(f"{waveform:9}{width:5} {rate_hz:7.0f} Hz  worst alias {worst:7.1f} dB at note {note}")
    assert worst <= -110.0


def test_a_bare_waveform_would_alias():
    # The same measurement on scipy.signal.sawtooth: it must be able to see an alias.
    cycles = odd_cycles(440.0, 44100.0)
    naive = signal.sawtooth(2 * np.pi * ((cycles * np.arange(FRAMES) / FRAMES) % 1.0))
    amplitude = np.abs(fft.rfft(naive))
    fundamental = amplitude[cycles]
    amplitude[::cycles] = 0.0
    assert 20 * np.log10(amplitude.max() / fundamental) > -50.0


def series(waveform, width, k):
    """Amplitude of harmonic k (Fourier series; handbooks of mathematics, from memory)."""
    if waveform == "saw":
        return 2 / (np.pi * k)
    if waveform == "triangle":
        return 8 / (np.pi * k) ** 2 * (k % 2)
    if waveform == "pulse":
        return np.abs(4 / (np.pi * k) * np.sin(np.pi * k * width))
    return 1.0 * (k == 1)


@pytest.mark.parametrize(
    ("waveform", "width"),
    [("saw", 0.5), ("pulse", 0.5), ("pulse", 0.13), ("triangle", 0.5), ("sine", 0.5)],
)
def test_harmonics_follow_the_fourier_series(waveform, width):
    rate_hz, cycles = 44100.0, 327  # 220 Hz
    k = np.arange(1, int(17000 / 220) + 1)
    amplitude = spectrum(waveform, width, rate_hz, cycles)[cycles * k]
    assert amplitude[0] == pytest.approx(series(waveform, width, 1), rel=1e-6)
    assert amplitude == pytest.approx(series(waveform, width, k), rel=2e-3, abs=1e-6)


def test_droop_at_the_top_of_the_band():
    rate_hz, cycles = 44100.0, odd_cycles(50.0, 44100.0)
    amplitude = spectrum("saw", 0.5, rate_hz, cycles)[cycles::cycles]
    k = np.arange(1, len(amplitude) + 1)
    droop = 20 * np.log10(amplitude / series("saw", 0.5, k))
    at = {
        hz: float(np.interp(hz * FRAMES / rate_hz / cycles, k, droop)) for hz in (18e3, 19e3, 2e4)
    }
    print(f"droop at 44.1 kHz: {', '.join(f'{hz:.0f} Hz {db:.2f} dB' for hz, db in at.items())}")
    assert -0.02 < at[18e3] < 0.001
    assert -0.5 < at[19e3] < -0.1
    assert -3.0 < at[2e4] < -2.0


@pytest.mark.parametrize(
    ("waveform", "theirs"),
    [
        ("saw", lambda p: signal.sawtooth(p + np.pi)),
        ("triangle", lambda p: signal.sawtooth(p + np.pi / 2, 0.5)),
        ("pulse", lambda p: signal.square(p + 0.3 * np.pi, 0.3)),
        ("sine", np.sin),
    ],
)
def test_slow_waveforms_against_scipy_signal(waveform, theirs):
    frames, cycles = 9600, 4
    oscillator = Oscillator(waveform, 0.3)
    oscillator.prepare(48000.0, frames)
    output = oscillator.process(np.full(frames, cycles * 48000.0 / frames))
    expected = theirs(2 * np.pi * cycles * np.arange(frames) / frames)
    late = output[oscillator.latency_frames :]
    differs = np.abs(late - expected[: len(late)]) > 1e-6
    # Only within the reach of an edge, of which there are at most two a cycle and the onset.
    assert differs.sum() <= (2 * cycles + 1) * 2 * edges.TAPS


@pytest.mark.parametrize("tau_s", [0.005, 0.1, 0.8])
@pytest.mark.parametrize(("from_volts", "to_volts"), [(0.0, 3.0), (4.0, 1.5)])
def test_cycles_over_a_glide(from_volts, to_volts, tau_s):
    # f = f0 2^v, v = v1 + (v0 - v1) e^(-t/tau). With a = (v0 - v1) ln 2 and f1 = f0 2^v1,
    # f = f1 exp(a e^(-t/tau)); put x = a e^(-t/tau), dt = -tau dx/x:
    # integral of f dt from 0 to t = f1 tau (Ei(a) - Ei(a e^(-t/tau))), scipy.special.expi.
    rate_hz, f0_hz = 48000.0, 65.40639
    t = np.arange(int(5 * tau_s * rate_hz)) / rate_hz
    fading = np.exp(-t / tau_s)
    pitch = f0_hz * 2.0 ** (to_volts + (from_volts - to_volts) * fading)
    a = (from_volts - to_volts) * math.log(2)
    f1_hz = f0_hz * 2.0**to_volts
    cycles = f1_hz * tau_s * (special.expi(a) - special.expi(a * fading))
    oscillator = Oscillator("sine")
    oscillator.prepare(rate_hz, len(t))
    late = oscillator.process(pitch)[oscillator.latency_frames :]
    difference = np.abs(late - np.sin(2 * np.pi * cycles[: len(late)]))
    # A sine is off by at most 2 pi times the error in cycles, and by that much where it passes 0.
    # Within reach of the onset it is rounded, not off.
    error = difference[edges.TAPS :].max() / (2 * np.pi)
    assert cycles[-1] > 3.0
    assert error < 1e-4


@pytest.mark.parametrize("fraction", [0.0, 0.37, 0.90283203125])
def test_edges_against_numerical_integration(fraction):
    # scipy.integrate.quad over the same windowed sinc, scipy.special.i0 for Kaiser's window.
    def kernel(t):
        inside = max(0.0, 1.0 - (t / edges.TAPS) ** 2)
        window = special.i0(edges._BETA * math.sqrt(inside)) / special.i0(edges._BETA)
        return np.sinc(edges._CUTOFF * t) * window

    def integral(of, to):
        return sum(
            integrate.quad(of, n, min(n + 1, to), epsabs=1e-12)[0]
            for n in range(-edges.TAPS, math.ceil(to))
        )

    area = integral(kernel, edges.TAPS)
    one, none = np.ones(1), np.zeros(1)
    at = np.zeros(1, np.intp)
    step, ramp = np.zeros(2 * edges.TAPS), np.zeros(2 * edges.TAPS)
    edges.edge_tables().add(step, at, np.array([fraction]), one, none)
    edges.edge_tables().add(ramp, at, np.array([fraction]), none, one)
    for tap in (1, 10, edges.TAPS - 1, edges.TAPS, edges.TAPS + 1, 40):
        t = tap - edges.TAPS + fraction
        s = integral(kernel, t) / area
        # The integral of S by parts: t S(t) less the integral of t h(t).
        r = t * s - integral(lambda x: x * kernel(x), t) / area
        assert step[tap] + (tap >= edges.TAPS) == pytest.approx(s, abs=3e-7)
        assert ramp[tap] + max(t, 0.0) == pytest.approx(r, abs=3e-7)
