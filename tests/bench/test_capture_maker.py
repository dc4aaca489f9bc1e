"""The simulation that makes captures for the other tests is right itself."""

import numpy as np
import pytest
from bench.capture_maker import Circuit, Generator, true_output
from scipy.integrate import solve_ivp


@pytest.mark.parametrize("absorption", [(), ((0.06, 0.3), (0.04, 5.0))])
def test_closed_form_agrees_with_an_ode_solver(absorption):
    circuit = Circuit(
        100e3, 2.2e-6, absorption, insulation_ohms=80e6, bias_a=40e-9, offset_in_v=3e-3,
        offset_out_v=-2e-3, divider=0.99,
    )  # fmt: skip
    generator = Generator((1.0, 3.0, -1.0), (0.1, 0.9), rise_s=10e-3)
    t = np.linspace(0.0, 2.0, 201)
    R, C = circuit.resistance_ohms, circuit.capacitance_f

    def slope(at, x):
        u = generator.volts(np.array([at]))[0] + 3e-3
        v, soaked = x[0], x[1:]
        currents = [f * C / tk * (v - w) for (f, tk), w in zip(absorption, soaked, strict=True)]
        dv = ((u - v) / R - v / 80e6 - 40e-9 - sum(currents)) / C
        return [dv, *((v - w) / tk for (_, tk), w in zip(absorption, soaked, strict=True))]

    rest = (1.003 - 40e-9 * R) / (1 + R / 80e6)
    solved = solve_ivp(
        slope, (0, 2), [rest] * (1 + len(absorption)), "DOP853", t, rtol=1e-11, atol=1e-12,
        max_step=5e-3,
    ).y[0]  # fmt: skip
    assert np.abs(0.99 * (solved - 2e-3) - true_output(circuit, generator, t)).max() < 1e-8
