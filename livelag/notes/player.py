"""The player: MIDI messages in, key volts and gate out.

One voice. Keys that are down compete by priority; with none down the hold pedal keeps the last
one sounding; after that its volts stay, as they do on a keyboard with a sample-and-hold.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

from livelag.notes.settings import Controller, PlayerSettings
from livelag.units import NOTES_PER_OCTAVE, note_to_volts

if TYPE_CHECKING:
    from mido import Message

__all__ = ["Moment", "Player", "PlayerSettings"]

BEND_CENTRE_STEPS = 8192  # MIDI 1.0: bend is 14 bits, 8192 in the middle
DEFAULT_BEND_SEMITONES = 2.0  # MIDI 1.0, RPN 0
FULL_TURN = 127 * 128  # a coarse value of 127 alone turns the pot all the way
NULL_PARAMETER = (127, 127)  # MIDI 1.0: no registered parameter is selected
BEND_RANGE_PARAMETER = (0, 0)  # MIDI 1.0: RPN 0, coarse in semitones, fine in cents


@dataclass(frozen=True, slots=True)
class Moment:
    """All that the sound needs to know from one message on.

    The first five hold until the next moment; the one-shots belong to the one message only.

    Attributes:
        key_volts: control voltage of the key with the bend, V. It stays after release.
        gate: whether a key sounds.
        velocity: how hard the sounding key, or else the last one, was struck, 1 to 127.
        bypassed: whether this note goes without glide.
        note: the sounding key, None while the gate is off.
        jump_volts: one-shot: the glide starts from here, V.
        retrigger: one-shot: the level restarts.
        rotation: one-shot: the pot was turned to here, 0 to 1.
        range_value: one-shot: the range controller's value, 0 to 127.
    """

    key_volts: float
    gate: bool
    velocity: int
    bypassed: bool
    note: int | None
    jump_volts: float | None = None
    retrigger: bool = False
    rotation: float | None = None
    range_value: int | None = None


class Player:
    """Turns messages into moments, one after the other, on whatever channel they come.

    The hold pedal (64) keeps the gate and the last key while no key is down. Keys that are
    down come before what the pedal holds, so a trill over a held key works with the pedal too.
    Portamento (65) is on until a message says otherwise; a fine pot value before any coarse
    one says nothing yet.

    Attributes:
        settings: how keys become volts.
    """

    def __init__(self, settings: PlayerSettings | None = None) -> None:
        self.settings = settings or PlayerSettings()
        self._pick = _PICKS[self.settings.priority]
        self._legato_only = self.settings.glide == "legato only"
        self._heed_switch = self.settings.heed_portamento_switch
        self._handlers: dict[str, Callable[[Message], Moment | None]] = {
            "note_on": self._note_on,
            "note_off": self._note_off,
            "control_change": self._control_change,
            "pitchwheel": self._bend,
        }
        self._controllers = {int(number): act for number, act in CONTROLLERS.items()}
        self._controllers[self.settings.pot_controller] = Player._pot_coarse
        if self.settings.pot_fine_controller is not None:
            self._controllers[self.settings.pot_fine_controller] = Player._pot_fine
        self._controllers[self.settings.range_controller] = Player._range_switch
        self.reset()

    def reset(self) -> None:
        """No key, no pedal, 0 V, bend centred over its default range, portamento on."""
        self._down: dict[int, int] = {}  # key -> velocity, in the order pressed
        self._note: int | None = None
        self._last_note: int | None = None
        self._velocity = 64
        self._note_volts = 0.0
        self._hold = False
        self._legato = False  # whether the current note was played legato
        self._portamento = True
        self._forced = False  # whether portamento control makes the current note glide
        self._source_key: int | None = None  # portamento control, for the next note
        self._bend_steps = 0
        self._bend_semitones = DEFAULT_BEND_SEMITONES
        self._parameter = NULL_PARAMETER
        self._pot_steps: int | None = None
        self._bend_volts = 0.0
        self._state = self._current()

    @property
    def now(self) -> Moment:
        """The state that holds now, without one-shots."""
        return Moment(*self._state)

    @property
    def keys_down(self) -> tuple[int, ...]:
        """Keys that are down, in the order pressed."""
        return tuple(self._down)

    @property
    def portamento(self) -> bool:
        """Whether portamento (65) is on."""
        return self._portamento

    @property
    def last_note(self) -> int | None:
        """The key sounding, or the last that did; None before the first."""
        return self._last_note

    @property
    def hold(self) -> bool:
        """Whether the hold pedal is down."""
        return self._hold

    @property
    def bend_steps(self) -> int:
        """Where the bend stands, -8192 to 8191."""
        return self._bend_steps

    @property
    def bend_range_semitones(self) -> float:
        """How far the bend reaches each way."""
        return self._bend_semitones

    def handle(self, message: Message) -> Moment | None:
        """Take in one message.

        Args:
            message: any mido message; those that do not concern a voice's pitch and gate
                change nothing.

        Returns:
            What holds from this message on, or None if nothing changed.
        """
        handler = self._handlers.get(message.type)
        return None if handler is None else handler(message)

    # --- what is told ---------------------------------------------------------------------

    def _current(self) -> tuple[float, bool, int, bool, int | None]:
        bypassed = not self._forced and (
            (self._heed_switch and not self._portamento) or (self._legato_only and not self._legato)
        )
        volts = self._note_volts + self._bend_volts
        return volts, self._note is not None, self._velocity, bypassed, self._note

    def _report(self) -> Moment | None:
        state = self._current()
        if state == self._state:
            return None
        self._state = state
        return Moment(*state)

    def _volts(self, note: int) -> float:
        settings = self.settings
        return note_to_volts(float(note), settings.zero_volt_note, settings.volts_per_octave)

    # --- keys -----------------------------------------------------------------------------

    def _note_on(self, message: Message) -> Moment | None:
        if message.velocity == 0:  # MIDI 1.0: a note-off
            return self._note_off(message)
        note = message.note
        self._down.pop(note, None)  # struck again without a note-off: it is the last one now
        self._down[note] = message.velocity
        source, self._source_key = self._source_key, None
        if self._pick(self._down) != note:
            return None
        legato = self._note is not None
        self._begin(note, legato=legato, forced=source is not None)
        jump = None if source is None else self._volts(source) + self._bend_volts
        self._state = self._current()
        return Moment(*self._state, jump, self.settings.retrigger)

    def _note_off(self, message: Message) -> Moment | None:
        if self._down.pop(message.note, None) is None:
            return None
        return self._settle()

    def _begin(self, note: int, *, legato: bool, forced: bool) -> None:
        self._note = self._last_note = note
        self._velocity = self._down[note]
        self._note_volts = self._volts(note)
        self._legato = legato
        self._forced = forced

    def _settle(self) -> Moment | None:
        """After keys or the pedal went up: fall back to a key, or hold the last, or end."""
        if self._down:
            note = self._pick(self._down)
            if note != self._note:
                self._begin(note, legato=True, forced=False)
        elif not self._hold:
            self._note = None
        return self._report()

    # --- bend and controllers -------------------------------------------------------------

    def _bend(self, message: Message) -> Moment | None:
        self._bend_steps = message.pitch
        return self._bend_again()

    def _bend_again(self) -> Moment | None:
        semitones = self._bend_semitones * self._bend_steps / BEND_CENTRE_STEPS
        self._bend_volts = semitones * self.settings.volts_per_octave / NOTES_PER_OCTAVE
        return self._report()

    def _control_change(self, message: Message) -> Moment | None:
        act = self._controllers.get(message.control)
        return None if act is None else act(self, message.value)

    def _pot_coarse(self, value: int) -> Moment | None:
        self._pot_steps = 128 * value  # a coarse value resets the fine one
        return self._turn_pot()

    def _pot_fine(self, value: int) -> Moment | None:
        if self._pot_steps is None:
            return None
        self._pot_steps += value - self._pot_steps % 128
        return self._turn_pot()

    def _turn_pot(self) -> Moment:
        rotation = min(1.0, (self._pot_steps or 0) / FULL_TURN)
        return Moment(*self._state, rotation=rotation)

    def _range_switch(self, value: int) -> Moment | None:
        return Moment(*self._state, range_value=value)

    def _hold_pedal(self, value: int) -> Moment | None:
        self._hold = value >= 64
        return self._settle()

    def _portamento_switch(self, value: int) -> Moment | None:
        self._portamento = value >= 64
        return self._report()

    def _portamento_control(self, value: int) -> Moment | None:
        self._source_key = value
        return None

    def _parameter_fine(self, value: int) -> Moment | None:
        self._parameter = (self._parameter[0], value)
        return None

    def _parameter_coarse(self, value: int) -> Moment | None:
        self._parameter = (value, self._parameter[1])
        return None

    def _non_registered_parameter(self, value: int) -> Moment | None:
        self._parameter = NULL_PARAMETER
        return None

    def _data_coarse(self, value: int) -> Moment | None:
        if self._parameter != BEND_RANGE_PARAMETER:
            return None
        self._bend_semitones = float(value)  # a coarse value resets the fine one
        return self._bend_again()

    def _data_fine(self, value: int) -> Moment | None:
        if self._parameter != BEND_RANGE_PARAMETER:
            return None
        self._bend_semitones = math.floor(self._bend_semitones) + min(value, 99) / 100.0  # in cents
        return self._bend_again()

    # --- channel mode ---------------------------------------------------------------------

    def _all_sound_off(self, value: int) -> Moment | None:
        self._down.clear()
        self._note = None
        return self._report()

    def _reset_controllers(self, value: int) -> Moment | None:
        """RP-015: the pedal, portamento, the parameter number and the bend, but not the rest."""
        self._hold = False
        self._portamento = False
        self._source_key = None
        self._parameter = NULL_PARAMETER
        self._bend_steps = 0
        self._bend_volts = 0.0
        return self._settle()

    def _all_notes_off(self, value: int) -> Moment | None:
        self._down.clear()  # as note-offs: the pedal still holds
        return self._settle()

    def _nothing(self, value: int) -> Moment | None:
        return None


CONTROLLERS: dict[Controller, Callable[[Player, int], Moment | None]] = {
    Controller.DATA_ENTRY: Player._data_coarse,
    Controller.DATA_ENTRY_FINE: Player._data_fine,
    Controller.HOLD_PEDAL: Player._hold_pedal,
    Controller.PORTAMENTO_SWITCH: Player._portamento_switch,
    Controller.PORTAMENTO_CONTROL: Player._portamento_control,
    Controller.NON_REGISTERED_PARAMETER_FINE: Player._non_registered_parameter,
    Controller.NON_REGISTERED_PARAMETER: Player._non_registered_parameter,
    Controller.REGISTERED_PARAMETER_FINE: Player._parameter_fine,
    Controller.REGISTERED_PARAMETER: Player._parameter_coarse,
    Controller.ALL_SOUND_OFF: Player._all_sound_off,
    Controller.RESET_ALL_CONTROLLERS: Player._reset_controllers,
    Controller.LOCAL_CONTROL: Player._nothing,
    Controller.ALL_NOTES_OFF: Player._all_notes_off,
    Controller.OMNI_OFF: Player._all_notes_off,  # the four mode messages imply all notes off
    Controller.OMNI_ON: Player._all_notes_off,
    Controller.MONO_ON: Player._all_notes_off,
    Controller.POLY_ON: Player._all_notes_off,
}


def _newest(down: dict[int, int]) -> int:
    return next(reversed(down))


_PICKS: dict[str, Callable[[dict[int, int]], int]] = {"last": _newest, "low": min, "high": max}
