import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from livelag.errors import InputError, UnknownNameError
from livelag.sound import edges
from livelag.sound.edges import TAPS, edge_tables
from livelag.sound.oscillator import HIGHEST_PITCH, WAVEFORMS, Oscillator

RATE_HZ = 48000.0


def prepared(waveform="saw", pulse_width=0.5, max_frames=8192, rate_hz=RATE_HZ):
    oscillator = Oscillator(waveform, pulse_width)
    oscillator.prepare(rate_hz, max_frames)
    return oscillator


def steady(waveform, pulse_width=0.5, cycles=375, frames=4096, rate_hz=RATE_HZ):
    """A whole number of cycles, after the onset."""
    oscillator = prepared(waveform, pulse_width, frames, rate_hz)
    pitch = np.full(frames, cycles * rate_hz / frames)
    oscillator.process(pitch)
    return oscillator.process(pitch)


class Plan:
    """A pitch curve, and settings that change at given frames."""

    def __init__(self, seed, changes):
        random = np.random.default_rng(seed)
        frames = int(random.integers(1, 700))
        octaves = np.cumsum(random.normal(0, 0.1, frames)) + random.uniform(5, 15)
        self.pitch_hz = 2.0**octaves
        odd = random.integers(0, frames, 3)
        self.pitch_hz[odd] = random.choice([np.nan, np.inf, -np.inf, -5.0, 0.0, 23999.0], 3)
        self.changes = {at % frames: change for at, change in changes}

    def play(self, cuts):
        oscillator = prepared(max_frames=700)
        ends = sorted({*(c % len(self.pitch_hz) for c in cuts), *self.changes, len(self.pitch_hz)})
        played, start = [], 0
        for end in ends:
            played.append(oscillator.process(self.pitch_hz[start:end]))
            if end in self.changes:
                oscillator.waveform, oscillator.pulse_width = self.changes[end]
            start = end
        return np.concatenate(played), oscillator.clamped_frames


change = st.tuples(
    st.integers(0, 699), st.tuples(st.sampled_from(list(WAVEFORMS)), st.floats(0.02, 0.98))
)


@settings(max_examples=150, deadline=None)
@given(
    st.integers(0, 2**32),
    st.lists(change, max_size=4),
    st.lists(st.integers(0, 699), max_size=30),
)
def test_blocks_never_change_a_bit(seed, changes, cuts):
    plan = Plan(seed, changes)
    whole, clamped = plan.play([])
    parts, clamped_in_parts = plan.play(cuts)
    assert np.array_equal(whole, parts)
    assert clamped == clamped_in_parts
    assert np.isfinite(whole).all()
    # Each edge is at most 2 high and rings by a tenth of that; two or three can fall together.
    assert np.abs(whole).max() < 2.5


@pytest.mark.parametrize("waveform", WAVEFORMS)
def test_one_frame_at_a_time(waveform):
    pitch = np.geomspace(100.0, 20000.0, 1500)
    whole = prepared(waveform).process(pitch)
    single = prepared(waveform, max_frames=1)
    assert np.array_equal(
        whole, np.concatenate([single.process(pitch[n : n + 1]) for n in range(1500)])
    )


@pytest.mark.parametrize("waveform", WAVEFORMS)
@pytest.mark.parametrize("rate_hz", [8000.0, 44100.0, 192000.0])
def test_latency_is_the_same_at_every_rate(waveform, rate_hz):
    frames = 4096
    output = steady(waveform, cycles=3, rate_hz=rate_hz)
    phase = 3 * (np.arange(frames) + frames - Oscillator.latency_frames) / frames
    cycle = (phase + 0.5) % 1.0 - 0.5
    naive = WAVEFORMS[waveform].value(cycle, 0.5)
    smooth = np.ones(frames, bool)
    for point in WAVEFORMS[waveform].breakpoints(0.5):
        away = np.abs((phase - point.phase + 0.5) % 1.0 - 0.5)
        smooth &= away > 3 * (TAPS + 1) / frames
    assert smooth.sum() > 3500
    assert np.abs(output - naive)[smooth].max() < 1e-9


def test_polarity():
    frames = 4800  # one cycle
    at = {}
    for waveform in WAVEFORMS:
        output = steady(waveform, pulse_width=0.25, cycles=1, frames=frames)
        at[waveform] = [output[int(p * frames) + TAPS] for p in (0.0, 0.1, 0.25, 0.45, 0.55, 0.9)]
    assert at["saw"] == pytest.approx([0.0, 0.2, 0.5, 0.9, -0.9, -0.2], abs=1e-6)
    assert at["pulse"] == pytest.approx([1.0, 1.0, -1.0, -1.0, -1.0, 1.0], abs=1e-6)
    assert at["triangle"] == pytest.approx([0.0, 0.4, 1.0, 0.2, -0.2, -0.4], abs=1e-3)
    sine = np.sin(2 * np.pi * np.array([0, 0.1, 0.25, 0.45, 0.55, 0.9]))
    assert at["sine"] == pytest.approx(sine, abs=1e-9)


@pytest.mark.parametrize("cycles", [3, 375, 1501, 2007])
@pytest.mark.parametrize(
    ("waveform", "width", "mean"),
    [
        ("saw", 0.5, 0.0),
        ("triangle", 0.5, 0.0),
        ("sine", 0.5, 0.0),
        ("pulse", 0.5, 0.0),
        ("pulse", 0.02, -0.96),
        ("pulse", 0.7, 0.4),
        ("pulse", 0.98, 0.96),
    ],
)
def test_mean(waveform, width, mean, cycles):
    # 2007 cycles in 4096 frames is 0.48998 of the rate: both edges of a pulse in one frame.
    assert steady(waveform, width, cycles).mean() == pytest.approx(mean, abs=1e-7)


def test_pitch_is_clamped_and_counted():
    bad = np.array([100.0, -1.0, np.nan, np.inf, -np.inf, 0.0, 30000.0, 100.0])
    good = np.array([100.0, 0.0, 0.0, 1.0, 0.0, 0.0, 1.0, 100.0])
    good[[3, 6]] = HIGHEST_PITCH * RATE_HZ
    oscillator, reference = prepared(), prepared()
    assert np.array_equal(oscillator.process(bad), reference.process(good))
    assert oscillator.clamped_frames == 5
    assert reference.clamped_frames == 0
    oscillator.process(bad)
    assert oscillator.clamped_frames == 10
    oscillator.reset()
    assert oscillator.clamped_frames == 0


def test_reset_begins_again():
    pitch = np.geomspace(50, 5000, 1000)
    oscillator = prepared("pulse", 0.3)
    first = oscillator.process(pitch)
    oscillator.waveform = "saw"
    oscillator.process(pitch)
    oscillator.waveform = "pulse"
    oscillator.reset()
    assert np.array_equal(oscillator.process(pitch), first)


def test_output_is_the_callers_to_keep():
    oscillator = prepared()
    pitch = np.full(100, 440.0)
    first = oscillator.process(pitch)
    kept = first.copy()
    oscillator.process(pitch)
    assert np.array_equal(first, kept)
    assert np.array_equal(pitch, np.full(100, 440.0))


def still(change):
    """The oscillator at 0 Hz, phase 0, with one change on the way."""
    oscillator = prepared("pulse", 0.4)
    standing = np.zeros(200)
    before = oscillator.process(standing)
    change(oscillator)
    return np.concatenate((before, oscillator.process(standing)))[100:]


def test_change_of_waveform_is_a_band_limited_step():
    output = still(lambda oscillator: setattr(oscillator, "waveform", "saw"))
    assert output[:100] == pytest.approx(np.ones(100), abs=1e-12)
    assert output[100 + 2 * TAPS :] == pytest.approx(np.zeros(200 - 2 * TAPS), abs=1e-12)
    assert output[100 + TAPS] == pytest.approx(0.5)  # half-way at the change, TAPS frames late
    # The difference of neighbours is the kernel through a box one frame long: sinc(f) in its band.
    spectrum = np.abs(np.fft.rfft(np.diff(output)[100 : 100 + 2 * TAPS], 1000))
    band = np.arange(401) / 1000
    assert spectrum[:401] == pytest.approx(np.sinc(band), abs=1e-3)
    assert spectrum[500] < 0.3  # a bare jump would keep 1 up to half the rate


@pytest.mark.parametrize("pitch_hz", [0.0237 * RATE_HZ, 0.131 * RATE_HZ, 0.37 * RATE_HZ])
def test_changes_in_mid_note_equal_a_finely_sampled_convolution(pitch_hz):
    # An even kernel leaves straight pieces as they are: the output is the kernel on the ideal.
    fine, block, names = 1024, 13, ["saw", "triangle", "pulse", "triangle", "saw", "pulse"]
    time = (np.arange(block * len(names) * fine) + 0.5) / fine  # in frames
    cycle = (time * pitch_hz / RATE_HZ + 0.5) % 1.0 - 0.5
    ideal = np.concatenate(
        [WAVEFORMS[n].value(c, 0.3) for n, c in zip(names, np.split(cycle, 6), strict=True)]
    )
    reach = (np.arange(2 * TAPS * fine) + 0.5) / fine - TAPS
    kernel = np.sinc(edges._CUTOFF * reach) * np.kaiser(len(reach), edges._BETA)
    kernel /= kernel.sum()
    padded = np.concatenate((np.zeros(2 * TAPS * fine), ideal))
    expected = [
        padded[n * fine : (n + 2 * TAPS) * fine] @ kernel for n in range(block * len(names))
    ]
    oscillator = prepared(names[0], 0.3)
    output = []
    for name in names:
        oscillator.waveform = name
        output.append(oscillator.process(np.full(block, pitch_hz)))
    assert np.abs(np.concatenate(output) - expected).max() < 3e-3


def test_a_setting_that_changes_nothing_leaves_no_trace():
    def change(oscillator):
        oscillator.pulse_width = 0.6  # phase 0 is high either way
        oscillator.waveform = "pulse"

    assert np.array_equal(still(change), np.ones(300))


def test_width_changes_from_the_next_frame_on():
    oscillator = prepared("pulse", 0.5)
    pitch = np.full(4800, 100.0)
    oscillator.process(pitch)
    oscillator.pulse_width = 0.1
    assert oscillator.process(pitch)[TAPS:].mean() == pytest.approx(-0.8, abs=0.01)


def test_empty_block_changes_nothing():
    pitch = np.full(300, 440.0)
    reference, oscillator = prepared(), prepared()
    oscillator.process(pitch[:100])
    assert oscillator.process(pitch[:0]).shape == (0,)
    assert np.array_equal(oscillator.process(pitch[100:]), reference.process(pitch)[100:])


@pytest.mark.parametrize("width", [0.0, 0.019, 0.981, 1.0, -0.5, float("nan")])
def test_width_out_of_range(width):
    with pytest.raises(InputError, match=r"pulse width: .* is outside 0\.02 to 0\.98"):
        Oscillator("pulse", width)
    oscillator = prepared("pulse", 0.3)
    with pytest.raises(InputError):
        oscillator.pulse_width = width
    assert oscillator.pulse_width == 0.3


def test_unknown_waveform():
    with pytest.raises(UnknownNameError, match="unknown waveform 'swa'; did you mean 'saw'"):
        Oscillator("swa")
    oscillator = prepared("sine")
    with pytest.raises(UnknownNameError):
        oscillator.waveform = "noise"
    assert oscillator.waveform == "sine"


@pytest.mark.parametrize(("rate_hz", "frames"), [(0, 64), (np.nan, 64), (np.inf, 64), (48000, 0)])
def test_prepare_out_of_range(rate_hz, frames):
    with pytest.raises(InputError):
        Oscillator().prepare(rate_hz, frames)


@pytest.mark.parametrize("shape", [(65,), (1, 64), ()])
def test_block_that_does_not_fit(shape):
    with pytest.raises(InputError, match="does not fit"):
        prepared(max_frames=64).process(np.zeros(shape))


def test_edge_residuals_end_at_exactly_zero():
    tables = edge_tables()
    for table in (tables.step, tables.ramp):
        assert table[0, 0, 0] == 0.0
        assert table[-1, 0, -1] + table[-1, 1, -1] == 0.0
        assert np.abs(table[:, 0]).max() > 0.1
    assert tables.step[0, 0, TAPS] == -0.5  # at the edge itself: half-way up


def test_edge_tables_are_shared_and_read_only():
    assert edge_tables() is edge_tables()
    with pytest.raises(ValueError, match="read-only"):
        edge_tables().step[0, 0, 0] = 1.0
