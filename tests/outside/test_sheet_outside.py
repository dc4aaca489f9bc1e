"""The bench sheet against the circuit integrated numerically with scipy.integrate.solve_ivp.

The differential equations, the corners and the test signals are written out here from the parts,
none of them taken from the sheet but the frequencies and levels that it tells the builder to set.
"""

import math
from itertools import product

import numpy as np
import pytest
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

from livelag.bench.sheet import bench_sheet
from livelag.circuit.presets import load_stage

# kind -> least insulation time in ohm farad; data sheets (see livelag.circuit.kinds)
LEAST_INSULATION_S = {"polyester": 3e3, "polypropylene": 3e4, "bipolar electrolytic": 33.0}
# kind -> (share of the capacitance, seconds) of each absorption branch, as above
ABSORPTION = {
    "polyester": [(0.00225, 1.0)],
    "polypropylene": [(0.00075, 1.0)],
    "bipolar electrolytic": [(0.06, 0.3), (0.04, 5.0)],
}


class Circuit:
    """One capacitor group behind one resistance, with leakage and absorption."""

    def __init__(self, ohms, parts, bias_a=0.0):
        # parts: (farads, kind, leakage in siemens)
        self.R, self.C = ohms, sum(farads for farads, _, _ in parts)
        self.G = sum(leak for _, _, leak in parts)
        branches = [(f * share, s) for f, kind, _ in parts for share, s in ABSORPTION[kind]]
        self.Ck = np.array([c for c, _ in branches])
        self.Rk = np.array([s for _, s in branches]) / self.Ck
        self.bias_a = bias_a

    def slope(self, drive):
        def dy(t, y):
            v, w = y[0], y[1:]
            into = (v - w) / self.Rk
            dv = ((drive(t) - v) / self.R - self.G * v - self.bias_a - into.sum()) / self.C
            return np.concatenate([[dv], into / self.Ck])

        return dy

    def rest(self, volts):
        return np.full(1 + len(self.Ck), (volts - self.bias_a * self.R) / (1 + self.G * self.R))

    def step(self, start, to_v, seconds):
        found = solve_ivp(
            self.slope(lambda t: to_v), (0.0, seconds), start, method="LSODA", rtol=1e-10,
            atol=1e-12, dense_output=True,
        )  # fmt: skip
        assert found.success
        return found.sol


def two_range_bipolar(slow, theta, ohms_sign, farads_sign, leaky):
    """The shipped stage of that name, part by part: 1.5 k 5 %, 220 k 20 %, 1 u 10 %, 15 u 20 %."""
    track, end = 220e3 * (1 + 0.2 * ohms_sign), 3.0 * (1 + 0.2 * ohms_sign)
    ohms = 1500.0 * (1 + 0.05 * ohms_sign) + end + (track - end) * theta
    parts = [(1e-6, "polyester", 0.1)] + ([(15e-6, "bipolar electrolytic", 0.2)] if slow else [])
    return Circuit(
        ohms,
        [
            (f * (1 + tol * farads_sign), kind, leaky * f / LEAST_INSULATION_S[kind])
            for f, kind, tol in parts
        ],
    )


def divider(sign):
    load, before = 100e3 * (1 + 0.01 * sign), 220.0 * (1 - 0.01 * sign)
    return load / (load + before)


OFFSETS = (10e-3, 10e-3)  # JFET-input: at most 10 mV each; 400 pA (data sheets, as above)
BIAS = 400e-12


@pytest.fixture(scope="module")
def sheet():
    return bench_sheet(load_stage("two-range-bipolar"))


@pytest.mark.parametrize("row", [0, 2, 5, 7, 9])
def test_limits_of_the_readings_are_those_of_every_corner_integrated(sheet, row):
    found = sheet.rows[row]
    slow, theta = row >= 5, found.limits.rotation
    tau = two_range_bipolar(slow, theta, 0, 0, 0)
    tau = tau.R * tau.C
    after, settled, rises = [], [], []
    for ohms, farads, leaky, load in product((-1, 1), (-1, 1), (0, 1), (-1, 1)):
        circuit = two_range_bipolar(slow, theta, ohms, farads, leaky)
        sol = circuit.step(circuit.rest(1.0), 5.0, 0.5 / found.square_hz)
        gain = 1 / (1 + circuit.G * circuit.R)
        reach = gain * (OFFSETS[0] + BIAS * circuit.R) + OFFSETS[1]
        for sign in (-1, 1):
            after.append(divider(load) * (sol(tau)[0] + sign * reach))
            settled.append(divider(load) * (sol(0.5 / found.square_hz)[0] + sign * reach))
        if load == 1:
            rises.append(rise(circuit))
    for limits, values in (
        (found.after_v, after), (found.settled_v, settled), (found.limits.rise_s, rises),
    ):  # fmt: skip
        assert (limits.low, limits.high) == pytest.approx((min(values), max(values)), rel=1e-6)


def rise(circuit):
    """10-90 % of where it settles, found by bracketing."""
    seconds = 60.0 * circuit.R * circuit.C + 60.0
    sol = circuit.step(circuit.rest(0.0), 1.0, seconds)
    settled = 1 / (1 + circuit.G * circuit.R)
    low, high = (
        brentq(lambda t, share=share: sol(t)[0] - share * settled, 0.0, seconds, xtol=1e-13)
        for share in (0.1, 0.9)
    )
    return high - low


@pytest.mark.parametrize("index", [0, 1])
def test_a_fast_square_wave_run_until_it_repeats(sheet, index):
    signals = sheet.signals[index]
    stage = sheet.stage
    parts = [(1e-6, "polyester", 1e-6 / 1e4)]  # typical insulation: 10,000 ohm farad
    if index:
        parts.append((15e-6, "bipolar electrolytic", 15e-6 / 330.0))
    circuit = Circuit(1500.0 + 220e3, parts, stage.output_buffer.bias_a)
    half_s = 0.5 / signals.hurried_hz
    offset_in, offset_out = stage.input_buffer.offset_v, stage.output_buffer.offset_v
    # Started near its mean, it is run on until the slowest branch has forgotten.
    state = circuit.rest(3.0 + offset_in)
    for _ in range(math.ceil((12.0 * 5.0 + 12.0 * circuit.R * circuit.C) / (2 * half_s))):
        state = circuit.step(state, 5.0 + offset_in, half_s)(half_s)
        crest = state[0]
        state = circuit.step(state, 1.0 + offset_in, half_s)(half_s)
    for found, volts in ((signals.crest_v, crest), (signals.trough_v, state[0])):
        assert found.nominal == pytest.approx(divider(0) * (volts + offset_out), abs=1e-6)


@pytest.mark.parametrize("index", [0, 1])
def test_a_staircase_integrated_stair_by_stair(sheet, index):
    signals = sheet.signals[index]
    for sign, leaky, pick in ((-1, 0, max), (1, 1, min)):
        circuit = two_range_bipolar(bool(index), 1.0, sign, sign, leaky)
        state = circuit.rest(1.0)
        for stair, found in zip((1.0, 2.0, 3.0, 4.0, 5.0), signals.stairs, strict=True):
            state = circuit.step(state, stair, signals.stair_s)(signals.stair_s)
            gain = 1 / (1 + circuit.G * circuit.R)
            reach = gain * (OFFSETS[0] + BIAS * circuit.R) + OFFSETS[1]
            bounds = [divider(-sign) * (state[0] + reach), divider(-sign) * (state[0] - reach)]
            # The quickest tight build is the highest, the slowest leaky one the lowest.
            limit = found.high if pick is max else found.low
            assert limit == pytest.approx(pick(bounds), abs=2e-4)
