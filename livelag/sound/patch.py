"""The patch: keys -> glide stage -> test oscillator -> level, as one block-by-block processor.

The offline renderer and the live audio callback drive this same object, and it gives the same
samples whatever the block sizes, since every message acts at its own frame.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from typing import NamedTuple, TypeAlias

import numpy as np
from mido import Message
from numpy.typing import NDArray

from livelag.circuit.stage import GlideStage, Setting
from livelag.errors import InputError
from livelag.notes.player import Moment, Player, PlayerSettings
from livelag.sound.lag import Lag
from livelag.sound.level import Level
from livelag.sound.oscillator import Oscillator
from livelag.sound.parameters import PARAMETERS, Change, Value, parameter
from livelag.units import dbfs_to_amplitude, note_to_hz

Samples = NDArray[np.float64]
Event: TypeAlias = "Message | Change"


class PatchOutput(NamedTuple):
    """One block of sound and volts. The arrays are the patch's own and change at the next call.

    Attributes:
        audio: (frames,) the oscillator behind its level, full scale 1, late by the latency.
        key_volts: (frames,) control voltage before the glide, without latency.
        glide_volts: (frames,) control voltage after the glide, without latency.
    """

    audio: Samples
    key_volts: Samples
    glide_volts: Samples


@dataclass(slots=True)
class PatchCounts:
    """What a patch has met since its last reset.

    Attributes:
        notes: notes that sounded.
        clipped_notes: of these, notes whose key volts the buffers could not pass.
        unglided_notes: of these, notes for which a message had bypassed the glide.
        clamped_frames: frames whose pitch was held below half the sample rate.
        ceiling_frames: frames that the ceiling held down.
    """

    notes: int = 0
    clipped_notes: int = 0
    unglided_notes: int = 0
    clamped_frames: int = 0
    ceiling_frames: int = 0


class Patch:
    """A one-voice instrument with the glide stage in it.

    Call `prepare` once, then `process` for block after block. Parameters are those of
    `livelag.sound.parameters.PARAMETERS`; set them between blocks, or at a frame of their own
    by a `Change` among the messages.

    Attributes:
        stage: the stage that glides.
        method: how it is made discrete.
        latency_frames: how many frames the audio is late.
        counts: what it has met since the last reset.
    """

    def __init__(
        self,
        stage: GlideStage,
        method: str = "exact",
        player_settings: PlayerSettings | None = None,
        **parameters: Value,
    ) -> None:
        """Put a patch together.

        Args:
            stage: the stage that glides.
            method: ``exact`` or ``bilinear`` (``ramp`` for voltages from outside).
            player_settings: how keys become volts; its scale is replaced by the stage's.
            parameters: values other than the defaults, by name.

        Raises:
            UnknownNameError: if a parameter, or a name given for one, does not exist.
            InputError: if a number is out of range.
        """
        self.stage = stage
        self.method = method
        settings = replace(
            player_settings or PlayerSettings(),
            volts_per_octave=stage.scale.volts_per_octave,
            zero_volt_note=stage.scale.zero_volt_note,
        )
        self._player = Player(settings)
        self._values: dict[str, Value] = {name: row.default for name, row in PARAMETERS.items()}
        self._oscillator = Oscillator()
        self.latency_frames = self._oscillator.latency_frames
        self.counts = PatchCounts()
        self._zero_volt_hz = note_to_hz(stage.scale.zero_volt_note)
        self._swing = stage.swing_volts()
        self._prepared = False
        self._bypassed_by_player = False
        self._gate = False
        for name, value in parameters.items():
            self.set(name, value)

    def prepare(self, sample_rate_hz: float, max_frames: int) -> None:
        """Make room for blocks of up to ``max_frames`` and start from rest.

        Raises:
            UnknownNameError: if the method does not exist.
        """
        self._lag = Lag(self.stage, sample_rate_hz, self.method, self._setting())
        self._level = Level(sample_rate_hz)
        self._oscillator.prepare(sample_rate_hz, max_frames)
        self._max_frames = max_frames
        self._key, self._glide, self._pitch = (np.zeros(max_frames) for _ in range(3))
        self._gains = np.zeros(self.latency_frames + max_frames)
        self._prepared = True
        self.reset()

    def foresee(self, rotations: Iterable[float]) -> None:
        """Work out rotations of the pot ahead of time, so that turning it takes a block less."""
        self._lag.foresee(
            Setting(range_index, rotation)
            for rotation in rotations
            for range_index in range(len(self.stage.ranges))
        )

    def reset(self, key_volts: float = 0.0) -> None:
        """Silence, no key held, the stage at rest on a key; parameters stay as they are."""
        self._player.reset()
        self._bypassed_by_player = False
        self._gate = False
        self._note: int | None = None
        self._at_rest = True
        self._key_volts = key_volts
        self.counts = PatchCounts()
        if self._prepared:
            self._lag.setting = self._setting()
            self._lag.reset(key_volts)
            self._level.reset()
            self._oscillator.reset()
            self._gains[:] = 0.0

    def get(self, name: str) -> Value:
        """Value of a parameter.

        Raises:
            UnknownNameError: if there is no such parameter.
        """
        return self._values[parameter(name).name]

    @property
    def player(self) -> Player:
        """The keys, to be looked at."""
        return self._player

    @property
    def setting(self) -> Setting:
        """Where the controls stand."""
        return self._setting()

    def set(self, name: str, value: Value) -> None:
        """Set a parameter from the next frame on.

        Raises:
            UnknownNameError: if there is no such parameter, or no such choice.
            InputError: if the number is out of range, or is a range that the stage has not.
        """
        checked = parameter(name).check(value)
        if name == "range" and checked not in range(len(self.stage.ranges)):
            last = len(self.stage.ranges) - 1
            raise InputError(f"range is {value!r}; this stage has positions 0 to {last}")
        self._values[name] = checked
        if name == "waveform":
            self._oscillator.waveform = str(checked)
        elif name == "pulse_width":
            self._oscillator.pulse_width = float(checked)
        elif name in ("level", "velocity"):
            if self._gate:
                self._level.open(self._note_gain())
        elif self._prepared:
            self._lag.move(self._setting())

    def begin(self, key_volts: float, controls: Sequence[Message] = ()) -> None:
        """Start a piece: controls as they stand before it, and the stage at rest on a key.

        Args:
            key_volts: the key rested on.
            controls: messages that set the pot, the range, pedals and bend; no notes.
        """
        self.reset(key_volts)
        for message in controls:
            moment = self._player.handle(message)
            if moment is not None:
                self._follow(moment)
        self._key_volts = key_volts
        self._lag.reset(key_volts)

    @property
    def peak(self) -> float:
        """Greatest absolute sample of the last block."""
        return self._level.peak

    @property
    def silent(self) -> bool:
        """Whether nothing sounds and nothing is on its way out."""
        waiting = self._gains[: self.latency_frames]
        return not self._gate and self._level.at_rest and not waiting.any()

    def process(
        self,
        frames: int,
        events: Sequence[tuple[int, Event]] = (),
        outside_volts: Samples | None = None,
    ) -> PatchOutput:
        """Make the next block.

        Args:
            frames: how many, 1 to ``max_frames``.
            events: (frame, message or change) in order of their frames, each 0 to frames - 1.
            outside_volts: (frames,) a control voltage from outside to glide instead of the keys'.

        Raises:
            InputError: if the block is longer than prepared for, or a change cannot be made.
        """
        if frames > self._max_frames:
            raise InputError(f"block is {frames} frames; prepared for {self._max_frames}")
        self._outside_volts = outside_volts
        self._sounded = 0
        pieces: list[Samples] = []
        done = 0
        for frame, event in events:
            moment = None
            if not isinstance(event, Change):
                moment = self._player.handle(event)
                if moment is None:
                    continue
            if frame > done:
                self._advance(done, frame)
                done = frame
            if moment is not None:
                self._follow(moment)
                continue
            if event.name in ("waveform", "pulse_width"):
                # The oscillator takes a new shape at the start of a call of its own only.
                self._sound(done, pieces)
            self.set(event.name, event.value)
        self._advance(done, frames)
        self._sound(frames, pieces)
        audio = pieces[0] if len(pieces) == 1 else np.concatenate(pieces)
        late = self.latency_frames
        audio *= self._gains[:frames]
        self._gains[:late] = self._gains[frames : frames + late].copy()
        self._level.limit(audio)
        self.counts.clamped_frames = self._oscillator.clamped_frames
        self.counts.ceiling_frames = self._level.ceiling_frames
        return PatchOutput(audio, self._key[:frames], self._glide[:frames])

    def _advance(self, start: int, stop: int) -> None:
        """Run the stage and the level over frames in which no control moves."""
        if stop == start:
            return
        if self._outside_volts is None:
            self._key[start:stop] = self._key_volts
            self._glide[start:stop] = self._lag.hold(self._key_volts, stop - start)
        else:
            self._key[start:stop] = self._outside_volts[start:stop]
            self._glide[start:stop] = self._lag.process(self._key[start:stop])
        # The gains wait as long as the oscillator does.
        self._level.fill(self._gains[self.latency_frames + start : self.latency_frames + stop])

    def _sound(self, stop: int, pieces: list[Samples]) -> None:
        """Run the oscillator over what the stage has done since the last call."""
        start = self._sounded
        if stop == start:
            return
        pitch = self._pitch[start:stop]
        octaves = self._glide[start:stop]
        if self.stage.scale.volts_per_octave != 1.0:
            octaves = np.divide(octaves, self.stage.scale.volts_per_octave, out=pitch)
        np.exp2(octaves, out=pitch)
        pitch *= self._zero_volt_hz
        piece = self._oscillator.process(pitch)
        pieces.append(piece)
        self._sounded = stop

    def _follow(self, moment: Moment) -> None:
        """Act on what a message changed."""
        if moment.rotation is not None:
            self.set("rotation", moment.rotation)
        if moment.range_value is not None:
            self.set("range", moment.range_value * len(self.stage.ranges) // 128)
        if moment.bypassed != self._bypassed_by_player:
            self._bypassed_by_player = moment.bypassed
            self._lag.move(self._setting())
        if moment.jump_volts is not None:
            self._lag.jump(moment.jump_volts)
        self._at_rest &= moment.note is None
        if not self._at_rest:  # before the first note a control must not let go of the rest
            self._key_volts = moment.key_volts
        begins = moment.gate and (not self._gate or moment.retrigger or moment.note != self._note)
        self._note = moment.note
        if begins:
            self._count_note(moment)
            self._velocity_of_note = moment.velocity
            self._level.open(self._note_gain(), retrigger=moment.retrigger)
        elif self._gate and not moment.gate:
            self._level.close()
        self._gate = moment.gate

    def _count_note(self, moment: Moment) -> None:
        self.counts.notes += 1
        low, high = self._swing
        self.counts.clipped_notes += not low <= moment.key_volts <= high
        self.counts.unglided_notes += moment.bypassed

    def _note_gain(self) -> float:
        sensitivity = float(self._values["velocity"])
        played = 1.0 - sensitivity + sensitivity * self._velocity_of_note / 127.0
        return dbfs_to_amplitude(float(self._values["level"])) * played

    def _setting(self) -> Setting:
        bypassed = bool(self._values["bypass"]) or self._bypassed_by_player
        return Setting(int(self._values["range"]), float(self._values["rotation"]), bypassed)
