"""The work of `livelag fit`: every capture read, fitted and judged, and the answer as JSON."""

from __future__ import annotations

import argparse
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from livelag.bench.capture import Capture, read_capture
from livelag.bench.capture_roles import find_roles
from livelag.bench.fit import CaptureFit, Measured, fit_capture
from livelag.bench.fit_parts import (
    PartsFit,
    capacitor_limits,
    fit_parts,
    law_limits,
    series_limits,
)
from livelag.bench.fit_stage import stage_as_built
from livelag.bench.fit_verdict import OUTSIDE, Line, judge, verdict
from livelag.bench.limits import Limits
from livelag.circuit.kinds import Absorption
from livelag.circuit.stage import GlideStage, Setting
from livelag.cli.progress import progress_bar

_LONG_BYTES = 20_000_000


@dataclass(frozen=True)
class Judged:
    """One capture with its fit.

    Attributes:
        fit: what it says.
        setting: where the controls stood; None if that was not said.
        range_name: name of the range, empty likewise.
        lines: the verdict, empty likewise.
    """

    fit: CaptureFit
    setting: Setting | None
    range_name: str
    lines: tuple[Line, ...]

    @property
    def where(self) -> str:
        """Where the controls stood, in words."""
        if self.setting is None:
            return ""
        return f"range {self.range_name!r}, rotation {self.setting.rotation:g}"


@dataclass(frozen=True)
class PartLine:
    """A ratio of parts held against the plan."""

    what: str
    key: str
    measured: Measured
    limits: Limits
    verdict: str


@dataclass(frozen=True)
class Found:
    """Everything that came of a command line.

    Attributes:
        captures: one or more.
        parts: of several captures; None of one.
        part_lines: ratios of the parts against the plan.
    """

    captures: tuple[Judged, ...]
    parts: PartsFit | None
    part_lines: tuple[PartLine, ...]

    @property
    def within(self) -> bool | None:
        """Whether no line is outside; None if there is no line."""
        said = [line.verdict for one in self.captures for line in one.lines]
        said += [line.verdict for line in self.part_lines]
        return OUTSIDE not in said if said else None


def fit_all(
    args: argparse.Namespace,
    stage: GlideStage,
    named: list[tuple[Path, Setting | None]],
    interval_s: float | None,
    accuracy: float,
) -> Found:
    """Read, fit and judge every capture.

    Raises:
        LivelagError: if a capture cannot be read or cannot tell.
    """
    captures = []
    for path, setting in named:
        capture = _read(path, interval_s, quiet=args.json)
        roles = find_roles(capture, args.input_channel, args.output_channel)
        expected = _expected(stage, setting)
        fit = fit_capture(capture.name, roles, expected, capture.notes)
        lines = () if setting is None else verdict(stage, setting, fit, accuracy)
        name = "" if setting is None else stage.range_names[setting.range_index]
        captures.append(Judged(fit, setting, name, lines))
    if len(captures) == 1:
        return Found(tuple(captures), None, ())
    measured = [(one.setting, one.fit.time_constant_s) for one in captures if one.setting]
    parts = fit_parts(stage, measured)
    return Found(tuple(captures), parts, _part_lines(stage, parts))


def as_built(stage: GlideStage, found: Found, accuracy: float) -> GlideStage:
    """The stage as built, from captures whose settings are known.

    Raises:
        InputError: if no parts could give what was measured.
    """
    fits = [(one.setting, one.fit) for one in found.captures if one.setting]
    return stage_as_built(stage, fits, found.parts, accuracy)


def _expected(stage: GlideStage, setting: Setting | None) -> tuple[Absorption, ...]:
    """Branches of a range's capacitors, as shares of its capacitance; the first if not said."""
    parts = stage.connected(0 if setting is None else setting.range_index)
    whole = sum(part.capacitance_f for part in parts)
    return tuple(
        Absorption(branch.fraction * part.capacitance_f / whole, branch.time_s)
        for part in parts
        for branch in part.branches
    )


def _part_lines(stage: GlideStage, parts: PartsFit) -> tuple[PartLine, ...]:
    rows: list[tuple[str, str, Measured, Limits]] = []
    if parts.series_ratio is not None:
        limits = series_limits(stage)
        rows.append(("series resistor / pot", "series_ratio", parts.series_ratio, limits))
    if parts.law_middle is not None:
        limits = law_limits(stage)
        rows.append(("pot law at mid-travel", "law_middle", parts.law_middle, limits))
    first = min(parts.whole_pot_s)
    names = stage.range_names
    for index, ratio in parts.capacitor_ratios.items():
        what = f"capacitance {names[index]!r} / {names[first]!r}"
        rows.append((what, "capacitor_ratio", ratio, capacitor_limits(stage, index, first)))
    return tuple(
        PartLine(what, key, measured, limits, judge(measured.value, measured.u95, limits))
        for what, key, measured, limits in rows
    )


def answer(preset: str, stage: GlideStage, found: Found) -> dict[str, Any]:
    """The JSON object; the first capture's numbers stand at its top."""
    first = _capture_answer(found.captures[0])
    result = {"preset": preset, **first, "within_sheet": found.within}
    if found.parts is None:
        return result
    result["captures"] = [_capture_answer(one) for one in found.captures]
    parts = found.parts
    result["parts"] = {
        "misfit": parts.misfit,
        "taper": parts.taper.name,
        "cannot_tell": list(parts.missing),
        "whole_pot_time_constants": [
            {"range": stage.range_names[i], "value_s": m.value, "u95_s": m.u95}
            for i, m in parts.whole_pot_s.items()
        ],
        "ratios": [
            {
                "what": line.what,
                "key": line.key,
                "value": line.measured.value,
                "u95": line.measured.u95,
                **_limits(line.limits),
                "verdict": line.verdict,
            }
            for line in found.part_lines
        ],
    }
    return result


def _limits(limits: Limits) -> dict[str, float]:
    return {"planned": limits.nominal, "low": limits.low, "high": limits.high}


def _capture_answer(one: Judged) -> dict[str, Any]:
    fit = one.fit
    share, time = fit.absorption_share, fit.absorption_time_s
    said = [line.verdict for line in one.lines]
    return {
        "capture": fit.name,
        "input_channel": fit.input_name,
        "output_channel": fit.output_name,
        "range": one.range_name or None,
        "rotation": None if one.setting is None else one.setting.rotation,
        "time_constant_s": fit.time_constant_s.value,
        "time_constant_u95_s": fit.time_constant_s.u95,
        "gain": fit.gain.value,
        "gain_u95": fit.gain.u95,
        "offset_v": fit.offset_v.value,
        "offset_u95_v": fit.offset_v.u95,
        "delay_s": fit.delay_s.value,
        "delay_u95_s": fit.delay_s.u95,
        "rise_s": fit.rise_s.value,
        "rise_u95_s": fit.rise_s.u95,
        "absorption_share": None if share is None else share.value,
        "absorption_share_u95": None if share is None else share.u95,
        "absorption_time_s": None if time is None else time.value,
        "absorption_time_u95_s": None if time is None else time.u95,
        "criterion_change": fit.criterion_change,
        "noise_v": fit.noise_v,
        "steps": fit.steps,
        "rows_fitted": int(fit.trace.usable.sum()),
        "averaged": fit.trace.averaged,
        "notes": list(fit.notes),
        "within_sheet": OUTSIDE not in said if said else None,
        "lines": [
            {
                "what": line.key,
                "value": line.measured.value,
                "u95": line.measured.u95,
                "allowance": line.allowance,
                **_limits(line.limits),
                "verdict": line.verdict,
                "suspect": line.suspect or None,
            }
            for line in one.lines
        ],
    }


def _read(path: Path, interval_s: float | None, quiet: bool) -> Capture:
    size = path.stat().st_size if path.is_file() else 0
    show = not quiet and size > _LONG_BYTES
    with progress_bar(f"reading {path.name}", size, show=show, size_in_bytes=True) as progress:
        return read_capture(path, interval_s, progress)
