"""What the panel shows: one frozen picture of an audition, made 15 times a second."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import Literal

import numpy as np
from numpy.typing import NDArray

#: Time constants at both ends of the pot once it is freed from its parts; logarithmic between.
BY_EAR_SHORTEST_S = 0.0005
BY_EAR_LONGEST_S = 10.0


def _no_points() -> NDArray[np.float32]:
    return np.zeros(0, np.float32)


@dataclass(frozen=True, slots=True, eq=False)
class Snapshot:
    """A moment of an audition. It is pickled to another process, so it holds plain values only.

    Any number may be NaN where it is not known, and any text may be empty.

    Attributes:
        stage_title: title of the stage.
        range_names: the positions of the range switch, in order.
        range_index: which of them is in use, from 0.
        rotation: turn of the pot, 0 (fastest) to 1 (slowest).
        resistance_ohms: series resistor and pot at this rotation.
        time_constant_s: seconds.
        octave_arrival_s: seconds until an octave is in tune and stays there.
        glide_on: whether the glide is not bypassed.
        gate: whether a key is held.
        note: MIDI number of the note that sounds or sounded last, or None.
        key_volts: control voltage before the glide.
        glide_volts: control voltage after it.
        pitch_hz: what the oscillator plays now.
        cents_to_go: key minus glide in cents; above 0 while the pitch has still to rise.
        waveform: name of the oscillator's waveform.
        level_dbfs: the level that is set.
        peak_dbfs: greatest output of the last moment; minus infinity in silence.
        load: time that the audio callback takes over the time of a block.
        dropouts: blocks that were missed since the start.
        midi_ports: names of the MIDI inputs that are open.
        midi_active: whether a message came in the last moment.
        recording: whether a take is ``off``, ``armed`` or ``on``.
        take_name: name of the take.
        take_s: its length so far, seconds.
        take_drops: frames that it lost.
        rate_hz: frames per second.
        block_frames: frames in a block.
        latency_s: from a key to the sound, seconds.
        slot_a: short text of the setting stored as A, empty if there is none.
        slot_b: the same for B.
        octave: octaves by which the typed notes are moved.
        by_ear: whether the pot is freed from its parts.
        shortest_s: marked shortest useful time constant, seconds, or None.
        handover_s: marked time constant where the ranges meet, seconds, or None.
        longest_s: marked longest useful time constant, seconds, or None.
        message: the last thing said to the player.
        strip_interval_s: seconds between points of the strip.
        strip_key_volts: (points,) key volts of the last seconds, newest last.
        strip_glide_volts: (points,) glide volts in step with them.
        volts_per_octave: scale of the stage.
        zero_volt_note: MIDI number of the note at 0 V, fractions allowed.
        cv_out: what is said of the output that carries the glide volts, empty if there is none.
        cv_in: what is said of the input whose volts glide, empty if there is none.
    """

    stage_title: str = ""
    range_names: tuple[str, ...] = ()
    range_index: int = 0
    rotation: float = 0.0
    resistance_ohms: float = math.nan
    time_constant_s: float = math.nan
    octave_arrival_s: float = math.nan
    glide_on: bool = True
    gate: bool = False
    note: int | None = None
    key_volts: float = math.nan
    glide_volts: float = math.nan
    pitch_hz: float = math.nan
    cents_to_go: float = math.nan
    waveform: str = ""
    level_dbfs: float = math.nan
    peak_dbfs: float = -math.inf
    load: float = 0.0
    dropouts: int = 0
    midi_ports: tuple[str, ...] = ()
    midi_active: bool = False
    recording: Literal["off", "armed", "on"] = "off"
    take_name: str = ""
    take_s: float = 0.0
    take_drops: int = 0
    rate_hz: int = 48000
    block_frames: int = 0
    latency_s: float = math.nan
    slot_a: str = ""
    slot_b: str = ""
    octave: int = 0
    by_ear: bool = False
    shortest_s: float | None = None
    handover_s: float | None = None
    longest_s: float | None = None
    message: str = ""
    strip_interval_s: float = 0.01
    strip_key_volts: NDArray[np.float32] = field(default_factory=_no_points)
    strip_glide_volts: NDArray[np.float32] = field(default_factory=_no_points)
    volts_per_octave: float = 1.0
    zero_volt_note: float = 36.0
    cv_out: str = ""
    cv_in: str = ""
