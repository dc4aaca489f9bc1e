"""The builder's desk against general libraries and published figures."""

import math
from dataclasses import replace

import numpy as np
import pytest
from scipy import stats
from scipy.integrate import quad, solve_ivp
from scipy.optimize import brentq

from livelag.bench.arrival import arrivals
from livelag.bench.ranges import rise_s
from livelag.bench.spread import spread
from livelag.bench.timeline import lay_out
from livelag.bench.tuning import Compass, tuning_at
from livelag.circuit.parts import Buffer, Capacitor, Pot, Resistor
from livelag.circuit.presets import load_stage
from livelag.circuit.stage import GlideStage, Range, Setting
from livelag.notes.phrases import phrase


def lone(resistance_ohms, capacitor, **fields):
    return GlideStage(
        title="lone",
        capacitors=(capacitor,),
        ranges=(Range("all", (capacitor.name,)),),
        pot=Pot(resistance_ohms / 2, tolerance=0.0),
        series=Resistor(resistance_ohms / 2, 0.0),
        **fields,
    )


# Arrival and rise, integrated numerically from the circuit's differential equations with
# scipy.integrate.solve_ivp and found with scipy.optimize.brentq


def derivative(stage, setting, key_volts):
    """C dv/dt and C_k dw_k/dt of a stage whose capacitors are all connected."""
    R = stage.resistance_ohms(setting)
    C = sum(c.capacitance_f for c in stage.capacitors)
    G = sum(c.leakage_siemens for c in stage.capacitors)
    branches = [
        (b.fraction * c.capacitance_f, b.time_s) for c in stage.capacitors for b in c.branches
    ]
    Ck = np.array([capacitance for capacitance, _ in branches])
    Rk = np.array([time_s for _, time_s in branches]) / Ck
    u = key_volts + stage.input_buffer.offset_v
    bias = stage.output_buffer.bias_a

    def slope(t, y):
        v, w = y[0], y[1:]
        currents = (v - w) / Rk
        dv = ((u - v) / R - G * v - bias - currents.sum()) / C
        return np.concatenate([[dv], currents / Ck])

    return slope, (u - bias * R) / (1 + G * R)


def integrate(slope, start, seconds):
    return solve_ivp(
        slope, (0.0, seconds), start, method="LSODA", rtol=1e-11, atol=1e-13, dense_output=True
    ).sol


def last_outside(sol, settled, tolerance_v, seconds):
    """When |v - settled| is last at the tolerance, by bracketing on a fine grid and brentq."""
    times = np.concatenate([[0.0], np.geomspace(1e-6, seconds, 4000)])

    def excess(t):
        return abs(sol(t)[0] - settled) - tolerance_v

    outside = [excess(t) > 0 for t in times]
    if not any(outside):
        return 0.0
    last = max(n for n, out in enumerate(outside) if out)
    if last == len(times) - 1:
        return math.inf
    return brentq(excess, times[last], times[last + 1], xtol=1e-13, rtol=1e-13)


@pytest.mark.parametrize("rotation", [0.0, 0.1, 0.6])
def test_arrival_over_a_phrase_with_absorption_and_leakage_on(rotation):
    stage = load_stage("two-range-bipolar")
    setting = Setting(1, rotation)
    assert set(stage.ranges[1].connects) == {c.name for c in stage.capacitors}
    assert sum(len(c.branches) for c in stage.capacitors) >= 3
    song = phrase("procession")
    timeline = lay_out(stage, song.messages, song.duration_s, 1)
    fared = arrivals(stage, timeline, rotation)
    slope, settled = derivative(stage, setting, timeline.first_key_volts)
    y = np.full(1 + sum(len(c.branches) for c in stage.capacitors), settled)
    tolerance_v = 5 / 1200 / stage.divider
    checked = 0
    for stretch in timeline.stretches:
        if stretch.duration_s == 0.0:
            continue
        slope, settled = derivative(stage, setting, stretch.key_volts)
        sol = integrate(slope, y, stretch.duration_s)
        y = sol(stretch.duration_s)
        if stretch.note is None:
            continue
        note = fared[stretch.note]
        off = 1200 * stage.divider * (y[0] - settled)
        assert note.residual_cents == pytest.approx(off, abs=1e-5)
        outside = last_outside(sol, settled, tolerance_v, stretch.duration_s)
        assert note.arrives == math.isfinite(outside)
        if note.arrives:
            assert note.arrival_s == pytest.approx(outside, rel=1e-6, abs=1e-9)
            checked += 1
    assert len(fared) == song.note_count
    assert checked > (20 if rotation == 0.0 else 0)


@pytest.mark.parametrize("rotation", [0.0, 0.5, 1.0])
def test_octave_arrival_and_rise_with_absorption_and_leakage_on(rotation):
    stage = load_stage("two-range-bipolar")
    setting = Setting(1, rotation)
    slope, low = derivative(stage, setting, 0.0)
    start = np.full(1 + sum(len(c.branches) for c in stage.capacitors), low)
    slope, settled = derivative(stage, setting, 1.0)
    sol = integrate(slope, start, 60.0)
    outside = last_outside(sol, settled, 5 / 1200 / stage.divider, 60.0)
    assert stage.octave_arrival_s(setting) == pytest.approx(outside, rel=1e-6)
    passed = [
        brentq(
            lambda t, part=part: (sol(t)[0] - low) / (settled - low) - part, 0.0, 60.0, xtol=1e-12
        )
        for part in (0.1, 0.9)
    ]
    assert rise_s(stage, setting) == pytest.approx(passed[1] - passed[0], rel=1e-6)


def test_rise_of_a_lone_rc_is_the_handbooks():
    # 10-90 % rise = ln 9 tau = 2.197225 tau: in every handbook of circuits.
    stage = lone(1e6, Capacitor("c", 1e-6))
    assert rise_s(stage, Setting(0, 1.0)) == pytest.approx(2.197225, abs=1e-6)


# Tuning figures


def test_a_hundred_nanoamperes_through_a_megohm_are_120_cents():
    # Makers' tables of bipolar-input op-amps give such currents; the product is computed.
    buffer = replace(Buffer.of_class("ideal"), name="custom", bias_a=100e-9, bias_limit_a=100e-9)
    stage = lone(1e6, Capacitor("c", 1e-6), output_buffer=buffer)
    row = tuning_at(stage, Setting(0, 1.0), Compass(36, 96))
    assert row.offset_cents == pytest.approx(-120.0, rel=1e-9)
    assert row.limits.causes["bias_current"] == pytest.approx(120.0, rel=1e-9)


@pytest.mark.parametrize(
    ("kind", "cents"), [("polyester", 0.6), ("polypropylene", 0.06), ("x7r", 6.0)]
)
def test_leakage_of_a_microfarad_behind_a_megohm_at_five_volts(kind, cents):
    # From insulation 10,000, 100,000 and 1000 Mohm uF (makers' tables): computed.
    stage = lone(1e6, Capacitor("c", 1e-6, kind))
    row = tuning_at(stage, Setting(0, 1.0), Compass(36, 96))
    assert 5 * row.scale_cents_per_octave == pytest.approx(-cents, rel=2e-3)
    assert row.worth_cents["insulation"] == pytest.approx(cents, rel=2e-3)


def test_three_microamperes_through_a_megohm_are_3600_cents():
    # The limit of a small electrolytic's leakage, I = 3 uA (makers' tables): computed.
    stage = lone(1e6, Capacitor("c", 1e-6))
    leaky = replace(stage, output_buffer=replace(stage.output_buffer, name="custom", bias_a=3e-6))
    assert tuning_at(leaky, Setting(0, 1.0), Compass(36, 96)).offset_cents == pytest.approx(-3600)


# Spread, against scipy.stats for the product of two uniform tolerances


@pytest.mark.parametrize(("first", "second"), [(0.05, 0.1), (0.2, 0.2), (0.01, 0.2)])
def test_quantiles_of_a_product_of_two_uniform_tolerances(first, second):
    stage = GlideStage(
        title="product",
        capacitors=(Capacitor("c", 1e-6, tolerance=second),),
        ranges=(Range("all", ("c",)),),
        pot=Pot(1e3, tolerance=0.0, end_ohms=0.0),
        series=Resistor(1e6, first),
    )
    builds = 400_000
    row = spread(stage, builds, 11).of("all", "shortest")
    x = stats.uniform(1 - first, 2 * first)
    y = stats.uniform(1 - second, 2 * second)

    def below(product):
        """P(x y <= product), by conditioning on x."""
        bends = [product / (1 - second), product / (1 + second)]
        inside = [point for point in bends if abs(point - 1) < first] or None
        return quad(lambda v: x.pdf(v) * y.cdf(product / v), 1 - first, 1 + first, points=inside)[0]

    low, high = (1 - first) * (1 - second), (1 + first) * (1 + second)
    for share, found in zip((0.025, 0.5, 0.975), row.quantiles, strict=True):
        exact = brentq(lambda q, share=share: below(q) - share, low, high)
        density = (below(exact + 1e-5) - below(exact - 1e-5)) / 2e-5
        error = math.sqrt(share * (1 - share) / builds) / density
        assert found == pytest.approx(exact, abs=4 * error)
        assert error < 1e-3


def test_variance_shares_are_those_of_the_linearisation():
    # ln tau = ln(R_s + R_p) + ln(C_1 + C_2): sensitivities are the shares of each sum (calculus).
    stage = GlideStage(
        title="shares",
        capacitors=(Capacitor("a", 1e-6, tolerance=0.02), Capacitor("b", 3e-6, tolerance=0.01)),
        ranges=(Range("all", ("a", "b")),),
        pot=Pot(8e3, tolerance=0.03),
        series=Resistor(2e3, 0.05),
    )
    row = spread(stage, 400_000, 3).of("all", "longest")
    terms = {
        "pot": 0.8 * 0.03,
        "series resistor": 0.2 * 0.05,
        "capacitor 'a'": 0.25 * 0.02,
        "capacitor 'b'": 0.75 * 0.01,
    }
    total = sum(term**2 for term in terms.values())
    for part, term in terms.items():
        assert row.linear_blame[part] == pytest.approx(term**2 / total, rel=1e-6)
        assert row.blame[part] == pytest.approx(term**2 / total, abs=0.005)
    assert sum(row.blame.values()) == pytest.approx(1.0, abs=0.01)
