"""Whatever a file holds, reading and fitting it ends in an answer or in one line."""

from contextlib import suppress

import numpy as np
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from livelag.bench.capture import Capture, read_capture
from livelag.bench.capture_roles import find_roles
from livelag.bench.fit import fit_capture
from livelag.errors import LivelagError

SETTINGS = settings(
    deadline=None, max_examples=60, suppress_health_check=[HealthCheck.function_scoped_fixture]
)
CELLS = st.one_of(
    st.floats(allow_nan=True, allow_infinity=True).map(repr),
    st.integers(-3, 3).map(str),
    st.sampled_from(
        ["", "nan", "s", "V", "Time", "Sample Interval", "1e-3", "0,5", "#", '"1"', "1 ms"]
    ),
    st.text(max_size=3),
)
SHAPES = st.sampled_from([",", ";", "\t", " ", ", "])


def attempt(path):
    with suppress(LivelagError):
        capture = read_capture(path)
        assert capture.volts.shape == (len(capture.channel_names), len(capture.times_s))
        assert np.isfinite(capture.volts).all()
        assert (np.diff(capture.times_s) > 0).all()
        fit_capture("c", find_roles(capture))


@given(st.binary(max_size=400))
@SETTINGS
def test_any_bytes(tmp_path, content):
    path = tmp_path / "c.csv"
    path.write_bytes(content)
    attempt(path)


@given(st.lists(st.lists(CELLS, max_size=4), max_size=40), SHAPES)
@SETTINGS
def test_any_cells(tmp_path, rows, separator):
    path = tmp_path / "c.csv"
    path.write_text(
        "\n".join(separator.join(row) for row in rows), encoding="utf-8", errors="replace"
    )
    attempt(path)


@given(
    st.integers(16, 60).flatmap(
        lambda n: st.tuples(
            *(
                st.lists(st.floats(-1e6, 1e6, allow_subnormal=False), min_size=n, max_size=n)
                for _ in range(3)
            )
        )
    ),
    SHAPES,
)
@SETTINGS
def test_any_numbers(tmp_path, columns, separator):
    path = tmp_path / "c.csv"
    columns = (sorted(columns[0]), *columns[1:])
    rows = (separator.join(map(repr, row)) for row in zip(*columns, strict=True))
    path.write_text("\n".join(rows), encoding="utf-8")
    attempt(path)


@given(
    st.integers(16, 80), st.integers(1, 15), st.floats(1e-3, 1e3), st.floats(-1e3, 1e3),
    st.sampled_from([0.0, 1e-6, 1e-2]),
)  # fmt: skip
@SETTINGS
def test_any_small_glide(samples, at, tau, height, noise):
    t = np.arange(float(samples))
    rng = np.random.default_rng(samples)
    step = np.where(t >= at, height, 0.0)
    glide = step * -np.expm1(-np.maximum(t - at, 0.0) / tau)
    volts = np.array([step, glide]) + noise * rng.standard_normal((2, samples))
    try:
        fit = fit_capture("c", find_roles(Capture("c", t, ("a", "b"), volts)))
    except LivelagError:
        return
    assert np.isfinite(fit.time_constant_s.u95)
    assert fit.time_constant_s.u95 <= 0.25 * fit.time_constant_s.value
