"""Conversions: round trips and refusals. Published tables are checked in tests/outside."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from livelag import units
from livelag.errors import InputError


@pytest.mark.parametrize(
    ("text", "unit", "value"),
    [
        ("4k7", "ohm", 4700.0),
        ("4.7k", "ohm", 4700.0),
        ("4K7", "ohm", 4700.0),
        ("470n", "farad", 470e-9),
        ("2M2", "ohm", 2.2e6),
        ("1u", "farad", 1e-6),
        ("1µ", "farad", 1e-6),
        ("1μ", "farad", 1e-6),
        ("4u7", "farad", 4.7e-6),
        ("0R47", "ohm", 0.47),
        ("R47", "ohm", 0.47),
        ("470R", "ohm", 470.0),
        ("470 ohm", "ohm", 470.0),
        ("2.2kΩ", "ohm", 2200.0),
        ("12 V", "volt", 12.0),
        ("-12 V", "volt", -12.0),
        ("65p", "ampere", 65e-12),
        ("65 pA", "ampere", 65e-12),
        ("3m", "volt", 3e-3),
        ("1e-3", "", 1e-3),
        ("100 ms", "second", 0.1),
        (330, "ohm", 330.0),
        (0.5, "", 0.5),
    ],
)
def test_part_values_read(text, unit, value):
    assert units.parse_value(text, unit) == value


@pytest.mark.parametrize(
    ("text", "unit"),
    [
        ("4,7k", "ohm"),
        ("4K7J", "ohm"),
        ("4k7k", "ohm"),
        ("L50", "ohm"),
        ("470R", "farad"),
        ("1F", "ohm"),
        ("nan", "ohm"),
        ("inf", "ohm"),
        ("", "ohm"),
        ("k", "ohm"),
        ("ten", "ohm"),
        ("12 V", "ohm"),
        (True, "ohm"),
        (None, "ohm"),
        (math.nan, "ohm"),
    ],
)
def test_what_is_not_a_value_is_refused_and_quoted(text, unit):
    with pytest.raises(InputError) as caught:
        units.parse_value(text, unit, where="p.toml: time.series")
    assert "p.toml: time.series" in str(caught.value)
    assert repr(text) in str(caught.value)
    assert "\n" not in str(caught.value)


@given(st.floats(1e-12, 1e9), st.sampled_from(["ohm", "farad"]))
def test_a_written_value_reads_back(number, unit):
    symbol = {"ohm": "Ω", "farad": "F"}[unit]
    text = units.format_value(number, symbol, digits=12)
    assert units.parse_value(text, unit) == pytest.approx(number, rel=1e-11)


@given(st.floats(-10, 10), st.floats(0, 127), st.sampled_from([1.0, 1.2, 0.26]))
def test_volts_and_notes_are_inverse(volts, zero, scale):
    note = units.volts_to_note(volts, zero, scale)
    assert units.note_to_volts(note, zero, scale) == pytest.approx(volts, abs=1e-12)
    hertz = units.volts_to_hz(volts, zero, scale)
    assert hertz == pytest.approx(units.note_to_hz(note), rel=1e-12)


def test_a_semitone_and_a_cent_in_volts():
    assert units.note_to_volts(37.0, 36.0) == pytest.approx(0.0833333, abs=1e-7)
    assert units.cents_to_volts(1.0) == pytest.approx(0.000833333, abs=1e-9)


@given(st.floats(-120, 20))
def test_levels_are_inverse(level):
    assert units.amplitude_to_dbfs(units.dbfs_to_amplitude(level)) == pytest.approx(level, abs=1e-9)


def test_note_names():
    assert [units.note_name(n) for n in (21, 60, 69, 108)] == ["A0", "C4", "A4", "C8"]
