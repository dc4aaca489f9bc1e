"""How `livelag fit` shows its answer to people."""

from __future__ import annotations

from pathlib import Path

from rich.console import Console
from rich.table import Table

from livelag.bench.fit import Measured
from livelag.bench.fit_verdict import OPEN, OUTSIDE, WITHIN, Line
from livelag.circuit.stage import GlideStage
from livelag.cli.common import new_table
from livelag.cli.fit_job import Found, Judged, PartLine
from livelag.units import format_value

_DISAGREE = 3.0


def show(out: Console, stage: GlideStage, found: Found, accuracy: float) -> None:
    """Show every capture, the parts if several tell them, and the verdict."""
    if found.parts is not None:
        out.print(stage.title)
        out.print(_captures_table(found.captures))
        out.print(
            f"Time constants of each capture, with their limits. {_limits_explained(accuracy)}"
        )
    for one in found.captures:
        if found.parts is None:
            out.print(_heading(stage, one))
            out.print(_capture_table(one))
            out.print(_explained(one, accuracy))
        name = "" if found.parts is None else f"{one.fit.name}: "
        for line in one.lines:
            if line.suspect:
                out.print(f"{name}{line.what}: {line.suspect}.")
        for note in one.fit.notes:
            out.print(f"note: {name}{note}.")
    if found.parts is not None:
        if found.part_lines:
            out.print(_parts_table(found.part_lines))
            out.print(_parts_explained(found))
        for sentence in found.parts.missing:
            out.print(f"{sentence}.")
    out.print(_summary(found))


def _heading(stage: GlideStage, one: Judged) -> str:
    fit = one.fit
    heading = f"{fit.name}: {fit.output_name!r} follows {fit.input_name!r}"
    return f"{heading}; {stage.title}, {one.where}" if one.lines else heading


def _capture_table(one: Judged) -> Table:
    fit = one.fit
    judged = {line.key: line for line in one.lines}
    columns = ["", "measured", "95 %"]
    if judged:
        columns += ["planned", "least", "most", "verdict"]
    table = new_table(*columns, right=columns[1:6])
    rows = [
        ("time constant", "time_constant_s", "s", fit.time_constant_s),
        ("10-90 % rise", "rise_s", "s", fit.rise_s),
        ("gain", "gain", "", fit.gain),
        ("offset", "offset_v", "V", fit.offset_v),
        ("delay", "delay_s", "s", fit.delay_s),
    ]
    if fit.absorption_share is not None and fit.absorption_time_s is not None:
        rows.append(("soaking capacitance", "share", "%", fit.absorption_share))
        rows.append(("soaking time", "soak_s", "s", fit.absorption_time_s))
    for what, key, unit, measured in rows:
        value, half = _value(measured, unit)
        cells = [what, value, f"± {half}"]
        if key in judged:
            cells += _limits_cells(judged[key])
        table.add_row(*cells)
    return table


def _value(measured: Measured, unit: str) -> tuple[str, str]:
    if unit == "%":
        return f"{100 * measured.value:.3g} %", f"{100 * measured.u95:.2g} %"
    if unit:
        return format_value(measured.value, unit, 4), format_value(measured.u95, unit, 2)
    return f"{measured.value:.4f}", f"{measured.u95:.2g}"


def _limits_cells(line: Line) -> list[str]:
    limits = (line.limits.nominal, line.limits.low, line.limits.high)
    if line.unit:
        return [*(format_value(value, line.unit, 3) for value in limits), line.verdict]
    return [*(f"{value:.4f}" for value in limits), line.verdict]


def _explained(one: Judged, accuracy: float) -> str:
    fit = one.fit
    text = (
        f"Least squares over {int(fit.trace.usable.sum()):,} rows and {fit.steps} "
        f"step{'' if fit.steps == 1 else 's'} with the measured input as the drive; residual "
        f"{format_value(fit.noise_v, 'V', 2)} rms."
    )
    if fit.absorption_share is not None:
        text += (
            "\nThe capacitor soaks: a second time constant lowers the Bayesian information "
            f"criterion by {-(fit.criterion_change or 0.0):.0f}."
        )
    if one.lines:
        text += f"\n{_limits_explained(accuracy)}"
    return text


def _limits_explained(accuracy: float) -> str:
    return (
        "Limits are the worst that parts within their tolerances can do.\nGain and offset allow "
        f"for an oscilloscope good to {100 * accuracy:g} %."
    )


def _telling(lines: tuple[Line, ...]) -> list[Line]:
    """Lines that are outside; the rise only where the time constant is not."""
    outside = [line for line in lines if line.verdict == OUTSIDE]
    return [line for line in outside if line.key != "rise_s" or len(outside) == 1]


def _captures_table(captures: tuple[Judged, ...]) -> Table:
    numbers = ("rotation", "time constant", "95 %", "planned", "least", "most", "gain", "offset")
    columns = ("capture", "range", *numbers, "verdict")
    table = new_table(*columns, right=numbers)
    for one in captures:
        if one.setting is None:
            continue
        fit, line = one.fit, one.lines[0]
        outside = [each.what for each in _telling(one.lines)]
        table.add_row(
            Path(fit.name).name,
            one.range_name,
            f"{one.setting.rotation:g}",
            format_value(fit.time_constant_s.value, "s", 4),
            f"± {format_value(fit.time_constant_s.u95, 's', 2)}",
            *(
                format_value(value, "s", 3)
                for value in (line.limits.nominal, line.limits.low, line.limits.high)
            ),
            f"{fit.gain.value:.3f}",
            format_value(fit.offset_v.value, "V", 2),
            f"outside: {', '.join(outside)}" if outside else WITHIN,
        )
    return table


def _parts_table(lines: tuple[PartLine, ...]) -> Table:
    columns = ("", "measured", "95 %", "planned", "least", "most", "verdict")
    table = new_table(*columns, title="What the captures say together", right=columns[1:6])
    for line in lines:
        limits = (line.limits.nominal, line.limits.low, line.limits.high)
        table.add_row(
            line.what,
            f"{line.measured.value:.4g}",
            f"± {line.measured.u95:.2g}",
            *(f"{value:.4g}" for value in limits),
            line.verdict,
        )
    return table


def _parts_explained(found: Found) -> str:
    text = "Ratios only: no capture tells resistance from capacitance."
    if found.parts is not None and found.parts.misfit is not None:
        text += (
            f" The time constants agree with one another to {found.parts.misfit:.2g} of what "
            "their intervals allow."
        )
        if found.parts.misfit > _DISAGREE:
            text += (
                "\nThat is too much: check that each capture is given with its own range and "
                "rotation."
            )
    return text


def _summary(found: Found) -> str:
    outside = [
        f"{line.what} ({one.where})" if len(found.captures) > 1 else line.what
        for one in found.captures
        for line in _telling(one.lines)
    ]
    outside += [line.what for line in found.part_lines if line.verdict == OUTSIDE]
    if outside:
        return f"Outside the sheet: {', '.join(outside)}."
    if not any(one.lines for one in found.captures):
        return "For a verdict say where the controls stood: --preset, --range and --rotation."
    lines = [line for one in found.captures for line in one.lines]
    verdicts = [line.verdict for line in lines] + [line.verdict for line in found.part_lines]
    if OPEN in verdicts:
        return "Within the sheet; 'within ±' is so only with what the measurement leaves open."
    return "Within the sheet."
