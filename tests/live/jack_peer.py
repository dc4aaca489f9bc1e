"""A second process on the JACK server: plays MIDI at exact frames and records what comes out.

Run as `python jack_peer.py PLAN.json`. It speaks in lines of JSON on standard output and obeys
lines on standard input, so that a test can drive it:

    out {"ready": true, ...}          the client is running, its ports exist
    in  go                            start: frame 0 of the plan is a block that begins soon
    out {"done": true, ...}           the plan is played and the recording written
    in  quit                          (or end of input) leave

PLAN keys, all but `name` optional:
    name        client name
    events      [[frame, [byte, ...]], ...] after the start, in order
    burst       [events per block, [[byte, ...], ...]]: instead of `events`, as many of these as
                that in every block, over and over
    frames      length of the plan (default: last event, plus a block)
    send_to     input ports, by name or regular expression, to connect `name:out` to
    sound       float32 .npy of shape (frames,), played on `name:sound` from the start, then silence
    sound_to    audio input ports, by name or regular expression, to connect `name:sound` to
    record_from audio output ports, likewise, one recorded channel for each match
    out         where to write the recording: float32, shape (frames, channels)

"done" holds `start_frame`, `xruns`, `lost_blocks` (how many the server skipped; the recording has
zeros there), `cycles`: for each [frame, entered seconds], and `events`: for each [frame,
handed-over seconds]. Handed over is when this client was done with the cycle, which sets off the
clients that listen to it. Seconds are time.perf_counter's, good for any process here.
"""

import json
import sys
import time
from pathlib import Path

import jack
import numpy as np


class Peer:
    def __init__(self, plan):
        self.plan = plan
        self.events = [(int(f), bytes(data)) for f, data in plan.get("events", [])]
        self.burst = plan.get("burst")
        self.client = jack.Client(plan["name"], no_start_server=True, use_exact_name=True)
        self.block = self.client.blocksize
        last = self.events[-1][0] if self.events else 0
        self.frames = int(plan.get("frames", last + self.block))
        self.midi = self.client.midi_outports.register("out")
        self.sound = np.zeros(0, np.float32)
        self.speaker = None
        if "sound" in plan:
            self.sound = np.load(plan["sound"])
            self.speaker = self.client.outports.register("sound")
        self.inputs = []
        self.recording = np.zeros((self.frames, 0), np.float32)
        self.start = None
        self.armed = self.finished = False
        self.expected = None
        self.next_event = self.burst_at = 0
        self.sent = []
        self.xruns = self.lost_blocks = 0
        self.cycles = []
        self.error = None
        self.gone = False
        self.client.set_process_callback(self.process)
        self.client.set_xrun_callback(self.on_xrun)
        self.client.set_shutdown_callback(self.on_shutdown)

    def on_xrun(self, _delay):
        self.xruns += 1

    def on_shutdown(self, _status, _reason):
        self.gone = True

    def connect(self):
        for pattern in self.plan.get("send_to", []):
            for port in self.wait_for(pattern, is_midi=True, is_input=True):
                self.client.connect(self.midi, port)
        for pattern in self.plan.get("sound_to", []):
            for port in self.wait_for(pattern, is_audio=True, is_input=True):
                self.client.connect(self.speaker, port)
        for pattern in self.plan.get("record_from", []):
            for port in self.wait_for(pattern, is_audio=True, is_output=True):
                self.inputs.append(self.client.inports.register(f"in_{len(self.inputs) + 1}"))
                self.client.connect(port, self.inputs[-1])
        self.recording = np.zeros((self.frames, len(self.inputs)), np.float32)

    def wait_for(self, pattern, **kinds):
        for _ in range(500):
            if found := self.client.get_ports(pattern, **kinds):
                return found
            time.sleep(0.01)
        raise SystemExit(f"jack_peer: no port {pattern!r} appeared within 5 s")

    def process(self, frames):
        entered_s = time.perf_counter()
        try:
            self.midi.clear_buffer()
            if self.speaker is not None:
                self.speaker.get_array()[:] = 0.0
            if self.armed and not self.finished:
                before = len(self.sent)
                self.play(frames, entered_s)
                handed_s = time.perf_counter()
                for event in self.sent[before:]:
                    event.append(handed_s)
        except Exception as error:
            self.error, self.finished = repr(error), True

    def play(self, frames, entered_s):
        frame = self.client.last_frame_time
        if self.start is None:
            self.start = self.expected = frame
        self.lost_blocks += (frame - self.expected) // frames
        self.expected = frame + frames
        offset = frame - self.start
        self.cycles.append([offset, entered_s])
        if offset >= self.frames:
            self.finished = True
            return
        if self.burst:
            count, messages = self.burst
            for index in range(count):
                data = messages[self.burst_at % len(messages)]
                self.midi.write_midi_event(index * frames // count, bytes(data))
                self.burst_at += 1
        while self.next_event < len(self.events):
            at, data = self.events[self.next_event]
            if at >= offset + frames:
                break
            # Where a block was lost the event goes out late, at the first frame there is.
            within = max(at - offset, 0)
            self.midi.write_midi_event(within, data)
            self.sent.append([offset + within])
            self.next_event += 1
        here = min(frames, self.frames - offset)
        sound = self.sound[offset : offset + frames]
        if len(sound):
            self.speaker.get_array()[: len(sound)] = sound
        for channel, port in enumerate(self.inputs):
            self.recording[offset : offset + here, channel] = port.get_array()[:here]

    def run(self):
        self.client.activate()
        self.connect()
        say({"ready": True, "block": self.block, "rate": self.client.samplerate})
        if sys.stdin.readline().strip() == "go":
            self.armed = True
            while not (self.finished or self.gone):
                time.sleep(0.005)
            if "out" in self.plan:
                np.save(Path(self.plan["out"]), self.recording)
            say(
                {
                    "done": not self.gone,
                    "error": "the server went away" if self.gone else self.error,
                    "start_frame": self.start,
                    "events": self.sent,
                    "burst_events": self.burst_at,
                    "xruns": self.xruns,
                    "lost_blocks": self.lost_blocks,
                    "cycles": self.cycles,
                }
            )
            sys.stdin.readline()
        if not self.gone:
            self.client.deactivate()
            self.client.close()


def say(record):
    sys.stdout.write(json.dumps(record) + "\n")
    sys.stdout.flush()


if __name__ == "__main__":
    Peer(json.loads(Path(sys.argv[1]).read_text("utf-8"))).run()
