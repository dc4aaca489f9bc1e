"""The tables of `livelag parts`, for people."""

from __future__ import annotations

import shlex
from collections.abc import Sequence

from rich.table import Table

from livelag.bench.candidates import Candidate, connection_words
from livelag.bench.parts_search import PartsResult
from livelag.bench.spread import SpreadResult
from livelag.bench.wishes import SHORTEST, Wishes, one_pot_error, relaxations
from livelag.circuit.stage import GlideStage
from livelag.cli.common import console, new_table, seconds
from livelag.cli.extras import show_written
from livelag.cli.parts_answer import BUILDS, FITS, choice_spread, least_error
from livelag.units import format_value

WIDE = 114  # columns of a terminal that shows all there is to a choice
NEAR_ENOUGH = 0.01  # an error of one pot that is lost among those of real values


_LEGEND = (
    "Time constants; the best of {:,}, proven; less score is better (parts --help); "
    "*: none is better in all."
)


def show_parts(
    wishes: Wishes, result: PartsResult, stage: GlideStage, choice: int, written: dict[str, str]
) -> None:
    """Print what was found, what the choice is, and what to do with it."""
    out = console()
    out.print(_candidates_table(wishes, result.candidates))
    out.print(_LEGEND.format(result.combinations))
    if wishes.ends != (0.0, 1.0):
        out.print(
            "Shortest and longest are at the pot's stops; the error, and the table below, are at "
            "the rotations wished."
        )
    chosen = result.candidates[choice - 1]
    built = choice_spread(stage, wishes)
    out.print(_choice_table(chosen, built, choice))
    out.print("Both ends of each range, and where random builds within the tolerances fall.")
    out.print(parts_sentence(chosen))
    polarised = [c.name for c in stage.capacitors if c.kind_data.polarised]
    if polarised:
        out.print(
            f"Polarised: {' and '.join(polarised)}. Plus to the pot, minus to ground: reversed it "
            "can fail."
        )
    if built.gap_fraction is not None:
        share = f"{100 * built.gap_fraction:.3g} % of {BUILDS:,} builds"
        hint = "; a larger --overlap makes them fewer" if built.gap_fraction else ""
        out.print(f"{share} have a gap between ranges{hint}.")
    if wishes.ranges > 1:
        _show_connections(wishes, result)
    saved = written.pop("saved", None)
    show_written(out, written)
    if saved is not None:
        name = shlex.quote(saved)
        out.print(f"choice {choice} in {saved}; next:")
        out.print(f"  livelag audition {name}")
        out.print(f"  livelag render {name} --phrase procession")


def _candidates_table(wishes: Wishes, candidates: Sequence[Candidate]) -> Table:
    wide = console().width >= WIDE
    columns = ["choice", "series", "pot", "capacitors" if wide else "C", "connection"]
    columns += ["shortest", "longest", "error", *(("tuning", "drive", "score") if wide else ())]
    right = [name for name in columns if name != "connection"]
    table = new_table(*columns, title=_title(wishes), right=right)
    for number, one in enumerate(candidates, start=1):
        costs = (f"{one.criteria[1]:.2f} ct", format_value(one.drive_a, "A", 2), f"{one.score:.2f}")
        table.add_row(
            f"{'*' if one.pareto else ''} {number}",
            "\n".join(format_value(part.resistance_ohms, "Ω") for part in one.series),
            format_value(one.pot.resistance_ohms, "Ω"),
            "\n".join(format_value(part.capacitance_f, "F") for part in one.capacitors),
            one.connection if wide else one.connection.replace("-", "-\n"),
            "\n".join(seconds(shortest) for shortest, _ in one.ranges_s),
            "\n".join(seconds(longest) for _, longest in one.ranges_s),
            _percent(one.worst.error_fraction),
            *(costs if wide else ()),
        )
    return table


def _title(wishes: Wishes) -> str:
    text = f"Wished: {seconds(wishes.times_s[0])} to {seconds(wishes.times_s[-1])}"
    if wishes.ranges > 1:
        between = " and ".join(seconds(time) for time in wishes.times_s[1:-1])
        text += (
            f", handing over at {between} with an overlap of a factor of {wishes.overlap_ratio:.3g}"
        )
    if wishes.ends != (0.0, 1.0):
        text += f", at rotations {wishes.ends[0]:g} and {wishes.ends[1]:g}"
    return text


def _choice_table(chosen: Candidate, built: SpreadResult, choice: int) -> Table:
    columns = ("range", "end", "wished", "with these parts", "error", "95 % of builds", "to")
    table = new_table(*columns, title=f"Choice {choice}", right=columns[2:])
    for row in chosen.reached:
        low, _, high = built.of(row.range_name, row.end).quantiles
        table.add_row(
            row.range_name if row.end == SHORTEST else "",
            row.end,
            seconds(row.wished_s),
            seconds(row.got_s),
            _percent(row.error_fraction),
            seconds(low),
            seconds(high),
        )
    return table


def parts_sentence(chosen: Candidate) -> str:
    """The parts list and the wiring in words."""
    each = [format_value(part.resistance_ohms, "Ω") for part in chosen.series]
    series = each[0] if len(each) == 1 else f"{' and '.join(each)} (a resistor for each range)"
    capacitors = ", ".join(
        f"C{number} {format_value(part.capacitance_f, 'F')} {part.kind}"
        for number, part in enumerate(chosen.capacitors, start=1)
    )
    pot = f"{format_value(chosen.pot.resistance_ohms, 'Ω')} {chosen.pot.taper.name} pot"
    tolerances = [chosen.series[0].tolerance, chosen.pot.tolerance]
    tolerances += [part.tolerance for part in chosen.capacitors]
    percents = ", ".join(f"{100 * tolerance:g} %" for tolerance in tolerances)
    return f"Series {series}, {pot}, {capacitors} ({percents}): {connection_words(chosen)}"


def _show_connections(wishes: Wishes, result: PartsResult) -> None:
    out = console()
    columns = ("connection", "error of the best", "with any values at all")
    table = new_table(*columns, right=columns[1:])
    for name, best in result.best_of.items():
        least = least_error(wishes, name)
        table.add_row(
            name,
            "none near enough" if best is None else _percent(best.worst.error_fraction),
            "fits exactly" if least < FITS else f"{100 * least:.2g} %",
        )
    out.print(table)
    least = one_pot_error(wishes)
    ratios = " and ".join(f"{high / low:.3g}" for low, high in wishes.targets)
    out.print(
        "With one series resistor, one pot gives every range the same ratio of longest to "
        f"shortest; wished are {ratios}."
    )
    if least < NEAR_ENOUGH:
        return
    out.print("To fit that, one wish would have to move, the others kept:")
    moved = ("wish", "as wished", "would fit at", "error left")
    table = new_table(*moved, right=moved[1:])
    for row in relaxations(wishes):
        left = "none" if row.left_over < FITS else f"{100 * row.left_over:.2g} %"
        table.add_row(row.name, seconds(row.wished_s), seconds(row.relaxed_s), left)
    out.print(table)
    out.print("Error left: what remains even then with any values at all.")


def _percent(fraction: float) -> str:
    return f"{100 * fraction:+.1f} %"
