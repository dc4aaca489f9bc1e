"""How long the search for parts takes.

`python -m pytest -o addopts="" tests/speed/test_parts_speed.py` runs these.
"""

import pytest

from livelag.bench.parts_search import find_parts
from livelag.bench.stock import shop
from livelag.bench.wishes import wishes_from
from livelag.circuit.presets import load_stage

BASE = load_stage("two-range-film")


@pytest.mark.parametrize("handover_s", [0.03, 0.07, 0.2])
def test_e24_resistors_common_pots_e6_capacitors_twice(benchmark, handover_s):
    wishes, pool = wishes_from(2e-3, [handover_s], 2.4), shop("E24", "E6")
    result = benchmark(find_parts, wishes, pool, BASE)
    assert result.combinations > 4e8
    assert result.candidates
    assert benchmark.stats.stats.median < 1.0


@pytest.mark.parametrize("times", [(2e-3, [0.03, 0.3], 4.0), (1e-3, [0.02, 1.5], 8.0)])
def test_the_widest_space(benchmark, times):
    wishes, pool = wishes_from(*times), shop("E96", "E12")
    result = benchmark(find_parts, wishes, pool, BASE, 100)
    assert result.combinations > 9e14
    assert benchmark.stats.stats.median < 1.0


def test_wishes_that_nothing_suits(benchmark):
    """The nearest is looked for further and further away."""
    wishes, pool = wishes_from(1.0, [], 1e6), shop("E96", "E12")

    def refused():
        with pytest.raises(ValueError, match="no candidate"):
            find_parts(wishes, pool, BASE)

    benchmark(refused)
    assert benchmark.stats.stats.median < 1.0
