"""Which controllers turn the pot and move the range switch; inside, they are always the same."""

from __future__ import annotations

from dataclasses import dataclass, field

from mido import Message

from livelag.errors import InputError
from livelag.notes.player import PlayerSettings
from livelag.notes.settings import Controller

_INSIDE = PlayerSettings()


@dataclass(frozen=True)
class ControllerMap:
    """Gives the player's own numbers to the controllers of the keyboard at hand.

    Takes then hold the standard numbers, whatever knob was turned.

    Attributes:
        pot: controller that turns the pot; below 32 its fine half is 32 above.
        range: controller that moves the range switch.

    Raises:
        InputError: if a number is no controller, has another meaning, or both are the same.
    """

    pot: int = _INSIDE.pot_controller
    range: int = _INSIDE.range_controller
    _to_inside: dict[int, int | None] = field(init=False, repr=False, compare=False)

    def __post_init__(self) -> None:
        # The player's settings know which controllers are taken.
        checked = PlayerSettings(pot_controller=self.pot, range_controller=self.range)
        # What the player would take for the pot or the range, but is neither here, is dropped.
        table: dict[int, int | None] = {
            _INSIDE.pot_controller: None,
            _INSIDE.pot_controller + 32: None,
            _INSIDE.range_controller: None,
        }
        table[self.pot] = _INSIDE.pot_controller
        if checked.pot_fine_controller is not None:
            table[checked.pot_fine_controller] = _INSIDE.pot_controller + 32
        table[self.range] = _INSIDE.range_controller
        object.__setattr__(self, "_to_inside", table)

    def translate(self, message: Message) -> Message | None:
        """The message as the player should see it; None if it should not."""
        if message.type != "control_change":
            return message
        number = self._to_inside.get(message.control, message.control)
        if number == message.control:
            return message
        return None if number is None else message.copy(control=number)


def pot_messages(rotation: float) -> tuple[Message, ...]:
    """Messages that turn the pot to the nearest of its 16257 places (5 and its fine half, 37).

    Raises:
        InputError: if the rotation is outside 0 to 1.
    """
    if not 0.0 <= rotation <= 1.0:
        raise InputError(f"rotation is {rotation!r}; it must be 0 to 1")
    coarse, fine = divmod(round(rotation * 127 * 128), 128)
    return (
        _control(_INSIDE.pot_controller, coarse),
        _control(_INSIDE.pot_controller + 32, fine),
    )


def range_message(index: int, count: int) -> Message:
    """Message that moves the switch to one of so many positions."""
    return _control(_INSIDE.range_controller, -(-index * 128 // count))


def portamento_message(on: bool) -> Message:
    """Message that turns the glide on or off."""
    return _control(Controller.PORTAMENTO_SWITCH, 127 if on else 0)


def hold_message(down: bool) -> Message:
    """Message that presses or lets go of the hold pedal."""
    return _control(Controller.HOLD_PEDAL, 127 if down else 0)


def _control(number: int, value: int) -> Message:
    return Message("control_change", control=int(number), value=value)
