"""One audition: everything the options ask for put together, run, and summed up."""

from __future__ import annotations

import argparse
import sys
from contextlib import ExitStack
from pathlib import Path
from typing import Any

from livelag.circuit.stage import GlideStage, Setting
from livelag.cli.audition import LEVEL_DBFS
from livelag.cli.common import show_json, warn
from livelag.cli.performance import check_method, parameters_from, player_settings_from
from livelag.errors import DeviceError, FileError, InputError
from livelag.files import check_place
from livelag.live.by_ear import free_stage
from livelag.live.calibration import load_calibration
from livelag.live.controllers import ControllerMap
from livelag.live.desk import MARK_NAMES, Desk
from livelag.live.devices import SoundDevice, find_input, find_output
from livelag.live.engine import Engine, Routing
from livelag.live.loop import Loop
from livelag.live.panel_process import PanelProcess, can_show_panel
from livelag.live.plain import PlainPrinter
from livelag.live.ports import MidiInputs
from livelag.live.session import Session
from livelag.live.stream import SoundStream
from livelag.live.volts import AC_WARNING, VoltsIn, VoltsOut
from livelag.notes.midi_file import read_midi_file
from livelag.notes.phrases import phrase
from livelag.notes.player import PlayerSettings
from livelag.sound.patch import Patch
from livelag.sound.render import check_rate
from livelag.units import format_value

EARS = "start quiet and protect your ears: a test oscillator is loud and steady"
LEAST_LEAD_S = 0.3


def audition(args: argparse.Namespace, stage: GlideStage) -> None:
    """Play a stage live until the player leaves.

    Raises:
        LivelagError: if something asked for is not there, or the sound device goes away.
    """
    check_method(args.method)
    _check_places(args)
    played = free_stage(stage) if args.by_ear else stage
    patch = Patch(
        played,
        "ramp" if args.cv_in is not None and args.method == "exact" else args.method,
        player_settings_from(args),
        **parameters_from(args, played, LEVEL_DBFS),
    )
    defaults = PlayerSettings()
    controllers = ControllerMap(
        defaults.pot_controller if args.pot_cc is None else args.pot_cc,
        defaults.range_controller if args.range_cc is None else args.range_cc,
    )
    notes = _notes(args)
    output = find_output(_name_or_number(args.device))
    rate_hz = args.rate or round(output.rate_hz)
    check_rate(rate_hz)
    routing, source = _routing(args, output)
    warn(EARS)
    if args.cv_out is not None or args.cv_in is not None:
        warn(AC_WARNING)
    with ExitStack() as open_things:
        midi = _midi_inputs(args)
        if midi is not None:
            open_things.enter_context(midi)
        engine = Engine(patch, rate_hz, controllers=controllers, routing=routing)
        if midi is not None:
            engine.arrivals = midi
        desk = Desk(
            engine, args.by_ear, Path(args.takes), Setting(*_place(patch)),
            waveform=str(patch.get("waveform")), level_dbfs=float(patch.get("level")),
            message=EARS,
        )  # fmt: skip
        desk.foresee()
        loop = None
        if notes is not None:
            messages, duration_s = notes
            loop = Loop(messages, duration_s, round(LEAST_LEAD_S * rate_hz), rate_hz)
        if routing.volts_in is not None:
            desk.open_gate()
        session = Session(
            engine,
            SoundStream(
                engine, output, _channels(routing), args.block, _latency(args.latency),
                source, 0 if routing.volts_in is None else routing.volts_in.channel + 1,
            ),
            desk, *_display(args), midi, loop, args.seconds,
        )  # fmt: skip
        try:
            session.run()
        finally:
            answer = _sum_up(args, session)
    if args.json:
        show_json(answer)


def _check_places(args: argparse.Namespace) -> None:
    """Refuse places for marks and takes before anything is played for them."""
    if args.by_ear:
        check_place(_marks_path(args))
    takes = Path(args.takes)
    if takes.exists() and not takes.is_dir():
        raise FileError(f"{takes}: is a file; name a folder for the takes")


def _marks_path(args: argparse.Namespace) -> Path:
    return Path(args.marks or "marks.toml")


def _place(patch: Patch) -> tuple[int, float]:
    return patch.setting.range_index, patch.setting.rotation


def _notes(args: argparse.Namespace) -> tuple[Any, float] | None:
    if args.midi is not None:
        song = read_midi_file(Path(args.midi))
        for sentence in song.warnings:
            warn(sentence)
        return song.messages, song.duration_s
    if args.phrase is not None:
        chosen = phrase(args.phrase)
        return chosen.messages, chosen.duration_s
    return None


def _name_or_number(text: str | None) -> str | int | None:
    return int(text) if text is not None and text.isdecimal() else text


def _latency(text: str) -> str | float:
    if text in ("low", "high"):
        return text
    try:
        seconds = float(text)
    except ValueError:
        seconds = -1.0
    if not 0.0 < seconds <= 5.0:
        raise InputError(f"--latency is {text!r}; it must be low, high or seconds up to 5")
    return seconds


def _routing(args: argparse.Namespace, output: SoundDevice) -> tuple[Routing, SoundDevice | None]:
    """Which channels carry what, and the input device if volts come in."""
    volts_out, volts_in, source = None, None, None
    if args.cv_out is not None:
        if args.cv_out > output.outputs:
            raise InputError(
                f"--cv-out is {args.cv_out}; {output.name} has {output.outputs} channels"
            )
        volts_out = _volts_out(args, output)
    if args.cv_in is not None:
        source = find_input(_name_or_number(args.cv_device))
        if args.cv_in > source.inputs:
            raise InputError(f"--cv-in is {args.cv_in}; {source.name} has {source.inputs} channels")
        volts_in = VoltsIn(args.cv_in - 1, args.full_scale_volts)
    taken = None if volts_out is None else volts_out.channel
    sound = tuple(c for c in range(min(2, output.outputs)) if c != taken)
    return Routing(sound, volts_out, volts_in), source


def _volts_out(args: argparse.Namespace, output: SoundDevice) -> VoltsOut:
    if args.full_scale_volts is not None:
        return VoltsOut(args.cv_out - 1, args.full_scale_volts)
    found = load_calibration(output.label, args.cv_out)
    if found is None:
        raise InputError(
            f"--cv-out {args.cv_out}: {output.label} is not calibrated; run livelag devices "
            f"--calibrate {args.cv_out}, or give --full-scale-volts"
        )
    return VoltsOut(args.cv_out - 1, found.full_scale_v, found.zero_v)


def _channels(routing: Routing) -> int:
    used = [*routing.sound]
    if routing.volts_out is not None:
        used.append(routing.volts_out.channel)
    return max(used) + 1


def _midi_inputs(args: argparse.Namespace) -> MidiInputs | None:
    """The inputs asked for; without a back end an audition goes on, unless one was asked for."""
    if args.no_midi_in:
        return None
    try:
        return MidiInputs(args.midi_in, virtual_name=args.virtual_in)
    except DeviceError as error:
        if args.midi_in or args.virtual_in:
            raise
        warn(str(error))
        return None


def _display(args: argparse.Namespace) -> tuple[PanelProcess | None, PlainPrinter]:
    plain = PlainPrinter(sys.stderr if args.json else sys.stdout)
    shows_panel = can_show_panel() and not args.plain and not args.json
    return (PanelProcess() if shows_panel else None), plain


def _sum_up(args: argparse.Namespace, session: Session) -> dict[str, Any]:
    """Say what was made and what to do with it, and answer the same as JSON."""
    desk, engine = session.desk, session.engine
    say = warn if args.json else print
    for take in desk.takes:
        say(f"{take}: render it again with any stage:")
        say(f"  {_render_command(args, take.with_suffix('.mid'), desk)}")
    if desk.waveform_changed_in_take:
        say("the waveform or level changed during the last take; MIDI does not carry that")
    marks_file = _save_marks(args, desk, say)
    if missed := engine.meters.dropouts:
        say(f"{missed} dropout{'s' * (missed > 1)}; a larger --block or --latency may help")
    return {
        "preset": args.preset,
        "seconds": engine.meters.frames / engine.rate_hz,
        "rate_hz": round(engine.rate_hz),
        "block_frames": session.stream.block_frames,
        "latency_s": session.latency_s,
        "dropouts": engine.meters.dropouts,
        "worst_load": engine.meters.worst_load,
        "messages": engine.meters.received,
        "takes": [str(take) for take in desk.takes],
        "marks": marks_file,
    }


def _render_command(args: argparse.Namespace, performance: Path, desk: Desk) -> str:
    words = ["livelag render", args.preset, "--midi", str(performance)]
    words += ["--rate", str(round(desk.engine.rate_hz)), "--depth", "float"]
    words += ["--waveform", desk.waveform, "--level", f"{desk.level_dbfs:g}"]
    if args.pulse_width is not None:
        words += ["--pulse-width", f"{args.pulse_width:g}"]
    if args.velocity is not None:
        words += ["--velocity", f"{args.velocity:g}"]
    if args.priority is not None:
        words += ["--priority", args.priority]
    words += ["--retrigger"] * args.retrigger + ["--legato-only"] * args.legato_only
    if args.method != "exact":
        words += ["--method", args.method]
    return " ".join(words)


def _save_marks(args: argparse.Namespace, desk: Desk, say: Any) -> str | None:
    """Write the marks if they make sense, and say the next command."""
    if not desk.marks:
        return None
    wrong = desk.marks_out_of_order()
    missing = [MARK_NAMES[n] for n in ("shortest", "longest") if n not in desk.marks]
    if missing or wrong:
        found = ", ".join(f"{MARK_NAMES[n]} {format_value(s, 's')}" for n, s in desk.marks.items())
        reason = wrong or f"{' and '.join(missing)} not marked"
        say(f"marks not saved, {reason}: {found}")
        return None
    path = _marks_path(args)
    from livelag.bench.marks import Marks

    marks = Marks(desk.marks["shortest"], desk.marks.get("handover"), desk.marks["longest"])
    earlier = " (in place of earlier marks)" if path.exists() else ""
    try:
        marks.save(path)
    except FileError:
        times = " ".join(f"--{name} {value:.4g}" for name, value in desk.marks.items())
        say(f"marks not saved; to go on with them all the same:\n  livelag parts {times}")
        raise
    say(f"{path}{earlier}: real parts for these times with:")
    say(f"  livelag parts --marks {path}")
    return str(path)
