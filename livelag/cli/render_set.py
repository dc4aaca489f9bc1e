"""A numbered set of renderings in one call, spread over the cores, with an index table."""

from __future__ import annotations

import argparse
import csv
from pathlib import Path
from typing import Any

from livelag.cli.common import console, new_table, seconds, show_json, warn
from livelag.cli.parallel import in_parallel
from livelag.cli.render_job import RenderJob
from livelag.errors import InputError
from livelag.files import WholeFolder

DEFAULT_FOLDER = "livelag-set"
INDEX_NAME = "index.csv"
LONGEST_NAME = 40  # letters of a range's name in a file name
INDEX_COLUMNS = ("number", "file", "range", "rotation", "time_constant_s", "seconds", "peak_dbfs")


def render_set(args: argparse.Namespace, job: RenderJob) -> None:
    """Render every range asked for at every rotation asked for, whole or not at all."""
    folder = Path(DEFAULT_FOLDER if args.out is None else args.out)
    answers = _render_all(settings_asked(args, job), folder)
    if args.json:
        show_json({"out": str(folder), "index": str(folder / INDEX_NAME), "renders": answers})
        return
    table = new_table(*INDEX_COLUMNS, title=job.stage.title, right=("number", "rotation"))
    for row in answers:
        table.add_row(
            str(row["number"]), Path(row["out"]).name, row["range"], f"{row['rotation']:g}",
            seconds(row["time_constant_s"]), f"{row['seconds']:.2f}", f"{row['peak_dbfs']:.1f}",
        )  # fmt: skip
    console().print(table)
    console().print(f"Written to {folder}: {INDEX_NAME}, sound files: {len(answers)}")
    for sentence in remarks(job, answers):
        warn(sentence)


def remarks(job: RenderJob, answers: list[dict[str, Any]]) -> list[str]:
    """What went on in every rendering, said once; what in some only, with their files."""
    files: dict[str, list[str]] = {}
    for row in answers:
        for sentence in job.remarks(row):
            files.setdefault(sentence, []).append(Path(row["out"]).name)
    return [
        sentence if len(names) == len(answers) else f"{', '.join(names)}: {sentence}"
        for sentence, names in files.items()
    ]


def settings_asked(args: argparse.Namespace, job: RenderJob) -> list[RenderJob]:
    """The job at every range asked for, at every rotation asked for.

    Raises:
        InputError: if a rotation is not a number from 0 to 1.
        UnknownNameError: if there is no such range.
    """
    rotations = _rotations(args, job)
    return [job.at(i, rotation) for i in _range_indices(args, job) for rotation in rotations]


def _rotations(args: argparse.Namespace, job: RenderJob) -> list[float]:
    if args.rotations is None:
        return [job.setting.rotation]
    try:
        return [float(part) for part in args.rotations.split(",")]
    except ValueError:
        raise InputError(
            f"--rotations is {args.rotations!r}; write numbers from 0 to 1 such as 0,0.5,1"
        ) from None


def _range_indices(args: argparse.Namespace, job: RenderJob) -> list[int]:
    if args.ranges is None:
        return [job.setting.range_index]
    if args.ranges == "all":
        return list(range(len(job.stage.ranges)))
    return [job.stage.range_index(name.strip()) for name in args.ranges.split(",")]


def _render_all(jobs: list[RenderJob], folder: Path) -> list[dict[str, Any]]:
    """Render into a folder, all of it or nothing."""
    with WholeFolder(folder) as work:
        names = [sound_name(number, job, ".wav") for number, job in enumerate(jobs, start=1)]
        tasks = [(job, work / name) for job, name in zip(jobs, names, strict=True)]
        answers = in_parallel(RenderJob.run, tasks)
        for number, (name, answer) in enumerate(zip(names, answers, strict=True), start=1):
            answer |= {"number": number, "out": str(folder / name)}
        _write_index(work / INDEX_NAME, answers)
    return answers


def sound_name(number: int, job: RenderJob, suffix: str) -> str:
    """File name of one sound of a set, that any system takes: its number, range and rotation."""
    setting = job.setting
    position = "".join(
        c if c.isascii() and c.isalnum() else "-"
        for c in job.stage.range_names[setting.range_index][:LONGEST_NAME]
    )
    return f"{number:02d}-{position}-{setting.rotation:.3f}{suffix}"


def _write_index(path: Path, answers: list[dict[str, Any]]) -> None:
    with path.open("w", encoding="utf-8", newline="") as file:
        writer = csv.writer(file)
        writer.writerow(INDEX_COLUMNS)
        for row in answers:
            writer.writerow(
                [Path(row["out"]).name if c == "file" else row[c] for c in INDEX_COLUMNS]
            )
