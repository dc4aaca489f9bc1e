"""An audition from start to end: opens what plays, shows what happens, and leaves all in order."""

from __future__ import annotations

import gc
import math
import os
import sys
import time
from contextlib import ExitStack, suppress
from dataclasses import dataclass, field
from typing import Any, Literal

from livelag.circuit.stage import Setting
from livelag.live.controls import action_of
from livelag.live.desk import Desk
from livelag.live.engine import Engine
from livelag.live.keys import KeyReader
from livelag.live.loop import Loop
from livelag.live.panel_process import PanelProcess
from livelag.live.plain import PlainPrinter
from livelag.live.ports import MidiInputs
from livelag.live.snapshot import Snapshot
from livelag.live.stream import SoundStream
from livelag.units import amplitude_to_dbfs, volts_to_cents, volts_to_hz

FRAMES_A_SECOND = 15
FADE_WAIT_S = 0.5
SWITCH_INTERVAL_S = 1e-4


@dataclass
class Session:
    """The loop around an engine: keys in, pictures out, troubles noticed.

    Attributes:
        engine: what plays.
        stream: the sound card.
        desk: what typing changes.
        panel: the panel, or None to say changes as plain lines.
        plain: says changes as lines when there is no panel, or when it has failed.
        midi: MIDI inputs, or None where there are none.
        loop: a phrase going round, or None.
        ends_after_s: seconds after which it ends by itself, or None.
    """

    engine: Engine
    stream: SoundStream
    desk: Desk
    panel: PanelProcess | None
    plain: PlainPrinter
    midi: MidiInputs | None = None
    loop: Loop | None = None
    ends_after_s: float | None = None
    _octave_arrivals: dict[Setting, float] = field(default_factory=dict)
    _dropped_said: int = 0
    _lost_said: tuple[str, ...] = ()
    _received_said: int = 0
    _help_said: bool = False

    def run(self) -> None:
        """Play until the player leaves, the time is over, or the sound device goes away.

        Raises:
            DeviceError: if the sound device goes away.
            LivelagError: whatever went wrong in the callback.
        """
        with ExitStack() as ending:
            if self.panel is not None:
                ending.enter_context(self.panel)  # before the keys change the terminal
            else:
                ending.callback(self.plain.close)
            self.keys = ending.enter_context(KeyReader())
            ending.enter_context(_undisturbed())
            # Whatever happens, the take is whole; once the stream has gone it cannot go on.
            ending.callback(self.desk.end_take, stream_runs=False)
            with self.stream:
                self._play()
                self.desk.end_take()
                self._fade_out()
        if self.engine.error is not None:
            raise self.engine.error

    def _play(self) -> None:
        until_s = math.inf if self.ends_after_s is None else time.monotonic() + self.ends_after_s
        while not self.desk.quitting and time.monotonic() < until_s:
            next_s = time.monotonic() + 1 / FRAMES_A_SECOND
            if self.engine.error is not None or self.keys.gone:
                return
            self.stream.check()
            self._look_after_midi()
            self.desk.watch_take()
            if self.loop is not None:
                self.loop.feed(self.engine)
            self._show()
            while (left_s := next_s - time.monotonic()) > 0 and not self.desk.quitting:
                for key in self.keys.read_keys(left_s):
                    action = action_of(key)
                    if action is not None:
                        self.desk.act(action)
            self.desk.follow()

    def _show(self) -> None:
        snapshot = self.snapshot()
        if self.panel is not None and not self.panel.problem:
            self.panel.help(self.desk.help_shown)
            self.panel.show(snapshot)
            if not self.panel.problem:
                return
            self.desk.message = f"the panel stopped ({self.panel.problem}); the sound goes on"
        self.plain.show(snapshot)
        if self.desk.help_shown and not self._help_said:
            self.plain.say_help(snapshot.by_ear)
        self._help_said = self.desk.help_shown

    def _fade_out(self) -> None:
        self.engine.stop()
        give_up_s = time.monotonic() + FADE_WAIT_S
        while not self.engine.finished and time.monotonic() < give_up_s:
            time.sleep(0.005)

    def _look_after_midi(self) -> None:
        if self.midi is None:
            return
        if self.midi.dropped > self._dropped_said:
            self._dropped_said = self.midi.dropped
            self.desk.message = f"{self.midi.dropped} MIDI messages dropped in a flood"
        lost = self.midi.lost
        if lost != self._lost_said:
            gone = [name for name in lost if name not in self._lost_said]
            back = [name for name in self._lost_said if name not in lost]
            if gone:
                self.desk.message = f"{', '.join(gone)} was unplugged; its notes are released"
            elif back:
                self.desk.message = f"{', '.join(back)} is back"
            self._lost_said = lost

    def snapshot(self) -> Snapshot:
        """How things stand, for the display."""
        engine, desk, meters = self.engine, self.desk, self.engine.meters
        patch, stage = engine.patch, engine.patch.stage
        setting = desk.setting
        scale = stage.scale
        peak, meters.peak = meters.peak, 0.0
        strip = engine.strip.read()
        recorder = desk.recorder
        recording: Literal["off", "armed", "on"] = "off"
        if recorder is not None:
            recording = "armed" if recorder.feed.state == "armed" else "on"
        player = patch.player.now
        cents = volts_to_cents(meters.key_volts - meters.glide_volts, scale.volts_per_octave)
        return Snapshot(
            stage_title=stage.title,
            range_names=stage.range_names,
            range_index=setting.range_index,
            rotation=setting.rotation,
            resistance_ohms=stage.resistance_ohms(setting),
            time_constant_s=stage.time_constant_s(setting),
            octave_arrival_s=self._octave_arrival_s(setting),
            glide_on=desk.glide_on,
            gate=player.gate,
            note=player.note,
            key_volts=meters.key_volts,
            glide_volts=meters.glide_volts,
            pitch_hz=volts_to_hz(meters.glide_volts, scale.zero_volt_note, scale.volts_per_octave),
            cents_to_go=cents,
            waveform=desk.waveform,
            level_dbfs=desk.level_dbfs,
            peak_dbfs=amplitude_to_dbfs(peak),
            load=meters.load,
            dropouts=meters.dropouts,
            midi_ports=self.midi.connected if self.midi is not None else (),
            midi_active=self._midi_active(),
            recording=recording,
            take_name=recorder.path.name if recorder is not None else "",
            take_s=recorder.seconds if recorder is not None else 0.0,
            take_drops=recorder.feed.lost_frames if recorder is not None else 0,
            rate_hz=round(engine.rate_hz),
            block_frames=self.stream.block_frames,
            latency_s=self.latency_s,
            slot_a=desk.slot_text("A"),
            slot_b=desk.slot_text("B"),
            octave=desk.octave,
            by_ear=desk.by_ear,
            shortest_s=desk.marks.get("shortest"),
            handover_s=desk.marks.get("handover"),
            longest_s=desk.marks.get("longest"),
            message=desk.message,
            strip_interval_s=engine.strip.interval_s,
            strip_key_volts=strip[0],
            strip_glide_volts=strip[1],
            volts_per_octave=scale.volts_per_octave,
            zero_volt_note=scale.zero_volt_note,
            cv_out=self._channel_text(engine.routing.volts_out),
            cv_in=self._channel_text(engine.routing.volts_in),
        )

    @property
    def latency_s(self) -> float:
        """From a message's arrival to its sound: a block, the device's own, the oscillator's."""
        frames = self.stream.block_frames + self.engine.patch.latency_frames
        return self.stream.latency_s + frames / self.engine.rate_hz

    def _midi_active(self) -> bool:
        received = self.engine.meters.received
        active = received != self._received_said
        self._received_said = received
        return active

    def _octave_arrival_s(self, setting: Setting) -> float:
        if setting not in self._octave_arrivals:
            if len(self._octave_arrivals) > 4096:
                self._octave_arrivals.clear()
            self._octave_arrivals[setting] = self.engine.patch.stage.octave_arrival_s(setting)
        return self._octave_arrivals[setting]

    @staticmethod
    def _channel_text(volts: Any) -> str:
        return "" if volts is None else f"channel {volts.channel + 1}, {volts.full_scale_v:g} V"


class _undisturbed:  # noqa: N801 - used like a function
    """Keeps this process's own threads out of the callback's way while sound runs.

    Python hands the interpreter over every 5 ms by default, which is longer than a block; and
    the garbage collector may stop everything (reference counts still free memory). A thread that
    holds the interpreter and is set aside by the system for another program holds up the sound
    as well, so where the system allows it this thread is not set aside for ordinary programs.
    """

    def __enter__(self) -> None:
        self._interval_s = sys.getswitchinterval()
        sys.setswitchinterval(SWITCH_INTERVAL_S)
        gc.collect()
        gc.freeze()
        gc.disable()
        _schedule(real_time=True)

    def __exit__(self, *error: object) -> None:
        _schedule(real_time=False)
        gc.enable()
        gc.unfreeze()
        sys.setswitchinterval(self._interval_s)


def _schedule(*, real_time: bool) -> None:
    """Lowest real-time priority for this thread, or ordinary; where the system allows it."""
    if sys.platform == "linux":
        policy = os.SCHED_RR | os.SCHED_RESET_ON_FORK if real_time else os.SCHED_OTHER
        with suppress(OSError):
            os.sched_setscheduler(0, policy, os.sched_param(1 if real_time else 0))
