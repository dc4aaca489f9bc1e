"""Fits of one capture: which channel is which, what is refused, and what does not mislead."""

import numpy as np
import pytest
from bench.capture_maker import Circuit, Generator, Scope, record

from livelag.bench.capture import Capture
from livelag.bench.capture_roles import find_roles
from livelag.bench.fit import fit_capture
from livelag.errors import InputError, UnknownNameError

TAU = 0.2
CIRCUIT = Circuit(200e3, 1e-6, offset_in_v=4e-3, divider=0.995)
STEP = Generator((0.0, 4.0), (1e-3,))
SCOPE = Scope(800, 2e-3, -0.2)


def capture_of(circuit=CIRCUIT, generator=STEP, scope=SCOPE, order=(0, 1)):
    times, *volts = record(circuit, generator, scope)
    return Capture("c.csv", times, ("CH1", "CH2"), np.array([volts[i] for i in order]))


def fit_of(capture, **told):
    return fit_capture(capture.name, find_roles(capture, **told))


def holds(fit, circuit=CIRCUIT, times=1.5):
    """Half-widths hold 95 %; one and a half of them all but always."""
    pairs = (
        (fit.time_constant_s, circuit.time_constant_s),
        (fit.gain, circuit.gain),
        (fit.offset_v, circuit.offset_v),
    )
    return all(abs(measured.value - truth) <= times * measured.u95 for measured, truth in pairs)


@pytest.mark.parametrize("seed", range(12))
@pytest.mark.parametrize("levels", [(0.02, 4.0), (0.0, 4.02), (4.0, 0.02), (-2.02, 3.0)])
def test_a_level_that_lies_still_between_two_steps_is_not_clipped(levels, seed):
    # Noise of a tenth of a step: a level on the border of two steps flickers, the other does not.
    scope = Scope(800, 2e-3, -0.4, (0.004, 0.004), seed=seed)
    capture = capture_of(generator=Generator(levels, (1e-3,)), scope=scope)
    assert len(np.unique(capture.volts[0])) == 3
    assert abs(fit_of(capture).time_constant_s.value / TAU - 1.0) < 0.02


@pytest.mark.parametrize("order", [(0, 1), (1, 0)])
@pytest.mark.parametrize("levels", [(0.0, 4.0), (4.0, 0.0), (-2.0, 3.0)])
def test_either_order_and_direction(order, levels):
    fit = fit_of(capture_of(generator=Generator(levels, (1e-3,)), order=order))
    assert fit.input_name == ("CH1", "CH2")[order.index(0)]
    assert holds(fit)
    assert fit.time_constant_s.u95 < 0.02 * TAU


def test_a_third_channel_does_not_distract():
    capture = capture_of()
    rng = np.random.default_rng(0)
    wobble = 0.02 * rng.standard_normal(capture.times_s.size) + 1.0
    three = Capture(
        "c.csv", capture.times_s, ("x", "in", "out"), np.array([wobble, *capture.volts])
    )
    fit = fit_of(three)
    assert (fit.input_name, fit.output_name) == ("in", "out")


def test_told_channels_by_name_and_number():
    capture = capture_of()
    assert fit_of(capture, input_channel="CH1", output_channel="2").output_name == "CH2"
    with pytest.raises(InputError, match="does not follow 'CH2' as a glide does"):
        fit_of(capture, input_channel="2", output_channel="1")
    with pytest.raises(UnknownNameError, match="unknown channel '3'; known: CH1, CH2"):
        find_roles(capture, input_channel="3")
    with pytest.raises(InputError, match="input and output are both 'CH1'"):
        find_roles(capture, "CH1", "1")


SQUARE = Generator((0.0, 4.0, 0.0, 4.0, 0.0, 4.0), tuple(0.9 * k + 1e-3 for k in range(5)))
TRACES = {
    "staircase": (Generator((0.0, 1.0, 2.0, 3.0), (1e-3, 1.1, 2.2)), Scope(1700, 2e-3, -0.2)),
    "square wave": (SQUARE, Scope(1000, 4e-3, -0.2)),
    "starts in a glide": (Generator((4.0, 0.0, 4.0), (-0.3, 0.4)), Scope(900, 2e-3, -0.1)),
    "slow edge": (Generator((0.0, 4.0), (0.0,), rise_s=0.1), SCOPE),
    "short": (STEP, Scope(600, 0.5e-3, -0.03)),
    "no noise": (STEP, Scope(800, 2e-3, -0.2, noise_v=(0.0, 0.0))),
    "neither noise nor steps": (STEP, Scope(800, 2e-3, -0.2, (0.0, 0.0), (0.0, 0.0))),
    "noisier input": (STEP, Scope(800, 2e-3, -0.2, (0.15, 0.02))),
    "trigger off": (STEP, Scope(800, 2e-3, -0.2, trigger_s=17.3)),
    "hum": (STEP, Scope(800, 2e-3, -0.2, hum_v=(0.0, 0.05), hum_hz=6.0)),
    "clipped output": (STEP, Scope(800, 2e-3, -0.2, clip_v=(np.inf, 3.4))),
    "clipped without noise": (STEP, Scope(800, 2e-3, -0.2, (0, 0), clip_v=(np.inf, 3.4))),
}


@pytest.mark.parametrize("what", TRACES)
def test_the_interval_holds_on_every_kind_of_trace(what):
    generator, scope = TRACES[what]
    fit = fit_of(capture_of(generator=generator, scope=scope))
    assert holds(fit), fit
    assert fit.time_constant_s.u95 < 0.15 * TAU
    assert fit.absorption_share is None
    clipped = any("clipped" in note for note in fit.notes)
    assert clipped == what.startswith("clipped")


def test_a_slow_disturbance_widens_the_interval_and_is_said():
    calm = fit_of(capture_of())
    hum = Scope(800, 2e-3, -0.2, hum_v=(0.0, 0.06), hum_hz=1.5)
    fit = fit_of(capture_of(scope=hum))
    assert fit.time_constant_s.u95 > 3 * calm.time_constant_s.u95
    assert any("hangs together" in note for note in fit.notes)


def test_a_long_capture_is_averaged_and_as_good():
    scope = Scope(200_000, 1e-5, -0.2, (0.02, 0.02))
    fit = fit_of(capture_of(scope=scope))
    assert fit.trace.averaged == 10
    assert holds(fit)
    assert fit.time_constant_s.u95 < 1e-3 * TAU


def test_a_short_glide_in_a_long_capture_is_found():
    quick = Circuit(1e3, 330e-9)
    generator = Generator((0.0, 4.0, 0.0), (0.1001, 0.6001), rise_s=1e-8)
    fit = fit_of(capture_of(quick, generator, Scope(100_000, 1e-5, 0.0)))
    assert holds(fit, quick)


def test_more_steps_tell_more():
    one = fit_of(capture_of(scope=Scope(800, 4e-3, -0.2)))
    many = fit_of(capture_of(generator=SQUARE, scope=Scope(1150, 4e-3, -0.2)))
    assert many.steps == 5
    assert many.time_constant_s.u95 < 0.7 * one.time_constant_s.u95


CANNOT_TELL = {
    "nothing": (Generator((2.0,), ()), SCOPE, "shows no step, only noise"),
    "output lies still": (STEP, Scope(800, 2e-3, -0.2, clip_v=(9, 0)), "'CH2' shows no step"),
    "too coarse": (STEP, Scope(60, 0.15, -0.9), "is sampled too coarsely: a sample every 150 ms"),
    "too short": (STEP, Scope(200, 2e-4, -4e-3), "is too short: the input is held for 34.7 ms"),
    "too noisy": (STEP, Scope(60, 2e-2, -0.3, (0.1, 0.7), (0.1, 0.1)), "is too noisy"),
    "clipped input": (STEP, Scope(800, 2e-3, -0.2, clip_v=(3.0, 9)), "the input 'CH1' is clipped"),
    "clipped away": (STEP, Scope(800, 2e-3, -0.1, clip_v=(9, 0.8)), "the output 'CH2' is clipped"),
}  # fmt: skip


@pytest.mark.parametrize("what", CANNOT_TELL)
def test_a_capture_that_cannot_tell_says_why_and_what_to_capture(what):
    generator, scope, said = CANNOT_TELL[what]
    told = {"input_channel": "1", "output_channel": "2"} if what == "too noisy" else {}
    with pytest.raises(InputError) as caught:
        fit_of(capture_of(generator=generator, scope=scope), **told)
    message = str(caught.value)
    assert message.startswith("c.csv: ")
    assert said in message
    assert any(word in message for word in ("capture", "expected", "use a larger step"))


def test_two_channels_alike_cannot_be_told_apart():
    capture = capture_of()
    same = Capture("c.csv", capture.times_s, ("a", "b"), capture.volts[[1, 1]])
    with pytest.raises(InputError, match=r"'a', 'b' move alike.*--in and --out"):
        find_roles(same)


def test_two_unrelated_channels_are_no_glide():
    t = np.arange(2000) * 1e-3
    rng = np.random.default_rng(3)
    walks = np.cumsum(rng.standard_normal((2, 2000)), axis=1)
    with pytest.raises(InputError):
        fit_of(Capture("c.csv", t, ("a", "b"), walks))
