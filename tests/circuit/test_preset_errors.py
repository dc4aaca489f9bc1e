"""Presets that are wrong: one line that names the file and the key, whatever the fault."""

import datetime
import re

import pytest
from preset_texts import FULL, KEYS, changed, dotted, refusal

from livelag.circuit.presets import (
    parse_stage,
)

# One line for whatever is wrong


def test_the_full_preset_and_each_optional_key_can_be_left_out():
    required = {
        "title", "time", "time.series", "time.pot", "time.pot.value", "time.series.value",
        "time.pot.taper.rotation", "time.pot.taper.fraction", "capacitor", "range",
        "switch.bleed.value", "input.buffer.headroom.positive", "input.buffer.headroom.negative",
    }  # fmt: skip
    row_required = {"name", "value", "kind", "fraction", "time", "connects"}
    parse_stage(FULL, "my.toml")
    for path in KEYS:
        in_row = any(isinstance(key, int) for key in path)
        needed = path[-1] in row_required if in_row else dotted(path) in required
        if needed:
            message = refusal(changed(path, None))
            assert dotted(path) in message
            assert "missing" in message or "has none" in message or "known: none" in message
        else:
            parse_stage(changed(path, None), "my.toml")


WRONG_TYPES = [True, [1], ["a", "b"], {"stranger": 1}, "*", [{}], datetime.date(1999, 1, 1)]


@pytest.mark.parametrize("path", KEYS, ids=dotted)
def test_a_wrong_type_at_any_key_names_the_file_and_the_key(path):
    text_keys = {"title", "about"}
    for wrong in WRONG_TYPES:
        if isinstance(wrong, str) and (path[-1] in text_keys or path[-1] == "name"):
            continue  # an asterisk is a fine name
        message = refusal(changed(path, wrong))
        # A list of numbers is the right type for a taper table, which is then refused as a whole.
        numbers = wrong == [1] and path[-1] in ("rotation", "fraction")
        assert dotted(path[:-1] if numbers else path) in message, message
    if path[-1] not in text_keys | {"name", "kind", "connects"}:
        return
    assert dotted(path) in refusal(changed(path, 5))


PARTS = [
    (("time", "series", "value"), "time.series: resistance", "time.series.value"),
    (("time", "series"), "time.series: resistance", "time.series"),
    (("time", "pot", "value"), "time.pot: pot value", "time.pot.value"),
    (("capacitor", 0, "value"), "capacitor[1]: capacitor 'small' value", "capacitor[1].value"),
    (
        ("capacitor", 0, "insulation"),
        "capacitor[1]: capacitor 'small' insulation",
        "capacitor[1].insulation",
    ),
    (
        ("capacitor", 0, "absorption", 0, "fraction"),
        "capacitor[1]: capacitor 'small' absorption fraction",
        "capacitor[1].absorption[1].fraction",
    ),
    (
        ("capacitor", 0, "absorption", 0, "time"),
        "capacitor[1]: capacitor 'small' absorption time",
        "capacitor[1].absorption[1].time",
    ),
    (("range", 0, "series"), "range[1].series: resistance", "range[1].series"),
    (("switch", "bleed"), "switch.bleed: resistance", "switch.bleed"),
    (("switch", "bleed", "value"), "switch.bleed: resistance", "switch.bleed.value"),
    (("input", "pull_down"), "input.pull_down: resistance", "input.pull_down"),
    (("output", "series"), "output.series: resistance", "output.series"),
    (("output", "load"), "output.load: resistance", "output.load"),
    (("scale", "volts_per_octave"), "scale: volts_per_octave", "scale.volts_per_octave"),
    (("supply", "positive"), "supply: positive rail", "supply.positive"),
]
NOT_A_PART = [-1, 0, -4.7, "-4.7", "0", float("nan"), float("inf"), float("-inf"), "nan", 10**400]


@pytest.mark.parametrize(("path", "part", "key"), PARTS, ids=[key for *_, key in PARTS])
@pytest.mark.parametrize("value", NOT_A_PART, ids=[repr(v)[:8] for v in NOT_A_PART])
def test_a_part_that_is_not_positive_and_finite_is_refused(path, part, key, value):
    message = refusal(changed(path, value))
    # What is no finite number is refused where it is read, what is none for a part by the part.
    assert message.startswith((f"my.toml: {part} is ", f"my.toml: {key}: "))
    assert re.search("must be a positive number|must be above 0|not a finite|not a value", message)


@pytest.mark.parametrize(
    ("path", "value"),
    [
        (("time", "series", "tolerance"), -0.1),
        (("time", "pot", "tolerance"), 20),
        (("capacitor", 1, "tolerance"), 1.5),
        (("switch", "bleed", "tolerance"), float("nan")),
        (("time", "pot", "end"), "-2"),
        (("time", "pot", "end"), "470k"),
        (("supply", "negative"), "1 V"),
        (("scale", "zero_volt_note"), 128),
        (("scale", "zero_volt_note"), -1),
        (("input", "buffer", "headroom"), -1),
        (("input", "buffer", "offset_limit"), -1),
        (("input", "buffer", "bias_limit"), "-1n"),
        (("input", "buffer", "offset"), float("inf")),
        (("input", "buffer", "bias"), float("nan")),
    ],
)
def test_a_figure_out_of_bounds_is_refused(path, value):
    message = refusal(changed(path, value))
    assert str(path[-1]).split("_")[-1] in message
    assert str(path[0]) in message


@pytest.mark.parametrize(
    ("path", "slip", "meant"),
    [
        (("time", "pot"), "tolerence", "tolerance"),
        (("supply",), "positve", "positive"),
        (("scale",), "volt_per_octave", "volts_per_octave"),
        (("capacitor", 0), "insulaton", "insulation"),
        (("capacitor", 0, "absorption", 0), "times", "time"),
        (("range", 1), "serie", "series"),
        (("input", "buffer"), "ofset", "offset"),
        (("input", "buffer", "headroom"), "positiv", "positive"),
        (("output",), "laod", "load"),
        (("switch",), "blead", "bleed"),
        ((), "suply", "supply"),
    ],
)
def test_an_unknown_key_is_named_with_a_suggestion(path, slip, meant):
    message = refusal(changed((*path, slip), "1"))
    assert f"{dotted((*path, slip))} is not a known key" in message
    assert f"did you mean {meant!r}?" in message


def test_two_capacitors_of_one_name_are_refused():
    twin = '[[capacitor]]\nname = "small"\nvalue = "1u"\nkind = "ideal"\n'
    assert "capacitor.name: ['small', 'large', 'small'] has a name twice" in refusal(FULL + twin)


def test_a_misspelt_required_key_is_pointed_at():
    text = FULL.replace('value = "470k"', 'vaule = "470k"')
    assert "time.pot.value is missing (is 'vaule' a slip for it?)" in refusal(text)


def test_an_unknown_key_unlike_any_lists_the_known_ones():
    message = refusal(changed(("supply", "colour"), "red"))
    assert message.endswith("supply.colour is not a known key; known: positive, negative")


def test_a_key_of_two_lines_is_still_named_in_one():
    refusal('"a\\nb" = 1\n' + FULL)


def test_a_range_that_connects_an_unknown_capacitor_is_named():
    message = refusal(changed(("range", 1, "connects"), ["small", "lrage"]))
    assert "range[2].connects: unknown capacitor 'lrage'; did you mean 'large'?" in message


@pytest.mark.parametrize(
    ("path", "value", "words"),
    [
        (("range",), [], "range: the stage has none"),
        (("capacitor",), [], "range[1].connects: unknown capacitor 'small'; known: none"),
        (("range", 0, "connects"), [], "range 'fast' connects nothing"),
        (("range", 0, "connects"), ["small", "small"], "has a name twice"),
        (("range", 0, "name"), "slow", "range.name"),
        (("range", 0, "name"), " ", "range[1].name"),
        (("range", 0, "name"), "a\nb", "range[1]: range name"),
        (("capacitor", 0, "name"), "a\nb", "capacitor[1]: capacitor name is 'a\\nb'"),
        (("title",), "", "title is ''; it must be text, and not blank"),
        (("capacitor", 0, "kind"), "polester", "capacitor[1].kind: unknown capacitor kind"),
        (("output", "buffer"), "jfet", "output.buffer: unknown buffer class"),
        (("output", "buffer"), {"headroom": 30}, "output.buffer: headroom leaves no swing"),
        (("time", "pot", "taper"), "A", "time.pot.taper: unknown taper 'A'"),
        (("time", "pot", "taper"), {"law": "linnear"}, "taper.law: unknown taper"),
        (("time", "pot", "taper"), {"law": "linear", "middle": 0.2}, "taper.middle is not"),
        (("time", "pot", "taper"), {"law": "logarithmic", "middle": 0.6}, "taper middle is 0.6"),
        (("time", "pot", "taper"), {"law": "logarithmic", "rotation": [0, 1]}, "taper.rotation"),
    ],
)  # fmt: skip
def test_what_contradicts_itself_is_refused(path, value, words):
    assert words in refusal(changed(path, value))


@pytest.mark.parametrize(
    ("rotation", "fraction"),
    [
        ([], []),
        ([0], [0]),
        ([0, 1], [0, 0.5, 1]),
        ([0, 0.5, 0.4, 1], [0, 0.2, 0.4, 1]),
        ([0, 0.5, 0.5, 1], [0, 0.2, 0.4, 1]),
        ([0, 0.5, 1], [0, 1.2, 1]),
        ([0, 0.5, 1], [0, float("nan"), 1]),
        ([0.1, 1], [0, 1]),
        ([0, 1], [0.2, 1]),
        ([0, "half", 1], [0, 0.5, 1]),
        ([0, True, 1], [0, 0.5, 1]),
    ],
)
def test_a_bad_taper_table_is_refused(rotation, fraction):
    text = changed(("time", "pot", "taper"), {"rotation": rotation, "fraction": fraction})
    assert "time.pot.taper" in refusal(text)


@pytest.mark.parametrize(
    "text",
    [
        "title =",
        "= 1",
        "[[[",
        "title = 'a'\ntitle = 'b'",
        "\x00",
        "PK\x03\x04",
        "a = " + "[" * 5000,
    ],
)
def test_what_is_not_toml_is_refused(text):
    assert re.search("not TOML|not a preset", refusal(text))


def test_a_whole_number_of_thousands_of_digits_is_refused():
    refusal(FULL.replace('"330n"', "1" * 5000))
