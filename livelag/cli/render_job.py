"""One rendering as a job: everything it needs, picklable, so that a set can use every core."""

from __future__ import annotations

import argparse
import os
from collections.abc import Sequence
from contextlib import ExitStack
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from livelag.circuit.stage import GlideStage, Setting
from livelag.cli.performance import check_method, parameters_from
from livelag.cli.progress import progress_bar
from livelag.cli.render import LEVEL_DBFS
from livelag.cli.song_options import read_song, song_player_settings
from livelag.errors import InputError, UnknownNameError
from livelag.files import WholeFiles
from livelag.notes.midi_file import Song
from livelag.notes.player import PlayerSettings
from livelag.sound.parameters import Value
from livelag.sound.patch import Patch
from livelag.sound.render import Sink, check_rate, frames_for, render
from livelag.sound.soundfile_out import DEPTHS, SoundFileOut, check_format
from livelag.units import amplitude_to_dbfs

DEFAULT_FULL_SCALE_V = 10.0

Samples = NDArray[np.float64]


@dataclass(frozen=True)
class RenderJob:
    """What to render.

    Attributes:
        stage: the stage.
        song: the notes.
        song_name: short name, for file names.
        player_settings: how keys become volts.
        parameters: the patch's parameters that were asked for.
        method: ``exact`` or ``bilinear``.
        rate_hz: frames per second.
        depth: ``16``, ``24`` or ``float``.
        full_scale_v: volts at full scale of the second channel; None is mono.

    Raises:
        InputError: if a number is out of range.
        UnknownNameError: if a name does not exist.
    """

    stage: GlideStage
    song: Song
    song_name: str
    player_settings: PlayerSettings
    parameters: dict[str, Value] = field(default_factory=dict)
    method: str = "exact"
    rate_hz: int = 48000
    depth: str = "24"
    full_scale_v: float | None = None

    def __post_init__(self) -> None:
        check_method(self.method)
        if self.depth not in DEPTHS:
            raise UnknownNameError("depth", self.depth, DEPTHS)
        check_rate(self.rate_hz)
        if self.full_scale_v is not None and not 0.1 <= self.full_scale_v <= 100.0:
            raise InputError(
                f"--full-scale-volts is {self.full_scale_v:g} V; it must be 0.1 to 100 V"
            )
        self.patch()

    @classmethod
    def from_arguments(cls, args: argparse.Namespace, stage: GlideStage) -> RenderJob:
        """Read the command line.

        Raises:
            InputError: if a value is out of range.
            UnknownNameError: if a name does not exist.
            FileError: if the MIDI file cannot be read.
        """
        name, song = read_song(args)
        parameters = parameters_from(args, stage, LEVEL_DBFS)
        if args.bypass:
            parameters["bypass"] = 1.0
        settings = song_player_settings(args)
        full_scale = args.full_scale_volts
        if args.stereo and full_scale is None:
            full_scale = DEFAULT_FULL_SCALE_V
        return cls(
            stage, song, name, settings, parameters, args.method, args.rate, args.depth, full_scale
        )

    def at(self, range_index: int, rotation: float) -> RenderJob:
        """The same job at another setting.

        Raises:
            InputError: if the rotation is outside 0 to 1.
        """
        moved = {**self.parameters, "range": float(range_index), "rotation": rotation}
        return replace(self, parameters=moved)

    def patch(self) -> Patch:
        """A patch for this job."""
        return Patch(self.stage, self.method, self.player_settings, **self.parameters)

    @property
    def setting(self) -> Setting:
        """Where the controls stand at the start."""
        return self.patch().setting

    @property
    def where(self) -> str:
        """Range and rotation in words."""
        setting = self.setting
        bypassed = ", bypassed" if setting.bypassed else ""
        return (
            f"range {self.stage.range_names[setting.range_index]!r}, "
            f"rotation {setting.rotation:g}{bypassed}"
        )

    @property
    def song_title(self) -> str:
        """The song in words."""
        return f"{self.song.title!r}"

    def run(
        self,
        out: Path,
        *,
        cv: Path | None = None,
        cv_rate: float = 1000.0,
        picture: Path | None = None,
        more_sinks: Sequence[Sink] = (),
        show_progress: bool = False,
    ) -> dict[str, Any]:
        """Render to files, all of them whole or none, and return the answer of the command.

        ``more_sinks`` are given sound and volts too.

        Raises:
            InputError: if a file cannot hold the rendering, or a rate is out of bounds.
            UnknownNameError: if a suffix does not exist.
            FileError: if a file cannot be written.
        """
        frames = frames_for(self.song.duration_s, self.rate_hz)
        channels = 1 if self.full_scale_v is None else 2
        check_format(out, self.depth, channels, self.rate_hz, frames)
        if cv is not None:
            from livelag.report.curve import check_curve

            check_curve(cv)
        if picture is not None:
            from livelag.report.figures import check_picture

            check_picture(picture)
        if not 0.001 <= cv_rate <= self.rate_hz:
            raise InputError(f"--cv-rate is {cv_rate:g} Hz; it must be 0.001 to {self.rate_hz} Hz")
        _refuse_same_file([p for p in (out, cv, picture) if p is not None])
        patch = self.patch()
        with WholeFiles() as files, ExitStack() as open_files:
            wave = open_files.enter_context(
                SoundFileOut(files.temporary(out), self.rate_hz, channels, self.depth)
            )
            sinks: list[Sink] = [_SoundSink(wave, self.full_scale_v), *more_sinks]
            if cv is not None:
                from livelag.report.curve import CurveCsv

                csv = CurveCsv(files.temporary(cv), self.rate_hz, cv_rate, self.stage.scale)
                sinks.append(open_files.enter_context(csv))
            curve = None
            if picture is not None:
                from livelag.report.curve import CurveForPicture

                picture_file = files.temporary(picture)
                curve = CurveForPicture(self.rate_hz, frames)
                sinks.append(curve)
            with progress_bar("rendering", frames, show=show_progress) as progress:
                done = render(patch, self.song.messages, frames, self.rate_hz, sinks, progress)
            if curve is not None:
                self._draw(curve.curve, picture_file)
        answer = self._answer(out, done.seconds, done.peak, channels)
        answer |= {"frames": done.frames}
        answer |= {"cv": str(cv)} if cv else {}
        answer |= {"picture": str(picture)} if picture else {}
        counts = done.counts
        answer |= {
            "clipped_notes": counts.clipped_notes,
            "unglided_notes": counts.unglided_notes,
            "clamped_frames": counts.clamped_frames,
            "ceiling_frames": counts.ceiling_frames,
        }
        return answer

    def _answer(self, out: Path, seconds: float, peak: float, channels: int) -> dict[str, Any]:
        setting = self.setting
        return {
            "out": str(out),
            "seconds": seconds,
            "frames": 0,
            "rate_hz": self.rate_hz,
            "channels": channels,
            "time_constant_s": self.stage.time_constant_s(setting),
            "notes": self.song.note_count,
            "peak_dbfs": amplitude_to_dbfs(peak),
            "method": self.method,
            "range": self.stage.range_names[setting.range_index],
            "rotation": setting.rotation,
            "full_scale_volts": self.full_scale_v,
        }

    def _draw(self, curve: tuple[Samples, Samples, Samples], path: Path) -> None:
        from livelag.report.figures import curve_figure, save_figure
        from livelag.units import format_value

        tau = format_value(self.stage.time_constant_s(self.setting), "s")
        note = f"{self.song.title}; {self.where}; time constant {tau}; {self.method}"
        save_figure(curve_figure(*curve, self.stage.scale, self.stage.title, note), path)

    def remarks(self, answer: dict[str, Any]) -> list[str]:
        """Sentences about what went on that the sound alone would not tell."""
        found = []
        if answer["clipped_notes"]:
            low, high = self.stage.swing_notes()
            found.append(
                f"notes that the buffers cannot pass (they pass {low:.1f} to {high:.1f}) "
                f"and that play out of tune: {answer['clipped_notes']}"
            )
        if answer["unglided_notes"] and self.player_settings.glide == "always":
            found.append(
                f"notes for which the music turned the glide off (controller 65): "
                f"{answer['unglided_notes']}; --keep-gliding overrules it"
            )
        if answer["clamped_frames"]:
            found.append(
                f"frames that asked for a pitch above what {self.rate_hz} Hz can hold: "
                f"{answer['clamped_frames']}"
            )
        if answer["ceiling_frames"]:
            found.append(
                f"frames that the ceiling at -1 dBFS held down: {answer['ceiling_frames']}"
            )
        return found


class _SoundSink:
    """Puts sound, and glide volts beside it if asked, into a sound file."""

    def __init__(self, out: SoundFileOut, full_scale_v: float | None) -> None:
        self._out = out
        self._full_scale_v = full_scale_v

    def write(self, audio: Samples, key_volts: Samples, glide_volts: Samples) -> None:
        if self._full_scale_v is None:
            self._out.write(audio[:, np.newaxis])
            return
        scaled = glide_volts / self._full_scale_v
        if float(np.abs(scaled).max()) > 1.0:
            worst = float(np.abs(glide_volts).max())
            raise InputError(
                f"--full-scale-volts is {self._full_scale_v:g} V; the glide reaches {worst:.3g} V"
            )
        self._out.write(np.column_stack((audio, scaled)))


def _refuse_same_file(paths: list[Path]) -> None:
    seen = set()
    for path in paths:
        if (real := os.path.realpath(path)) in seen:
            raise InputError(f"{path}: is named for two outputs; give each a file of its own")
        seen.add(real)
