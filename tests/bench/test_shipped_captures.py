"""The captures in tests/captures are what the simulation makes, and fits find their truth."""

from pathlib import Path

import numpy as np
import pytest
from bench import capture_maker as maker

from livelag.bench.capture import read_capture
from livelag.bench.capture_roles import find_roles
from livelag.bench.fit import fit_capture

FOLDER = Path(__file__).parent.parent / "captures"


def test_they_are_made_by_the_simulation(tmp_path):
    maker.write_shipped(tmp_path)
    assert {path.name for path in FOLDER.iterdir()} == set(maker.SHIPPED)
    for name in maker.SHIPPED:
        shipped, made = (read_capture(folder / name) for folder in (FOLDER, tmp_path))
        np.testing.assert_allclose(shipped.times_s, made.times_s)
        # A value half-way between two steps of the converter may round otherwise elsewhere.
        off = np.abs(shipped.volts - made.volts)
        assert off.max() < 0.041
        assert np.mean(off > 0.001) < 0.005


@pytest.mark.parametrize("name", maker.SHIPPED)
def test_their_time_constant_is_found(name):
    large, rotation, _ = maker.SHIPPED[name]
    resistance = maker.BUILT_SERIES_OHMS + maker.BUILT_POT_OHMS * rotation
    true = resistance * (maker.BUILT_SMALL_F + large * maker.BUILT_LARGE_F)
    capture = read_capture(FOLDER / name)
    found = fit_capture(name, find_roles(capture)).time_constant_s
    assert abs(found.value - true) < 1.5 * found.u95
    assert found.u95 < 0.02 * true
