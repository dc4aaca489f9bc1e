"""The lag against general libraries and published coefficients."""

import numpy as np
import pytest
from scipy.integrate import solve_ivp
from scipy.signal import cont2discrete, dlsim

from livelag.circuit.parts import Capacitor, Pot, Resistor
from livelag.circuit.presets import load_stage, preset_names
from livelag.circuit.stage import GlideStage, Range, Setting
from livelag.sound.lag import Lag, _coefficients

RATE = 48000


def lone_rc(time_constant_s):
    return GlideStage(
        title="lone RC",
        capacitors=(Capacitor("c", 1e-6),),
        ranges=(Range("all", ("c",)),),
        pot=Pot(1.0, end_ohms=0.0),
        series=Resistor(time_constant_s / 1e-6),
    )


# Computed from the textbook formulas 1 - e^(-T/tau) and Tustin's rule at 48 kHz.
@pytest.mark.parametrize(
    ("tau", "exact", "b0", "a1"),
    [
        (1e-3, 2.0617818669e-2, 1.0309278351e-2, -0.979381443299),
        (100e-3, 2.0831163345e-4, 1.0415581710e-4, -0.999791688366),
    ],
)
def test_coefficients_of_a_lone_rc(tau, exact, b0, a1):
    pole, drive = np.array([-1 / tau]), 1 / tau
    p, _, held, _ = _coefficients("exact", pole, 1 / RATE)
    assert held[0] * drive == pytest.approx(exact, rel=1e-10)
    assert 1 - p[0] == pytest.approx(exact, rel=1e-10)
    p, first, second, _ = _coefficients("bilinear", pole, 1 / RATE)
    assert first[0] * drive == pytest.approx(b0, rel=1e-10)
    assert second[0] * drive == pytest.approx(b0, rel=1e-10)
    assert -p[0] == pytest.approx(a1, abs=1e-12)


def state_space(stage, setting):
    """The modes as a plain state space: dz/dt = s z + g u, bus = c z."""
    network = stage.network(setting)
    n = network.driven_count
    return (
        np.diag(network.poles[:n]),
        network.drive[:n, None],
        network.readout[None, :n],
        np.array([[network.feedthrough]]),
    )


@pytest.mark.parametrize(("method", "theirs"), [("bilinear", "bilinear"), ("ramp", "foh")])
@pytest.mark.parametrize("preset", preset_names())
def test_methods_match_cont2discrete(preset, method, theirs):
    """scipy.signal.cont2discrete, its bilinear and first-order hold; 1e-12 relative."""
    stage = load_stage(preset)
    for index in range(len(stage.ranges)):
        setting = Setting(index, 0.4)
        rng = np.random.default_rng(1)
        keys = np.clip(np.cumsum(rng.normal(0.01, 0.1, 3000)), -1.0, 6.0)
        keys[:200] = 0.0
        source = stage.source_volts(keys, setting)
        discrete = cont2discrete(state_space(stage, setting), 1 / RATE, method=theirs)
        x0 = -source[0] * np.linalg.solve(discrete[0] - np.eye(len(discrete[0])), discrete[1])[:, 0]
        _, bus, _ = dlsim(discrete, source, x0=x0)
        lag = Lag(stage, RATE, method, setting, key_volts=0.0)
        glide = lag.process(keys)
        expected = stage.output_volts(bus[:, 0])
        assert np.abs(glide - expected).max() <= 1e-12 * np.ptp(expected)
        assert np.ptp(glide) > 0.01


def circuit_equations(stage, setting, source):
    """The stage's differential equations straight from the circuit, capacitor by capacitor."""
    connected = [c.name in stage.ranges[setting.range_index].connects for c in stage.capacitors]
    R = stage.resistance_ohms(setting)
    bleed = None if stage.bleed is None else stage.bleed.resistance_ohms
    caps = stage.capacitors
    total = sum(c.capacitance_f for c, on in zip(caps, connected, strict=True) if on)

    def derivative(t, x):
        bus = x[connected.index(True)]
        into_bus = (source - bus) / R
        slopes = np.zeros_like(x)
        row = len(caps)
        own = np.zeros(len(caps))
        for i, cap in enumerate(caps):
            own[i] -= x[i] * cap.leakage_siemens
            for branch in cap.branches:
                current = (x[i] - x[row]) * branch.fraction * cap.capacitance_f / branch.time_s
                own[i] -= current
                slopes[row] = current / (branch.fraction * cap.capacitance_f)
                row += 1
            if not connected[i] and bleed is not None:
                own[i] += (bus - x[i]) / bleed
                into_bus -= (bus - x[i]) / bleed
        into_bus += sum(o for o, on in zip(own, connected, strict=True) if on)
        for i, cap in enumerate(caps):
            slopes[i] = into_bus / total if connected[i] else own[i] / cap.capacitance_f
        return slopes

    return derivative


@pytest.mark.parametrize("preset", preset_names())
def test_exact_method_against_solve_ivp(preset):
    """scipy.integrate.solve_ivp, DOP853 at rtol 1e-12: 1e-9 V, absorption and leakage on."""
    stage = load_stage(preset)
    for index in range(len(stage.ranges)):
        setting = Setting(index, 0.05)
        lag = Lag(stage, RATE, "exact", setting, key_volts=0.25)
        state = lag.state_v
        frames = 2400
        for key in (1.5, 0.75):
            source = stage.source_volts(key, setting)
            solved = solve_ivp(
                circuit_equations(stage, setting, source),
                (0, frames / RATE),
                state,
                method="DOP853",
                rtol=1e-12,
                atol=1e-14,
                t_eval=np.arange(frames + 1) / RATE,
            )
            glide = lag.process(np.full(frames, key))
            bus = solved.y[
                [c.name for c in stage.capacitors].index(stage.ranges[index].connects[0])
            ]
            assert np.abs(glide - stage.output_volts(bus[:-1])).max() < 1e-9
            state = solved.y[:, -1]
            assert np.abs(lag.state_v - state).max() < 1e-9


def test_a_moving_pot_against_solve_ivp():
    """The pot turns in steps while the key is held; the volts carry over, checked as above."""
    stage = load_stage("two-range-film")
    lag = Lag(stage, RATE, "exact", Setting(0, 0.5), key_volts=0.0)
    state = lag.state_v
    for rotation in (0.5, 0.1, 0.9, 0.3):
        setting = Setting(0, rotation)
        lag.move(setting)
        glide = lag.process(np.full(480, 2.0))
        solved = solve_ivp(
            circuit_equations(stage, setting, stage.source_volts(2.0, setting)),
            (0, 0.01),
            state,
            method="DOP853",
            rtol=1e-12,
            atol=1e-14,
            t_eval=np.arange(481) / RATE,
        )
        assert np.abs(glide - stage.output_volts(solved.y[0][:-1])).max() < 1e-9
        state = solved.y[:, -1]


def test_step_after_one_to_five_time_constants():
    """Handbook table of the RC step response, rounded: 63.2, 86.5, 95.0, 98.2, 99.3 per cent."""
    tau = 0.05
    lag = Lag(lone_rc(tau), RATE, "exact", Setting(0, 0.0))
    glide = lag.process(np.ones(RATE))
    percent = [100 * glide[round(k * tau * RATE)] for k in (1, 2, 3, 4, 5)]
    assert [round(p, 1) for p in percent] == [63.2, 86.5, 95.0, 98.2, 99.3]
