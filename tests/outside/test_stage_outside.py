"""The stage on paper against handbooks, common practice and a general solver."""

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import integrate, linalg, optimize
from strategies import stages_with_settings, states

from livelag.circuit.parts import Buffer, Capacitor, Pot, Resistor
from livelag.circuit.presets import load_stage, preset_names
from livelag.circuit.stage import GlideStage, Range, Setting

SLOWEST = Setting(0, 1.0)


def lone(series=1e3, pot=99e3, kind="ideal", **fields):
    """One capacitor of 1 uF behind a resistor and a linear pot."""
    parts = {
        "title": "lone",
        "capacitors": (Capacitor("c", 1e-6, kind),),
        "ranges": (Range("all", ("c",)),),
        "pot": Pot(pot),
        "series": Resistor(series),
    }
    return GlideStage(**{**parts, **fields})


def rising_octave(stage, times):
    """Glide volts on the way from 0 to 1 V at the slow end of the pot."""
    return stage.response(stage.settled_state(0.0, SLOWEST), 1.0, SLOWEST, np.asarray(times))


# Source: handbooks of circuits, the step response of a first-order low-pass.
def test_step_response_at_one_to_five_time_constants():
    stage = lone()
    tau = stage.time_constant_s(SLOWEST)
    assert tau == pytest.approx(0.1)
    percent = 100 * rising_octave(stage, tau * np.arange(1, 6))
    np.testing.assert_allclose(percent, [63.2, 86.5, 95.0, 98.2, 99.3], atol=0.05)
    # The same to seven figures: 100 (1 - e^-n).
    np.testing.assert_allclose(
        percent, [63.21206, 86.46647, 95.02129, 98.16844, 99.32621], atol=6e-6
    )


# Source: handbooks of circuits: 10 % to 90 % takes ln 9 = 2.197 time constants.
def test_rise_time_is_ln_9_time_constants():
    stage = lone()

    def passes(level):
        return optimize.brentq(
            lambda t: float(rising_octave(stage, [t])[0]) - level, 0.0, 1.0, xtol=1e-14
        )

    assert (passes(0.9) - passes(0.1)) / 0.1 == pytest.approx(2.197225, abs=1e-6)


# Source: textbook control theory: a first-order lag follows a ramp late by its time constant.
@pytest.mark.parametrize("rotation", [0.0, 0.3, 1.0])
def test_behind_a_ramp_the_lag_is_slope_times_tau(rotation):
    stage = lone()
    setting = Setting(0, rotation)
    tau = stage.time_constant_s(setting)
    steps_per_tau, slope = 100, 0.1 / tau
    hold = tau / steps_per_tau
    network = stage.network(setting)
    state = np.zeros(1)
    count = 20 * steps_per_tau
    for n in range(count):
        state = network.state_after(state, slope * (n + 0.5) * hold, hold)
    # Small held steps stand for the ramp; what is left is (hold / tau)^2 / 12 = 8e-6 of the lag.
    assert slope * count * hold - state[0] == pytest.approx(slope * tau, rel=2e-5)


# Source: common practice, no source.
def test_a_usual_pair_of_ranges():
    stage = lone(
        2.2e3,
        220e3,
        capacitors=(Capacitor("small", 1e-6), Capacitor("large", 10e-6)),
        ranges=(Range("short", ("small",)), Range("long", ("small", "large"))),
    )
    spans = [[stage.time_constant_s(Setting(r, x)) for x in (0.0, 1.0)] for r in (0, 1)]
    np.testing.assert_allclose(spans[0], [2.2e-3, 222e-3], rtol=2e-3)
    np.testing.assert_allclose(spans[1], [24e-3, 2.44], rtol=1e-2)
    # And the volts move at that pace: 63.2 % of the way after one of them.
    for r in (0, 1):
        for x, tau in zip((0.0, 1.0), spans[r], strict=True):
            setting = Setting(r, x)
            state = stage.settled_state(0.0, setting)
            reached = stage.response(state, 1.0, setting, np.array([tau]))[0]
            assert reached == pytest.approx(0.63212, abs=1e-5)


# Source: common practice, no source.
def test_a_fast_staircase_is_never_reached_and_runs_further_away():
    stage = lone()
    state = stage.settled_state(0.0, SLOWEST)
    gaps = []
    for step in range(1, 25):
        key = step / 12  # a semitone every tenth of a time constant
        state = stage.state_after(state, key, SLOWEST, 0.01)
        gaps.append(key - state[0])
    assert min(gaps) > 0.0
    assert np.all(np.diff(gaps) > 0.0)


# Source: computed from 1200 e^-n and ln(1200/5).
def test_an_octave_in_cents_after_one_three_and_five_time_constants():
    stage = lone()
    left = 1200 * (1 - rising_octave(stage, [0.1, 0.3, 0.5]))
    np.testing.assert_allclose(left, [441.455, 59.745, 8.086], atol=6e-4)
    assert stage.octave_arrival_s(SLOWEST, 5.0) / 0.1 == pytest.approx(5.4806, abs=5e-5)


def cost_cents(stage, key_volts):
    """Cents that a settled note is flat."""
    return 1200 * (key_volts - stage.settled_volts(key_volts, SLOWEST))


# Source: bias and insulation figures from data sheets of the classes, cost computed by Ohm's law.
@pytest.mark.parametrize(("bias_a", "cents"), [(100e-9, 120.0), (80e-9, 96.0), (30e-12, 0.036)])
def test_bias_current_through_a_megohm(bias_a, cents):
    buffer = replace(Buffer.of_class("ideal"), name="custom", bias_a=bias_a)
    stage = lone(1e3, 999e3, output_buffer=buffer)
    for key in (0.0, 2.0):
        assert cost_cents(stage, key) == pytest.approx(cents, rel=1e-9)


# Source: insulation figures from data sheets, cost computed for 5 V through 1 Mohm into 1 uF.
@pytest.mark.parametrize(
    ("kind", "cents"), [("polyester", 0.6), ("polypropylene", 0.06), ("x7r", 6.0), ("c0g", 0.6)]
)
def test_leakage_through_a_megohm(kind, cents):
    assert cost_cents(lone(1e3, 999e3, kind), 5.0) == pytest.approx(cents, rel=2e-3)
    assert cost_cents(lone(1e3, 999e3), 5.0) == pytest.approx(0.0, abs=1e-9)


# Source: data sheets of X7R parts: 1000 Mohm uF or 100 Gohm, the lesser.
@pytest.mark.parametrize(("farads", "ohms"), [(1e-9, 100e9), (10e-9, 100e9), (1e-6, 1e9)])
def test_insulation_of_x7r_has_a_ceiling(farads, ohms):
    leakage = Capacitor("c", farads, "x7r").leakage_siemens
    assert leakage == pytest.approx(1 / ohms, rel=1e-12)


# Source: aluminium electrolytics are specified to leak at most 0.01 C V (data sheets), a typical
# part a tenth of it (common practice): 5 nA from 1 uF at 5 V.
def test_leakage_of_an_electrolytic():
    capacitor = lone(kind="electrolytic").capacitors[0]
    worst = capacitor.kind_data.leakage_siemens(1e-6, worst=True)
    assert 5.0 * worst == pytest.approx(0.01 * 1e-6 * 5.0)
    assert cost_cents(lone(1e3, 999e3, "electrolytic"), 5.0) == pytest.approx(6.0, rel=2e-3)


# Source: charge conservation, as in any textbook: v = (C_a v_a + C_b v_b) / (C_a + C_b).
def test_charge_sharing_as_the_switch_closes():
    stage = load_stage("ideal")
    shared = stage.wiring.share_charge(np.array([3.0, 0.0]), 1)
    assert shared == pytest.approx([3.0 * 0.33 / 5.03] * 2)


# The equations of the circuit written once more, node by node, for general solvers. Volts are in
# the order of the stage's state: capacitors, then absorption branches.


def node_equations(stage, setting, key_volts):
    """d(volts)/dt as a function of volts, with the connected capacitors tied to one node.

    C dv/dt = (u - v)/R - G v - I_b - sum (v - w)/R_k - sum (v - p)/R_bleed
    """
    pot, taper = stage.pot, stage.pot.taper
    position = stage.ranges[setting.range_index]
    travel = float(np.interp(setting.rotation, taper.rotations, taper.fractions))
    R = (position.series or stage.series).resistance_ohms
    R += pot.end_ohms + (pot.resistance_ohms - pot.end_ohms) * travel
    low = stage.supply.negative_v + stage.input_buffer.headroom_negative_v
    high = stage.supply.positive_v - stage.input_buffer.headroom_positive_v
    u = min(max(key_volts + stage.input_buffer.offset_v, low), high)
    parts = stage.capacitors
    on_bus = [c.name in position.connects for c in parts]
    bus = on_bus.index(True)
    branches = []  # (state, capacitor, C_k, R_k)
    for i, part in enumerate(parts):
        for row in part.branches:
            C_k = row.fraction * part.capacitance_f
            branches.append((len(parts) + len(branches), i, C_k, row.time_s / C_k))
    bus_capacitance = sum(c.capacitance_f for c, on in zip(parts, on_bus, strict=True) if on)

    def slope(_, x):
        v = x[bus]
        into_bus = (u - v) / R - stage.output_buffer.bias_a
        into = [-part.leakage_siemens * x[i] for i, part in enumerate(parts)]
        dx = [0.0] * len(x)
        for state, i, C_k, R_k in branches:
            current = (x[i] - x[state]) / R_k
            into[i] -= current
            dx[state] = current / C_k
        for i, on in enumerate(on_bus):
            if not on and stage.bleed is not None:
                current = (v - x[i]) / stage.bleed.resistance_ohms
                into[i] += current
                into_bus -= current
        into_bus += sum(amps for amps, on in zip(into, on_bus, strict=True) if on)
        for i, part in enumerate(parts):
            dx[i] = into_bus / bus_capacitance if on_bus[i] else into[i] / part.capacitance_f
        return dx

    return slope


def solve(slope, start, times):
    """Volts (times, states), by a general solver.

    Each span ends at a time asked for: between its steps DOP853 only interpolates, to 4e-9 V here.
    """
    volts, now, found = start, 0.0, []
    for time in times:
        if time > now:
            solved = integrate.solve_ivp(
                slope, (now, time), volts, method="DOP853", rtol=1e-12, atol=1e-13
            )
            assert solved.success
            volts, now = solved.y[:, -1], time
        found.append(volts)
    return np.array(found)


def load_volts(stage, bus_volts):
    """What the next input sees, by the output buffer's offset and swing and the load's divider."""
    buffer = stage.output_buffer
    low = stage.supply.negative_v + buffer.headroom_negative_v
    high = stage.supply.positive_v - buffer.headroom_positive_v
    swung = np.clip(bus_volts + buffer.offset_v, low, high)
    if stage.load is None or stage.output_series is None:
        return swung
    load = stage.load.resistance_ohms
    return swung * load / (load + stage.output_series.resistance_ohms)


PRESET_RANGES = [
    (name, index) for name in preset_names() for index in range(len(load_stage(name).ranges))
]


# Source: scipy.integrate.solve_ivp, a general solver of differential equations (DOP853).
@pytest.mark.parametrize(("name", "range_index"), PRESET_RANGES)
@pytest.mark.parametrize("rotation", [0.0, 0.13, 0.5, 0.97, 1.0])
def test_every_preset_against_a_general_solver(name, range_index, rotation):
    stage = load_stage(name)
    setting = Setting(range_index, rotation)
    tau = stage.time_constant_s(setting)
    dice = np.random.default_rng([range_index, round(100 * rotation), len(name)])
    # An odd start: every part at volts of its own, as after a hasty turn of the switch.
    start = stage.wiring.share_charge(
        dice.uniform(-4.0, 6.0, stage.wiring.state_count), range_index
    )
    key = dice.uniform(0.5, 5.0)
    # Long enough for the absorption to speak, short enough for an explicit solver.
    times = np.array([0.0, 0.1, 0.7, 2.0, 8.0, 25.0, 60.0]) * tau
    expected = solve(node_equations(stage, setting, key), start, times)
    states_v = np.array([stage.state_after(start, key, setting, t) for t in times])
    np.testing.assert_allclose(states_v, expected, rtol=0, atol=1e-9)
    on_bus = [c.name in stage.ranges[range_index].connects for c in stage.capacitors]
    bus = expected[:, on_bus.index(True)]
    np.testing.assert_allclose(
        stage.response(start, key, setting, times), load_volts(stage, bus), rtol=0, atol=1e-9
    )


# Source: scipy.integrate.solve_ivp again, over seconds, where absorption and bleed have the word.
@pytest.mark.parametrize("name", ["two-range-bipolar", "bleed-film", "ceramic-budget"])
def test_slow_creep_against_a_general_solver(name):
    stage = load_stage(name)
    setting = Setting(1, 0.25)
    start = stage.settled_state(0.0, setting)
    times = np.array([1.0, 5.0, 20.0])
    expected = solve(node_equations(stage, setting, 3.0), start, times)
    states_v = np.array([stage.state_after(start, 3.0, setting, t) for t in times])
    np.testing.assert_allclose(states_v, expected, rtol=0, atol=1e-9)


# Source: scipy.linalg.expm, a general library, on the same node equations.
@settings(deadline=None, max_examples=60)
@given(stages_with_settings(), st.data())
def test_any_legal_stage_against_the_matrix_exponential(case, data):
    stage, setting = case
    start = stage.wiring.share_charge(np.array(data.draw(states(stage))), setting.range_index)
    slope = node_equations(stage, setting, 1.0)
    count = len(start)
    rest = np.array(slope(0.0, np.zeros(count)))
    A = np.zeros((count + 1, count + 1))  # an extra state of 1 carries the source
    for i, unit in enumerate(np.eye(count)):
        A[:count, i] = np.array(slope(0.0, unit)) - rest
    A[:count, count] = rest
    time = data.draw(st.floats(0.01, 5.0)) * stage.time_constant_s(setting)
    expected = (linalg.expm(A * time) @ np.append(start, 1.0))[:count]
    after = stage.state_after(start, 1.0, setting, time)
    np.testing.assert_allclose(after, expected, rtol=0, atol=1e-8)


# Source: scipy.optimize, a general root finder, on the response of a leaking, absorbing stage.
@pytest.mark.parametrize("name", preset_names())
def test_arrival_against_a_general_root_finder(name):
    stage = load_stage(name)
    setting = Setting(len(stage.ranges) - 1, 0.5)
    state = stage.settled_state(1.0, setting)
    end = stage.settled_volts(2.0, setting)

    def left(t):
        cents = 1200 * (end - stage.response(state, 2.0, setting, np.array([t]))[0])
        return float(cents) - 5.0

    arrival = stage.arrival_s(state, 2.0, setting, 5.0)
    assert arrival == pytest.approx(optimize.brentq(left, 0.0, 1e3, xtol=1e-13), rel=1e-7)
    tau = stage.time_constant_s(setting)
    assert arrival > 0.99 * tau * math.log(240)  # absorption can only hold it back
