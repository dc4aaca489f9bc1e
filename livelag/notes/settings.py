"""How a player is set up, and the MIDI controllers that already mean something to it."""

from __future__ import annotations

import math
from dataclasses import dataclass
from enum import IntEnum

from livelag.errors import InputError, UnknownNameError

PRIORITIES = ("last", "low", "high")
GLIDES = ("always", "legato only")


class Controller(IntEnum):
    """Controllers with a fixed meaning for one voice's pitch and gate (MIDI 1.0)."""

    DATA_ENTRY = 6
    DATA_ENTRY_FINE = 38
    HOLD_PEDAL = 64
    PORTAMENTO_SWITCH = 65
    PORTAMENTO_CONTROL = 84
    NON_REGISTERED_PARAMETER_FINE = 98
    NON_REGISTERED_PARAMETER = 99
    REGISTERED_PARAMETER_FINE = 100
    REGISTERED_PARAMETER = 101
    ALL_SOUND_OFF = 120
    RESET_ALL_CONTROLLERS = 121
    LOCAL_CONTROL = 122
    ALL_NOTES_OFF = 123
    OMNI_OFF = 124
    OMNI_ON = 125
    MONO_ON = 126
    POLY_ON = 127


@dataclass(frozen=True, slots=True)
class PlayerSettings:
    """How keys become volts.

    Attributes:
        volts_per_octave: scale of the key volts, more than 0.
        zero_volt_note: MIDI note at 0 V, 0 to 127, fractions allowed.
        priority: which of the keys that are down sounds: ``last``, ``low`` or ``high``.
        retrigger: whether each key that begins to sound restarts the level, even out of a
            held one; otherwise such a key is played legato.
        glide: ``always``, or ``legato only``: only into keys pressed while another one sounds.
        pot_controller: controller that turns the time pot. If it is below 32, its fine half is
            32 above it. 5 is portamento time.
        range_controller: controller that moves the range switch.
        heed_portamento_switch: whether 65 (and 121, which turns it off) can bypass the glide.

    Raises:
        UnknownNameError: if a priority or glide does not exist.
        InputError: if a number is out of range or a controller already has another meaning.
    """

    volts_per_octave: float = 1.0
    zero_volt_note: float = 36.0
    priority: str = "last"
    retrigger: bool = False
    glide: str = "always"
    pot_controller: int = 5
    range_controller: int = 80  # MIDI 1.0: 80 to 83 are general purpose, one byte each
    heed_portamento_switch: bool = True

    def __post_init__(self) -> None:
        if not (math.isfinite(self.volts_per_octave) and self.volts_per_octave > 0.0):
            raise InputError(f"volts_per_octave is {self.volts_per_octave}; it must be more than 0")
        if not 0.0 <= self.zero_volt_note <= 127.0:
            raise InputError(f"zero_volt_note is {self.zero_volt_note}; it must be 0 to 127")
        if self.priority not in PRIORITIES:
            raise UnknownNameError("priority", self.priority, PRIORITIES)
        if self.glide not in GLIDES:
            raise UnknownNameError("glide", self.glide, GLIDES)
        self._check_controllers()

    @property
    def pot_fine_controller(self) -> int | None:
        """Controller of the pot's fine half; None if the pot's controller has no such half."""
        return self.pot_controller + 32 if self.pot_controller < 32 else None

    def _check_controllers(self) -> None:
        taken = {int(row): row.name.lower().replace("_", " ") for row in Controller}
        for field in ("pot_controller", "range_controller"):
            number = getattr(self, field)
            if isinstance(number, bool) or not isinstance(number, int) or not 0 <= number <= 127:
                raise InputError(f"{field} is {number!r}; it must be a controller from 0 to 127")
            if number in taken:
                raise InputError(
                    f"{field} is {number}, which means {taken[number]}; choose another"
                )
            taken[number] = field
            if field == "pot_controller" and self.pot_fine_controller is not None:
                taken[self.pot_fine_controller] = f"the fine half of pot_controller {number}"
