"""Snapshots for tests of the panel: from a patch that really plays, and from anything at all."""

from dataclasses import replace

import numpy as np
from hypothesis import strategies as st
from mido import Message

from livelag.circuit.presets import load_stage
from livelag.circuit.stage import Setting
from livelag.live.snapshot import Snapshot
from livelag.sound.patch import Patch
from livelag.units import amplitude_to_dbfs, volts_to_cents, volts_to_hz

RATE_HZ = 8000
POINT_FRAMES = RATE_HZ // 100
MELODY = (60, 67, 64, 72, 55, 62, 59, 60)


def played_snapshot(seconds=8.0, rotation=0.42, **changes):
    """What an audition shows after playing a melody, a note a second, for so long."""
    stage = load_stage("two-range-film")
    patch = Patch(stage, rotation=rotation, level=-24.0)
    patch.prepare(RATE_HZ, RATE_HZ)
    patch.reset(2.0)
    key, glide, peak = [], [], 0.0
    for second in range(int(seconds)):
        message = Message("note_on", note=MELODY[second % len(MELODY)], velocity=90)
        out = patch.process(RATE_HZ, [(0, message)])
        key.append(out.key_volts[::POINT_FRAMES].copy())
        glide.append(out.glide_volts[::POINT_FRAMES].copy())
        peak = float(np.abs(out.audio).max())
    key_volts, glide_volts = np.concatenate(key), np.concatenate(glide)
    setting = Setting(0, rotation)
    snapshot = Snapshot(
        stage_title=stage.title,
        range_names=tuple(r.name for r in stage.ranges),
        rotation=rotation,
        resistance_ohms=stage.resistance_ohms(setting),
        time_constant_s=stage.time_constant_s(setting),
        octave_arrival_s=stage.octave_arrival_s(setting),
        gate=True,
        note=MELODY[(int(seconds) - 1) % len(MELODY)],
        key_volts=float(key_volts[-1]),
        glide_volts=float(glide_volts[-1]),
        pitch_hz=float(volts_to_hz(glide_volts[-1], stage.scale.zero_volt_note)),
        cents_to_go=float(volts_to_cents(key_volts[-1] - glide_volts[-1])),
        waveform="saw",
        level_dbfs=-24.0,
        peak_dbfs=amplitude_to_dbfs(peak),
        load=0.12,
        midi_ports=("Workshop keys", "Foot pedal"),
        rate_hz=48000,
        block_frames=64,
        latency_s=0.004,
        slot_a="fast 0.42",
        message="A stored: fast, 0.42",
        strip_key_volts=key_volts.astype(np.float32),
        strip_glide_volts=glide_volts.astype(np.float32),
        zero_volt_note=stage.scale.zero_volt_note,
    )
    return replace(snapshot, **changes)


_NUMBERS = st.floats() | st.sampled_from([0.0, 0.5, 1.0, -1.0, 1e300, -1e300, 5e-324])
_TEXTS = st.text(max_size=20) | st.sampled_from(
    [
        "x" * 500,
        "広い文字の名前" * 40,
        "\x1b[31mred\x07\r\n\t",
        "e\u0301 \u202eright to left",
        "👨\u200d👩\u200d👧 🇩🇪 👍🏽 \ufe0f",
        "\ud800 lone",
    ]
)
_COUNTS = st.integers(-(10**12), 10**12)
_MARKS = st.none() | _NUMBERS
_POINTS = st.lists(st.floats(width=32), max_size=40).map(lambda v: np.array(v, np.float32))

_NUMBER_FIELDS = (
    *("rotation", "resistance_ohms", "time_constant_s", "octave_arrival_s", "key_volts"),
    *("glide_volts", "pitch_hz", "cents_to_go", "level_dbfs", "peak_dbfs", "load", "take_s"),
    *("latency_s", "strip_interval_s", "volts_per_octave", "zero_volt_note"),
)
_TEXT_FIELDS = (
    *("stage_title", "waveform", "take_name", "slot_a", "slot_b", "message", "cv_out", "cv_in"),
)


@st.composite
def any_snapshots(draw):
    """A snapshot whose fields hold anything of their type."""
    key = draw(_POINTS)
    glide = draw(st.just(key[::-1].copy()) | st.just(np.full(len(key), np.nan, np.float32)))
    return Snapshot(
        **{name: draw(_NUMBERS) for name in _NUMBER_FIELDS},
        **{name: draw(_TEXTS) for name in _TEXT_FIELDS},
        **{name: draw(_MARKS) for name in ("shortest_s", "handover_s", "longest_s")},
        **{name: draw(_COUNTS) for name in ("dropouts", "take_drops", "rate_hz", "block_frames")},
        **{name: draw(st.booleans()) for name in ("glide_on", "gate", "midi_active", "by_ear")},
        range_names=tuple(draw(st.lists(_TEXTS, max_size=12))),
        range_index=draw(st.integers(-2, 12)),
        note=draw(st.none() | st.integers(0, 127)),
        midi_ports=tuple(draw(st.lists(_TEXTS, max_size=30))),
        recording=draw(st.sampled_from(["off", "armed", "on"])),
        octave=draw(st.integers(-5, 5)),
        strip_key_volts=key,
        strip_glide_volts=glide,
    )
