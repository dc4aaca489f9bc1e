"""Value codes, pitch and cents against standards."""

import pytest

from livelag import units
from livelag.errors import InputError


# Source: IEC 60062, codes for resistors and capacitors: the letter stands at the decimal point.
@pytest.mark.parametrize(
    ("code", "unit", "value"),
    [
        ("R47", "ohm", 0.47),
        ("4R7", "ohm", 4.7),
        ("470R", "ohm", 470.0),
        ("4K7", "ohm", 4.7e3),
        ("47K", "ohm", 47e3),
        ("4M7", "ohm", 4.7e6),
        ("10p", "farad", 10e-12),
        ("4n7", "farad", 4.7e-9),
        ("1u0", "farad", 1e-6),
        # From memory of the same standard: a micro sign, and p, n, m for any capacitance.
        ("1µ0", "farad", 1e-6),
        ("p33", "farad", 0.33e-12),
        ("2m2", "farad", 2.2e-3),
        ("1G5", "ohm", 1.5e9),
    ],
)
def test_iec_60062_codes(code, unit, value):
    assert units.parse_value(code, unit) == pytest.approx(value, rel=1e-15)


# Source: IEC 60062: a tolerance letter may follow the code. A preset gives the tolerance a key
# of its own, so the letter must be refused, never dropped or taken for part of the value.
@pytest.mark.parametrize("letter", list("FGJKMZ"))
def test_iec_60062_tolerance_letters_are_not_swallowed(letter):
    with pytest.raises(InputError, match="not a value"):
        units.parse_value(f"4K7{letter}", "ohm")


# Source: equal temperament on A4 = 440 Hz (ISO 16), f = 440 x 2^((n - 69)/12), printed to 5 places.
@pytest.mark.parametrize(
    ("note", "hertz"),
    [
        (0, 8.17580),
        (21, 27.5),
        (36, 65.40639),
        (48, 130.81278),
        (60, 261.62557),
        (64, 329.62756),
        (69, 440.0),
        (72, 523.25113),
        (84, 1046.50226),
        (108, 4186.00905),
        (127, 12543.85395),
    ],
)
def test_iso_16_pitches(note, hertz):
    assert units.note_to_hz(note) == pytest.approx(hertz, abs=6e-6)
    # The same pitch by way of a volt-per-octave control voltage.
    volts = units.note_to_volts(note, 36)
    assert units.volts_to_hz(volts, 36) == pytest.approx(hertz, abs=6e-6)
    assert units.volts_to_note(volts, 36) == pytest.approx(note, abs=1e-12)


# Source: MIDI 1.0 note numbers; 60 is middle C, 261.63 Hz. C4 is the common American naming.
def test_midi_note_names():
    assert [units.note_name(n) for n in (21, 60, 61, 69, 108)] == ["A0", "C4", "C#4", "A4", "C8"]


# Source: the definition of the cent (a hundredth of an equal-tempered semitone, Ellis 1885), at
# one volt per octave.
def test_volts_of_a_semitone_and_a_cent():
    assert units.cents_to_volts(100) == pytest.approx(83.3333e-3, abs=5e-8)
    assert units.cents_to_volts(1) == pytest.approx(0.83333e-3, abs=5e-9)
    assert units.volts_to_cents(1.0) == pytest.approx(1200.0)
