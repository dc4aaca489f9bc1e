"""A song as stretches of time over which nothing moves, and as the notes that sound in it.

Keys become volts in the same `livelag.notes.player.Player` that drives the sound, so priority,
legato, bend, pedals and controllers mean the same here.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

from livelag.circuit.stage import GlideStage
from livelag.errors import InputError
from livelag.notes.midi_file import TimedMessage
from livelag.notes.player import Moment, Player, PlayerSettings


@dataclass(frozen=True, slots=True)
class Stretch:
    """Time from one message to the next.

    Attributes:
        start_s: seconds from the start of the song.
        duration_s: 0 or more.
        key_volts: the key held, V.
        range_index: where the range switch stands.
        rotation: where the song has turned the pot; None while it has not.
        bypassed: whether the glide is bypassed.
        jump_volts: key volts that the glide is forced to at the start; None leaves it alone.
        note: which note sounds, from 0; None between notes.
    """

    start_s: float
    duration_s: float
    key_volts: float
    range_index: int
    rotation: float | None
    bypassed: bool
    jump_volts: float | None
    note: int | None


@dataclass(frozen=True, slots=True)
class PlayedNote:
    """A note as it sounds.

    Attributes:
        note: MIDI note.
        start_s: seconds from the start of the song.
        end_s: when it is released or another takes over, after the start.
        interval_volts: its key volts less the last that lasted any time; 0 for the first.
    """

    note: int
    start_s: float
    end_s: float
    interval_volts: float


@dataclass(frozen=True, slots=True)
class Timeline:
    """What a song does to a stage.

    Attributes:
        first_key_volts: key volts of the first note, on which the stage rests before the song.
        opening: how many of the stretches come before the song proper: controls set at time 0,
            before the first note. The stage rests with them in place.
        stretches: in order, without holes; some last no time.
        notes: those that last any time, in order.
    """

    first_key_volts: float
    opening: int
    stretches: tuple[Stretch, ...]
    notes: tuple[PlayedNote, ...]

    @property
    def turns_pot(self) -> bool:
        """Whether the song itself turns the pot."""
        return any(stretch.rotation is not None for stretch in self.stretches)

    @property
    def switches_range(self) -> bool:
        """Whether the song itself moves the range switch."""
        return len({stretch.range_index for stretch in self.stretches}) > 1


def lay_out(
    stage: GlideStage,
    messages: Sequence[TimedMessage],
    duration_s: float,
    range_index: int = 0,
    settings: PlayerSettings | None = None,
) -> Timeline:
    """Follow the messages of a song.

    Args:
        stage: gives the scale and the number of ranges.
        messages: in order of time.
        duration_s: where the song ends; a key still down then ends with it.
        range_index: where the range switch stands at the start.
        settings: how keys become volts; the scale is replaced by the stage's.

    Raises:
        InputError: if no note lasts any time.
    """
    scale = stage.scale
    settings = replace(
        settings or PlayerSettings(),
        volts_per_octave=scale.volts_per_octave,
        zero_volt_note=scale.zero_volt_note,
    )
    follower = _Follower(stage, Player(settings), messages, range_index)
    for timed in messages:
        follower.take(timed)
    follower.finish(duration_s)
    return follower.timeline()


class _Follower:
    """Collects stretches and notes as messages come."""

    def __init__(
        self, stage: GlideStage, player: Player, messages: Sequence[TimedMessage], range_index: int
    ) -> None:
        first = next(
            (
                t.message.note
                for t in messages
                if t.message.type == "note_on" and t.message.velocity
            ),
            None,
        )
        if first is None:
            raise InputError("the song has no notes; choose one that does")
        self._stage = stage
        self._player = player
        self._first_volts = stage.note_volts(first)
        self._stretches: list[Stretch] = []
        self._notes: list[PlayedNote] = []
        self._now = Stretch(0.0, 0.0, self._first_volts, range_index, None, False, None, None)
        self._at_rest = True  # until the first note
        self._opening = 0
        self._held_volts = self._first_volts
        self._gate = False
        self._sounding: PlayedNote | None = None

    def take(self, timed: TimedMessage) -> None:
        moment = self._player.handle(timed.message)
        if moment is not None:
            self._close_stretch(timed.time_s)
            self._follow(moment, timed.time_s)

    def finish(self, end_s: float) -> None:
        self._close_stretch(max(end_s, self._now.start_s))
        self._end_note(max(end_s, self._now.start_s))

    def timeline(self) -> Timeline:
        if not self._notes:
            raise InputError("no note of the song lasts any time; choose one with longer notes")
        return Timeline(
            self._first_volts, self._opening, tuple(self._stretches), tuple(self._notes)
        )

    def _close_stretch(self, at_s: float) -> None:
        duration_s = at_s - self._now.start_s
        self._stretches.append(replace(self._now, duration_s=duration_s))
        if duration_s > 0.0:
            self._held_volts = self._now.key_volts

    def _follow(self, moment: Moment, at_s: float) -> None:
        before = self._now
        self._at_rest &= moment.note is None
        # Before the first note a control must not let go of the rest.
        key_volts = self._first_volts if self._at_rest else moment.key_volts
        if self._at_rest and at_s == 0.0:
            self._opening = len(self._stretches)
        same = self._sounding is not None and moment.note == self._sounding.note
        begins = moment.gate and (not self._gate or moment.retrigger or not same)
        if begins or (self._gate and not moment.gate):
            self._end_note(at_s)
        if begins and moment.note is not None:
            interval = key_volts - self._held_volts
            self._sounding = PlayedNote(moment.note, at_s, at_s, interval)
        self._gate = moment.gate
        range_index = before.range_index
        if moment.range_value is not None:  # the controller's travel in equal parts
            range_index = moment.range_value * len(self._stage.ranges) // 128
        self._now = Stretch(
            start_s=at_s,
            duration_s=0.0,
            key_volts=key_volts,
            range_index=range_index,
            rotation=before.rotation if moment.rotation is None else moment.rotation,
            bypassed=moment.bypassed,
            jump_volts=moment.jump_volts,
            note=len(self._notes) if self._sounding is not None else None,
        )

    def _end_note(self, at_s: float) -> None:
        if self._sounding is not None and at_s > self._sounding.start_s:
            self._notes.append(replace(self._sounding, end_s=at_s))
        self._sounding = None
