"""Parts against what others say: preferred values of IEC 60063, a stage of common practice."""

import json
from math import log, sqrt

import pytest

from livelag.bench.parts_search import find_parts
from livelag.bench.preferred import E_SERIES, preferred_values
from livelag.bench.stock import POT_OHMS, shop
from livelag.bench.wishes import Wishes
from livelag.circuit.presets import load_stage
from livelag.cli.main import run

# The tables of IEC 60063, digits from memory; the sums and departures below are from the print.
E24 = "10 11 12 13 15 16 18 20 22 24 27 30 33 36 39 43 47 51 56 62 68 75 82 91"
PRINTED = {
    "E3": "10 22 47",
    "E6": "10 15 22 33 47 68",
    "E12": "10 12 15 18 22 27 33 39 47 56 68 82",
    "E24": E24,
    # Three significant digits.
    "E96": """
    100 102 105 107 110 113 115 118 121 124 127 130 133 137 140 143 147 150 154 158 162 165 169 174
    178 182 187 191 196 200 205 210 215 221 226 232 237 243 249 255 261 267 274 280 287 294 301 309
    316 324 332 340 348 357 365 374 383 392 402 412 422 432 442 453 464 475 487 499 511 523 536 549
    562 576 590 604 619 634 649 665 681 698 715 732 750 768 787 806 825 845 866 887 909 931 953 976
    """,
}


@pytest.mark.parametrize("series", PRINTED)
def test_every_digit_of_iec_60063(series):
    printed = PRINTED[series].split()
    assert len(printed) == int(series[1:])
    assert [str(mantissa) for mantissa in E_SERIES[series]] == printed


def test_sums_of_the_printed_tables():
    # Sums of the mantissas of IEC 60063's tables, worked out from the print.
    assert sum(E_SERIES["E24"]) == 901
    assert sum(E_SERIES["E96"]) == 37070


@pytest.mark.parametrize("series", PRINTED)
def test_where_the_series_leave_the_geometric_law(series):
    """IEC 60063: 10^(k/n) rounded, but for eight values of E24 and those that E12 to E3 share."""
    count = len(E_SERIES[series])
    scale = 10.0 if count <= 24 else 100.0
    departures = {
        mantissa
        for k, mantissa in enumerate(E_SERIES[series])
        if mantissa != round(scale * 10.0 ** (k / count))
    }
    if series == "E96":
        assert departures == set()
    else:
        assert departures <= {27, 30, 33, 36, 39, 43, 47, 82}
    if series == "E24":
        assert departures == {27, 30, 33, 36, 39, 43, 47, 82}


def test_values_keep_their_decimals():
    for series, printed in PRINTED.items():
        digits = len(printed.split()[0]) - 1
        kilo = [float(f"{m}e{3 - digits}") for m in printed.split()]
        assert list(preferred_values(series, 1e3, 9.999e3)) == kilo


# Common practice, no source: 2.2 kohm, a 220 kohm pot, 1 uF, and 10 uF added by the switch. Its
# own four times by hand, from (series) C and (series + pot) C with 1 uF and 11 uF.
PRACTICE = {"fast": (2.2e3 * 1e-6, 222.2e3 * 1e-6), "slow": (2.2e3 * 11e-6, 222.2e3 * 11e-6)}
HANDOVER_S = sqrt(PRACTICE["fast"][1] * PRACTICE["slow"][0])
OVERLAP = PRACTICE["fast"][1] / PRACTICE["slow"][0]


@pytest.mark.parametrize("resistors", ["E12", "E24"])  # E96 has no 2.2 kohm
@pytest.mark.parametrize("capacitors", ["E3", "E6", "E12"])
def test_the_stage_of_common_practice_is_found(resistors, capacitors):
    wishes = Wishes((PRACTICE["fast"][0], HANDOVER_S, PRACTICE["slow"][1]), OVERLAP)
    # 2.2 ms to 222 ms and about 24 ms to 2.44 s, as it is usually quoted.
    assert [t for pair in wishes.targets for t in pair] == pytest.approx(
        [2.2e-3, 222e-3, 24e-3, 2.44], rel=0.01
    )
    best = find_parts(wishes, shop(resistors, capacitors), load_stage("two-range-film")).candidates
    assert best[0].connection == "added"
    assert best[0].series[0].resistance_ohms == 2200.0
    assert best[0].pot.resistance_ohms == 220e3
    assert [part.capacitance_f for part in best[0].capacitors] == [1e-6, 10e-6]
    assert best[0].worst_log < 1e-12


def test_the_command_finds_it_too(capsys):
    """From times as a person would type them, three digits each."""
    words = ["parts", "--shortest", "2.2ms", "--handover", "73.3ms", "--longest", "2.44"]
    assert run([*words, "--overlap", "9.18", "--json"]) == 0
    first = json.loads(capsys.readouterr().out)["candidates"][0]
    assert (first["series_ohms"], first["pot_ohms"]) == (2200.0, 220e3)
    assert first["capacitors_f"] == [1e-6, 10e-6]
    assert first["topology"] == "added"
    times = [row[end] for row in first["ranges"] for end in ("shortest_s", "longest_s")]
    assert times == pytest.approx([2.2e-3, 222.2e-3, 24.2e-3, 2.4442], rel=1e-9)
    assert first["worst_error_fraction"] < 0.002


def test_pots_are_of_the_two_families_of_the_trade():
    # Common practice, no source: 1-2-5 with 25 in between, and E3.
    for ohms in POT_OHMS:
        mantissa = round(ohms / 10 ** int(log(ohms * 1.001, 10)), 6)
        assert mantissa in (1.0, 2.0, 2.2, 2.5, 4.7, 5.0)
