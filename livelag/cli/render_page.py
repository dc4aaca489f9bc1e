"""A set of renderings as a page to listen to and choose from: sound files and one HTML file."""

from __future__ import annotations

import argparse
from functools import partial
from pathlib import Path
from typing import Any

from livelag.cli.common import console, new_table, seconds, show_json, warn
from livelag.cli.parallel import in_parallel
from livelag.cli.render_job import RenderJob
from livelag.cli.render_set import remarks, settings_asked, sound_name
from livelag.errors import FileError, InputError
from livelag.files import WholeFolder, cannot_write
from livelag.notes.settings import Controller
from livelag.report.curve import CurveForPicture
from livelag.report.curve_drawing import CurveDrawing, draw_curve
from livelag.report.listening_page import Page, Sound, page_files, page_html
from livelag.sound.render import frames_for

PAGE_NAME = "index.html"
# Half the size of WAV to the bit, and every browser of today plays it.
SOUND_SUFFIX = ".flac"
ROTATIONS = "0,0.5,1"


def _fill_in(args: argparse.Namespace) -> None:
    """Every range at both ends of the pot and half way, unless told otherwise."""
    if args.range is None and args.ranges is None:
        args.ranges = "all"
    if args.rotation is None and args.rotations is None:
        args.rotations = ROTATIONS


def render_page(args: argparse.Namespace, job: RenderJob) -> None:
    """Render every setting asked for into a folder with a page that plays them, whole or not.

    Raises:
        InputError: if a setting is out of range, or no folder is named.
        UnknownNameError: if there is no such range.
        FileError: if the folder holds anything but an older page, or cannot be written.
    """
    _fill_in(args)
    if not args.page:
        raise InputError("--page is ''; name a folder")
    folder = Path(args.page)
    jobs = settings_asked(args, job)
    older = _older_page(folder)
    with WholeFolder(folder, outdated=older) as work:
        names = [sound_name(number, one, SOUND_SUFFIX) for number, one in enumerate(jobs, start=1)]
        tasks = [(one, work / name) for one, name in zip(jobs, names, strict=True)]
        rendered = in_parallel(_render_with_curve, tasks)
        sounds = [
            _sound(number, name, one, curve)
            for number, (name, one, (_, curve)) in enumerate(
                zip(names, jobs, rendered, strict=True), start=1
            )
        ]
        page = Page(
            job.stage.title, job.stage.about, job.song.title, job.song.note_count,
            _moves_controls(job), job.method, tuple(sounds),
        )  # fmt: skip
        (work / PAGE_NAME).write_text(page_html(page), encoding="utf-8", newline="\n")
        size = sum(path.stat().st_size for path in work.iterdir())
    answers = [answer for answer, _ in rendered]
    for number, (name, answer) in enumerate(zip(names, answers, strict=True), start=1):
        answer |= {"number": number, "out": str(folder / name)}
    _show(args, job, {"page": str(folder / PAGE_NAME), "bytes": size, "renders": answers})


def _render_with_curve(job: RenderJob, path: Path) -> tuple[dict[str, Any], CurveDrawing]:
    curve = CurveForPicture(job.rate_hz, frames_for(job.song.duration_s, job.rate_hz))
    answer = job.run(path, more_sinks=[curve])
    stage, setting = job.stage, job.setting
    settled = partial(stage.settled_volts, setting=setting)
    return answer, draw_curve(*curve.curve, answer["seconds"], stage.scale, settled)


def _sound(number: int, name: str, job: RenderJob, curve: CurveDrawing) -> Sound:
    setting, stage = job.setting, job.stage
    return Sound(
        number,
        name,
        stage.range_names[setting.range_index],
        setting.rotation,
        stage.time_constant_s(setting),
        stage.octave_arrival_s(setting),
        curve,
    )


def _moves_controls(job: RenderJob) -> bool:
    """Whether the music itself turns the pot, flips the range or switches the glide."""
    keys = job.player_settings
    moving = {keys.pot_controller, keys.pot_fine_controller, keys.range_controller}
    if keys.heed_portamento_switch:
        moving.add(Controller.PORTAMENTO_SWITCH)
    messages = (timed.message for timed in job.song.messages)
    return any(m.type == "control_change" and m.control in moving for m in messages)


def _older_page(folder: Path) -> frozenset[str]:
    """Files of the older page that the folder holds, which the new one replaces.

    Hidden files, such as those that a desktop leaves, are let be.
    """
    there, text = set(), ""
    try:
        if folder.is_dir():
            there = {path.name for path in folder.iterdir() if not path.name.startswith(".")}
        if (folder / PAGE_NAME).is_file():
            text = (folder / PAGE_NAME).read_text(encoding="utf-8", errors="replace")
    except OSError as error:
        raise cannot_write(folder, error) from error
    sounds = page_files(text)
    ours = there & ({PAGE_NAME, *sounds} if sounds else set())
    if foreign := sorted(there - ours):
        raise FileError(
            f"{folder}: holds {foreign[0]!r}, which is no part of a listening page; "
            "name a new or an empty folder"
        )
    return frozenset(ours)


def _show(args: argparse.Namespace, job: RenderJob, answer: dict[str, Any]) -> None:
    if args.json:
        show_json(answer)
        return
    table = new_table(
        "number", "range", "rotation", "time constant", "file", title=job.stage.title,
        right=("number", "rotation", "time constant"),
    )  # fmt: skip
    for row in answer["renders"]:
        table.add_row(
            str(row["number"]), row["range"], f"{row['rotation']:g}",
            seconds(row["time_constant_s"]), Path(row["out"]).name,
        )  # fmt: skip
    out = console()
    out.print(table)
    size = f"{answer['bytes'] / 1e6:.1f} MB"
    out.print(f"{answer['page']} plays these beside their pitch curves, offline, in any browser")
    out.print(f"of today. To pass it on, send the whole folder: {size}.")
    for sentence in remarks(job, answer["renders"]):
        warn(sentence)
