import inspect
from collections import Counter

from rich.cells import cell_len

from livelag.live.controls import CONTROLS, ROWS, action_of, help_line, help_rows
from livelag.live.keys import KeyReader

ACTIONS = {
    "pot_down_small",
    "pot_up_small",
    "pot_down_large",
    "pot_up_large",
    "next_range",
    "glide_toggle",
    "next_waveform",
    "level_down",
    "level_up",
    "store_a",
    "store_b",
    "swap",
    "panic",
    "take",
    "mark_shortest",
    "mark_handover",
    "mark_longest",
    "octave_down",
    "octave_up",
    "rest",
    "help",
    "quit",
    *(f"degree_{number}" for number in range(1, 11)),
}


def test_every_action_has_a_key_and_no_key_has_two():
    keys = Counter(key for row in ROWS for key in row.actions)
    assert max(keys.values()) == 1
    assert {control.action for control in CONTROLS.values()} == ACTIONS
    for key, control in CONTROLS.items():
        assert action_of(key) == control.action
        assert control.sentence


def test_keys_are_single_keys_that_the_reader_can_name():
    named = set(inspect.getdoc(inspect.getmodule(KeyReader)).split("``"))
    for key in CONTROLS:
        assert len(key) == 1 or key in named


def test_capitals_count_as_small_letters_and_unknown_keys_do_nothing():
    assert action_of("R") == "next_range"
    assert action_of("<") == "pot_down_large"
    assert action_of("z") is None
    assert action_of("f12") is None


def test_digits_are_the_degrees_of_a_scale():
    assert [action_of(digit) for digit in "1234567890"] == [f"degree_{n}" for n in range(1, 11)]


def test_help_line_fits_and_keeps_what_matters():
    for width in range(16, 220):
        for by_ear in (False, True):
            line = help_line(width, by_ear)
            assert cell_len(line) <= width
            assert "? help" in line
            assert "q quit" in line or width < 16
            assert ("mark" in line) <= by_ear
    at_least = help_line(58)
    for label in ("pot", "range", "glide", "take", "quit"):
        assert label in at_least
    assert "f h s mark" in help_line(78, by_ear=True)
    wide = help_line(200, by_ear=True)
    assert all(f"{row.shown} {row.label}" in wide for row in ROWS if row.urgency)


def test_help_rows_fit_a_small_screen():
    assert all(cell_len(row.sentence) <= 51 and cell_len(row.shown) <= 6 for row in ROWS)
    assert len(list(help_rows(by_ear=True))) == len(ROWS) <= 17
    assert not any(row.by_ear for row in help_rows(by_ear=False))
