"""`livelag devices`: what can be played through, and calibrating a channel for volts."""

from __future__ import annotations

import argparse
import sys
from typing import Any

from livelag.cli.common import add_command, console, new_table, refuse, show_json, warn


def add_to(commands: argparse._SubParsersAction[argparse.ArgumentParser]) -> None:
    """Add the command."""
    parser = add_command(
        commands,
        "devices",
        "list sound outputs and MIDI inputs, or calibrate an output for volts",
        "livelag devices --calibrate 3 --device interface",
    )
    parser.add_argument(
        "--calibrate", type=int, metavar="CHANNEL",
        help="send known levels to this DC-coupled channel, from 1, and ask for a meter's readings",
    )  # fmt: skip
    parser.add_argument(
        "--device", metavar="NAME", help="output to calibrate; default the system's"
    )
    parser.set_defaults(run=run)


def run(args: argparse.Namespace) -> None:
    """List devices or calibrate one."""
    if args.device is not None and args.calibrate is None:
        refuse(args, "--device goes with --calibrate")
    if args.calibrate is not None:
        _calibrate(args)
        return
    answer = _devices()
    if args.json:
        show_json(answer)
        return
    out = console()
    if answer["sound_problem"] is None:
        sound = new_table(
            "output", "name", "channels", "rate", right=("output", "channels", "rate")
        )
        for row in answer["outputs"]:
            mark = " (default)" if row["default"] else ""
            sound.add_row(
                str(row["number"]), row["name"] + mark, str(row["channels"]), f"{row['rate_hz']:g}"
            )
        out.print(sound)
    if answer["midi_problem"] is None:
        midi = new_table("MIDI input")
        for name in answer["midi_inputs"]:
            midi.add_row(name)
        out.print(midi if answer["midi_inputs"] else "No MIDI inputs are connected.")
    for key in ("sound_problem", "midi_problem"):
        if answer[key] is not None:
            warn(answer[key])


def _devices() -> dict[str, Any]:
    from livelag.errors import DeviceError
    from livelag.live.devices import list_sound_devices
    from livelag.live.ports import list_inputs

    answer: dict[str, Any] = {
        "outputs": [], "midi_inputs": [], "sound_problem": None, "midi_problem": None,
    }  # fmt: skip
    try:
        answer["outputs"] = [
            {
                "number": device.number,
                "name": device.label,
                "channels": device.outputs,
                "input_channels": device.inputs,
                "rate_hz": device.rate_hz,
                "latency_s": device.output_latency_s,
                "default": device.is_default_output,
            }
            for device in list_sound_devices()
            if device.outputs
        ]
    except DeviceError as error:
        answer["sound_problem"] = str(error)
    try:
        answer["midi_inputs"] = list(list_inputs())
    except DeviceError as error:
        answer["midi_problem"] = str(error)
    return answer


def _calibrate(args: argparse.Namespace) -> None:
    import time

    from livelag.live.calibration import SteadyVolts, measure, save_calibration
    from livelag.live.devices import find_output, sound_library
    from livelag.live.volts import AC_WARNING

    device = find_output(args.device)
    if not 1 <= args.calibrate <= device.outputs:
        refuse(
            args, f"--calibrate {args.calibrate}: {device.name} has channels 1 to {device.outputs}"
        )
    warn(AC_WARNING)
    warn("unplug everything but the meter from this channel; it will carry several volts")
    steady = SteadyVolts(args.calibrate - 1, device.rate_hz)
    sounddevice = sound_library()
    with sounddevice.OutputStream(
        device=device.number,
        channels=args.calibrate,
        samplerate=device.rate_hz,
        dtype="float32",
        callback=lambda out, frames, when, status: steady.fill(out),
    ):
        found = measure(steady, _ask, time.sleep)
    path = save_calibration(device.label, args.calibrate, found)
    if args.json:
        show_json(
            {
                "device": device.label,
                "channel": args.calibrate,
                "full_scale_volts": found.full_scale_v,
                "zero_volts": found.zero_v,
                "file": str(path),
            }
        )
        return
    console().print(
        f"Channel {args.calibrate}: full scale {found.full_scale_v:.4g} V, "
        f"zero {found.zero_v:.4g} V; kept in {path}"
    )


def _ask(words: str) -> str:
    print(words, end="", file=sys.stderr, flush=True)
    return sys.stdin.readline()
