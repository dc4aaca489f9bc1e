"""How long a megasample capture takes to read and to fit.

`python -m pytest -o addopts="" tests/speed/test_fit_speed.py` runs these.
"""

import numpy as np
import pytest
from bench.capture_maker import Circuit, Generator, Scope, record

from livelag.bench.capture import read_capture
from livelag.bench.capture_roles import find_roles
from livelag.bench.fit import fit_capture

ROWS = 1_000_000


@pytest.fixture(scope="module")
def megasample(tmp_path_factory):
    """A million rows of three columns, 23 MB."""
    scope = Scope(ROWS, 1e-6, 0.0)
    columns = record(Circuit(), Generator((0.0, 4.0, 0.0), (0.1, 0.6)), scope)
    path = tmp_path_factory.mktemp("speed") / "megasample.csv"
    with path.open("w", encoding="utf-8") as file:
        file.write("Time,CH1,CH2\ns,V,V\n")
        file.writelines(f"{t:.6e},{a:.2f},{b:.2f}\n" for t, a, b in zip(*columns, strict=True))
    return path


def test_reading(benchmark, megasample):
    capture = benchmark.pedantic(read_capture, (megasample,), rounds=3)
    assert capture.volts.shape == (2, ROWS)
    assert benchmark.stats.stats.min < 2.0


def test_fitting(benchmark, megasample):
    capture = read_capture(megasample)
    fit = benchmark.pedantic(lambda: fit_capture("c", find_roles(capture)), rounds=3)
    assert abs(fit.time_constant_s.value - Circuit().time_constant_s) < fit.time_constant_s.u95 * 2
    assert benchmark.stats.stats.min < 3.0
    assert np.isfinite(fit.gain.u95)
