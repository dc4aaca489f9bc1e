"""A numbered set of renderings in one call, spread over the cores, with an index table."""

from __future__ import annotations

import argparse
import csv
import multiprocessing
import shutil
import signal
import tempfile
from collections.abc import Iterator
from concurrent.futures import ProcessPoolExecutor
from concurrent.futures.process import BrokenProcessPool
from contextlib import contextmanager
from pathlib import Path
from typing import Any

from livelag.cli.common import console, new_table, seconds, show_json, warn
from livelag.cli.render_job import RenderJob
from livelag.errors import FileError, InputError, LivelagError
from livelag.files import cannot_write

DEFAULT_FOLDER = "livelag-set"
INDEX_NAME = "index.csv"
INDEX_COLUMNS = ("number", "file", "range", "rotation", "time_constant_s", "seconds", "peak_dbfs")


def render_set(args: argparse.Namespace, job: RenderJob) -> None:
    """Render every range asked for at every rotation asked for, whole or not at all."""
    folder = Path(DEFAULT_FOLDER if args.out is None else args.out)
    settings = [(i, r) for i in _range_indices(args, job) for r in _rotations(args, job)]
    jobs = [job.at(index, rotation) for index, rotation in settings]
    answers = _render_all(jobs, folder)
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
    for sentence in _remarks(job, answers):
        warn(sentence)


def _remarks(job: RenderJob, answers: list[dict[str, Any]]) -> list[str]:
    """What went on in every rendering, said once; what in some only, with their files."""
    files: dict[str, list[str]] = {}
    for row in answers:
        for sentence in job.remarks(row):
            files.setdefault(sentence, []).append(Path(row["out"]).name)
    return [
        sentence if len(names) == len(answers) else f"{', '.join(names)}: {sentence}"
        for sentence, names in files.items()
    ]


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
    """Render into a folder beside the one asked for, and move the files over when all are done."""
    if folder.exists() and not folder.is_dir():
        raise FileError(f"{folder}: is a file; a set of renderings needs a folder")
    if not folder.parent.is_dir():
        raise FileError(f"{folder}: folder {str(folder.parent)!r} does not exist; make it first")
    try:
        work = Path(tempfile.mkdtemp(prefix=f".{folder.name}.", suffix=".part", dir=folder.parent))
    except OSError as error:
        raise cannot_write(folder, error) from error
    try:
        names = [_name(number, job) for number, job in enumerate(jobs, start=1)]
        answers = _in_parallel(jobs, [work / name for name in names])
        for number, (name, answer) in enumerate(zip(names, answers, strict=True), start=1):
            answer |= {"number": number, "out": str(folder / name)}
        _write_index(work / INDEX_NAME, answers)
        folder.mkdir(exist_ok=True)
        for path in work.iterdir():
            path.replace(folder / path.name)
    except OSError as error:
        if isinstance(error, FileError):  # it names a file in the folder that nobody asked for
            raise FileError(str(error).replace(str(work), str(folder))) from error
        raise cannot_write(folder, error) from error
    finally:
        shutil.rmtree(work, ignore_errors=True)
    return answers


def _name(number: int, job: RenderJob) -> str:
    setting = job.setting
    position = "".join(
        c if c.isalnum() else "-" for c in job.stage.range_names[setting.range_index]
    )
    return f"{number:02d}-{position}-{setting.rotation:.3f}.wav"


def _in_parallel(jobs: list[RenderJob], paths: list[Path]) -> list[dict[str, Any]]:
    if len(jobs) == 1:
        return [jobs[0].run(paths[0])]
    # Spawned, not forked: threads of the parent must not be copied half-way.
    pool = ProcessPoolExecutor(mp_context=multiprocessing.get_context("spawn"))
    try:
        with _stop_afterwards():
            futures = [
                pool.submit(RenderJob.run, job, path) for job, path in zip(jobs, paths, strict=True)
            ]
        return [future.result() for future in futures]
    except BrokenProcessPool as error:
        raise LivelagError(
            "a rendering process was ended from outside, perhaps for want of memory"
        ) from error
    except BaseException:
        for process in list((pool._processes or {}).values()):
            process.terminate()
        raise
    finally:
        pool.shutdown(cancel_futures=True)


@contextmanager
def _stop_afterwards() -> Iterator[None]:
    """Put off Ctrl-C and SIGTERM, so that no process is lost while it is being started.

    The processes inherit the blocked Ctrl-C and leave it to their parent.
    """
    asked: list[int] = []
    ours = {
        number: signal.signal(number, lambda number, frame: asked.append(number))
        for number in (signal.SIGINT, signal.SIGTERM)
    }
    if hasattr(signal, "pthread_sigmask"):
        signal.pthread_sigmask(signal.SIG_BLOCK, [signal.SIGINT])
    try:
        yield
    finally:
        if hasattr(signal, "pthread_sigmask"):
            signal.pthread_sigmask(signal.SIG_UNBLOCK, [signal.SIGINT])
        for number, handler in ours.items():
            signal.signal(number, handler)
    if asked:
        raise KeyboardInterrupt


def _write_index(path: Path, answers: list[dict[str, Any]]) -> None:
    with path.open("w", encoding="utf-8", newline="") as file:
        writer = csv.writer(file)
        writer.writerow(INDEX_COLUMNS)
        for row in answers:
            writer.writerow(
                [Path(row["out"]).name if c == "file" else row[c] for c in INDEX_COLUMNS]
            )
