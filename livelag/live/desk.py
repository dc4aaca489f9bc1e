"""The controls of an audition: what a typed action does to the engine, the take and the marks."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from itertools import pairwise
from pathlib import Path

from mido import Message

from livelag.circuit.stage import Setting
from livelag.errors import LivelagError
from livelag.live.controllers import portamento_message, pot_messages, range_message
from livelag.live.engine import Engine
from livelag.live.take import TakeRecorder, next_take_path
from livelag.notes.player import FULL_TURN
from livelag.sound.oscillator import WAVEFORMS
from livelag.sound.parameters import PARAMETERS, Change
from livelag.units import format_value, note_name

SMALL_TURN, LARGE_TURN = 1 / 127, 1 / 10
LEVEL_STEP_DB = 1.0
SETTLING_S = 0.15
MAJOR_SCALE = (0, 2, 4, 5, 7, 9, 11, 12, 14, 16)
FIRST_NOTE = 48
OCTAVES = (-2, 3)
TYPED_VELOCITY = 100
MARK_NAMES = {"shortest": "fastest useful", "handover": "hand-over", "longest": "slowest useful"}


@dataclass(frozen=True, slots=True)
class Slot:
    """A setting stored to be compared."""

    setting: Setting
    glide_on: bool


@dataclass
class Desk:
    """Everything that typing changes. It posts to the engine and never touches the patch.

    Attributes:
        engine: what plays.
        by_ear: whether the pot is freed from its parts and marks may be set.
        takes_folder: where takes go.
        setting: where pot and range were last put from here or heard to be.
        message: the last thing to be said to the player.
        marks: seconds, by ``shortest``, ``handover`` and ``longest``.
        takes: the takes made so far.
        quitting: whether the player wants to leave.
        help_shown: whether the help page is wanted.
    """

    engine: Engine
    by_ear: bool
    takes_folder: Path
    setting: Setting
    glide_on: bool = True
    waveform: str = "saw"
    level_dbfs: float = -24.0
    message: str = ""
    octave: int = 0
    quitting: bool = False
    help_shown: bool = False
    slots: dict[str, Slot] = field(default_factory=dict)
    slot_in_use: str = ""
    marks: dict[str, float] = field(default_factory=dict)
    recorder: TakeRecorder | None = None
    takes: list[Path] = field(default_factory=list)
    waveform_changed_in_take: bool = False
    _typed_note: int | None = None
    _ours_until_s: float = 0.0

    def __post_init__(self) -> None:
        self._actions: dict[str, Callable[[], None]] = {
            "pot_down_small": lambda: self._turn(-SMALL_TURN),
            "pot_up_small": lambda: self._turn(SMALL_TURN),
            "pot_down_large": lambda: self._turn(-LARGE_TURN),
            "pot_up_large": lambda: self._turn(LARGE_TURN),
            "next_range": self._next_range,
            "glide_toggle": self._toggle_glide,
            "next_waveform": self._next_waveform,
            "level_down": lambda: self._change_level(-LEVEL_STEP_DB),
            "level_up": lambda: self._change_level(LEVEL_STEP_DB),
            "store_a": lambda: self._store("A"),
            "store_b": lambda: self._store("B"),
            "swap": self._swap,
            "panic": self._panic,
            "take": self._toggle_take,
            "mark_shortest": lambda: self._mark("shortest"),
            "mark_handover": lambda: self._mark("handover"),
            "mark_longest": lambda: self._mark("longest"),
            "octave_down": lambda: self._shift_octave(-1),
            "octave_up": lambda: self._shift_octave(1),
            "rest": self._rest,
            "help": self._toggle_help,
            "quit": self._quit,
        }
        for degree in range(len(MAJOR_SCALE)):
            self._actions[f"degree_{degree + 1}"] = lambda d=degree: self._play(d)  # type: ignore[misc]

    def foresee(self) -> None:
        """Work out, before the sound runs, where controllers and keys can turn the pot."""
        places = {128 * coarse for coarse in range(128)}
        for turn in (SMALL_TURN, LARGE_TURN):
            turned = (self.setting.rotation + turn * steps for steps in range(-128, 129))
            places.update(round(FULL_TURN * r) for r in turned if 0.0 <= r <= 1.0)
        self.engine.patch.foresee(place / FULL_TURN for place in sorted(places))

    @property
    def actions(self) -> tuple[str, ...]:
        """Names of the actions there are."""
        return tuple(self._actions)

    def act(self, action: str) -> None:
        """Do what a key asks for; a failure becomes the message, and the sound goes on."""
        try:
            self._actions[action]()
        except LivelagError as error:
            self.message = str(error)

    def follow(self) -> None:
        """Take over what a MIDI keyboard or a song has moved, unless a hand here just did."""
        if self.engine.now() < self._ours_until_s:
            return  # what was typed may not have reached the callback yet
        patch = self.engine.patch
        setting = patch.setting
        self.setting = Setting(setting.range_index, setting.rotation)
        self.glide_on = patch.player.portamento

    @property
    def time_constant_s(self) -> float:
        """Time constant at the setting."""
        return self.engine.patch.stage.time_constant_s(self.setting)

    # Pot, range, glide

    def _turn(self, by: float) -> None:
        self._put(Setting(self.setting.range_index, min(1.0, max(0.0, self.setting.rotation + by))))
        self._say_setting()

    def _put(self, setting: Setting) -> None:
        if setting.range_index != self.setting.range_index:
            count = len(self.engine.patch.stage.ranges)
            self.engine.post(range_message(setting.range_index, count))
        for message in pot_messages(setting.rotation):
            self.engine.post(message)
        self.setting = setting
        self._ours_until_s = self.engine.now() + SETTLING_S

    def _say_setting(self) -> None:
        name = self.engine.patch.stage.range_names[self.setting.range_index]
        tau = format_value(self.time_constant_s, "s")
        self.message = f"{name} {self.setting.rotation:.2f}, time constant {tau}"

    def _next_range(self) -> None:
        count = len(self.engine.patch.stage.ranges)
        if count == 1:
            by_ear = "by ear the pot has one range; h marks where two would meet"
            self.message = by_ear if self.by_ear else "this stage has one range"
            return
        self._put(Setting((self.setting.range_index + 1) % count, self.setting.rotation))
        self._say_setting()

    def _toggle_glide(self) -> None:
        self.glide_on = not self.glide_on
        self.engine.post(portamento_message(self.glide_on))
        self._ours_until_s = self.engine.now() + SETTLING_S
        self.message = "glide on" if self.glide_on else "glide off: this is the key itself"

    # Sound

    def _next_waveform(self) -> None:
        names = list(WAVEFORMS)
        self.waveform = names[(names.index(self.waveform) + 1) % len(names)]
        self.engine.post(Change("waveform", self.waveform))
        self.message = f"waveform {self.waveform}"
        self.waveform_changed_in_take |= self.recorder is not None

    def _change_level(self, by_db: float) -> None:
        row = PARAMETERS["level"]
        self.level_dbfs = min(row.high, max(row.low, self.level_dbfs + by_db))
        self.engine.post(Change("level", self.level_dbfs))
        self.message = f"level {self.level_dbfs:.0f} dBFS"
        self.waveform_changed_in_take |= self.recorder is not None

    # Comparing

    def _store(self, name: str) -> None:
        self.slots[name] = Slot(self.setting, self.glide_on)
        self.slot_in_use = name
        self.message = f"stored as {name}: {self.slot_text(name)}"

    def slot_text(self, name: str) -> str:
        """What a slot holds, in a few characters; empty if nothing."""
        slot = self.slots.get(name)
        if slot is None:
            return ""
        range_name = self.engine.patch.stage.range_names[slot.setting.range_index]
        return f"{range_name} {slot.setting.rotation:.2f}{'' if slot.glide_on else ' off'}"

    def _swap(self) -> None:
        other = "B" if self.slot_in_use == "A" else "A"
        if other not in self.slots:
            self.message = f"nothing stored as {other} yet"
            return
        slot = self.slots[other]
        self.slot_in_use = other
        self._put(slot.setting)
        if slot.glide_on != self.glide_on:
            self._toggle_glide()
        self.message = f"{other}: {self.slot_text(other)}"

    # Notes

    def _play(self, degree: int) -> None:
        note = min(127, max(0, FIRST_NOTE + 12 * self.octave + MAJOR_SCALE[degree]))
        if note == self._typed_note:
            return
        before, self._typed_note = self._typed_note, note
        self.engine.post(Message("note_on", note=note, velocity=TYPED_VELOCITY))
        if before is not None:
            self.engine.post(Message("note_off", note=before))

    def open_gate(self) -> None:
        """Let the oscillator sound by itself, for volts from outside."""
        self.engine.post(Message("note_on", note=FIRST_NOTE, velocity=TYPED_VELOCITY))

    def _rest(self) -> None:
        if self._typed_note is not None:
            self.engine.post(Message("note_off", note=self._typed_note))
            self._typed_note = None

    def _shift_octave(self, by: int) -> None:
        self.octave = min(OCTAVES[1], max(OCTAVES[0], self.octave + by))
        self.message = f"digits play from {note_name(FIRST_NOTE + 12 * self.octave)}"

    def _panic(self) -> None:
        self.engine.panic()
        self._typed_note = None
        self.message = "all notes off"

    # Takes and marks

    def _toggle_take(self) -> None:
        if self.recorder is not None:
            self.end_take()
            return
        path = next_take_path(self.takes_folder)
        self.recorder = TakeRecorder(self.engine.patch, path, round(self.engine.rate_hz))
        self.engine.take_feed = self.recorder.feed
        self.waveform_changed_in_take = False
        self.message = f"{path.name} begins when no note sounds"

    def end_take(self, *, stream_runs: bool = True) -> None:
        """Finish the take, if there is one, and say what became of it."""
        recorder, self.recorder = self.recorder, None
        if recorder is None:
            return
        kept = recorder.close(stream_runs=stream_runs)
        self.engine.take_feed = None
        lost = recorder.feed.lost_frames
        if not kept:
            self.message = "nothing was recorded"
            self.waveform_changed_in_take = False
        else:
            self.takes.append(recorder.path)
            self.message = f"{recorder.path}: {recorder.seconds:.1f} s" + (
                f", {lost} frames LOST: the disk was too slow" if lost else ""
            )
        if recorder.problem is not None:
            self.message = recorder.problem

    def watch_take(self) -> None:
        """Notice a take that ended by itself."""
        if self.recorder is not None and self.recorder.problem is not None:
            self.end_take()

    def _mark(self, name: str) -> None:
        if not self.by_ear:
            self.message = "marks are set in an audition started with --by-ear"
            return
        self.marks[name] = self.time_constant_s
        tau = format_value(self.time_constant_s, "s")
        wrong = self.marks_out_of_order()
        self.message = f"{MARK_NAMES[name]}: {tau}" + (f"; but {wrong}" if wrong else "")

    def marks_out_of_order(self) -> str:
        """What is wrong with the marks so far, or nothing."""
        names = [name for name in MARK_NAMES if name in self.marks]
        for shorter, longer in pairwise(names):
            if not self.marks[shorter] < self.marks[longer]:
                return f"{MARK_NAMES[shorter]} not below {MARK_NAMES[longer]}: mark one again"
        return ""

    # The rest

    def _toggle_help(self) -> None:
        self.help_shown = not self.help_shown

    def _quit(self) -> None:
        wrong = self.marks_out_of_order()
        if wrong and self.message != f"{wrong}, or q again":
            self.message = f"{wrong}, or q again"
            return
        self.quitting = True
