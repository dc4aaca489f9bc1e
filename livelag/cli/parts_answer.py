"""The answer of `livelag parts` as JSON and as rows."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import replace
from typing import Any

from livelag.bench.candidates import Candidate
from livelag.bench.parts_search import PartsResult
from livelag.bench.spread import Spread, SpreadResult, spread
from livelag.bench.wishes import (
    LONGEST,
    SERIES_SWITCHED,
    SHORTEST,
    Wishes,
    one_pot_error,
    relaxations,
)
from livelag.circuit.stage import GlideStage
from livelag.cli.extras import Rows

BUILDS, SEED = 20_000, 1
FITS = 1e-6  # an error that is none


def parts_answer(
    wishes: Wishes, result: PartsResult, stage: GlideStage, choice: int
) -> dict[str, Any]:
    """All that was found, SI units in the key names."""
    built = choice_spread(stage, wishes)
    return {
        "wishes": {
            "times_s": list(wishes.times_s),
            "overlap_ratio": wishes.overlap_ratio if wishes.ranges > 1 else None,
            "rotations": list(wishes.ends),
            "within_fraction": wishes.within,
            "ranges": [
                {"name": name, "shortest_s": low, "longest_s": high}
                for name, (low, high) in zip(wishes.range_names, wishes.targets, strict=True)
            ],
        },
        "combinations": result.combinations,
        "topologies": [
            {
                "topology": name,
                "least_error_fraction": least_error(wishes, name),
                "fits_exactly": least_error(wishes, name) < FITS,
                "best_error_fraction": None if best is None else best.worst_error_fraction,
                "best_score": None if best is None else best.score,
            }
            for name, best in result.best_of.items()
        ],
        "one_pot_relaxed": [
            {
                "wish": row.name,
                "wished_s": row.wished_s,
                "relaxed_s": row.relaxed_s,
                "least_error_fraction": row.left_over,
            }
            for row in relaxations(wishes)
        ],
        "candidates": [
            _candidate(number, one, stage) for number, one in enumerate(result.candidates, start=1)
        ],
        "choice": choice,
        "spread": {
            "builds": BUILDS,
            "seed": SEED,
            "ranges": [
                {
                    "name": name,
                    **{f"{end}_s": _quantiles(built.of(name, end)) for end in (SHORTEST, LONGEST)},
                }
                for name in wishes.range_names
            ],
            "gap_fraction": built.gap_fraction,
        },
    }


def _quantiles(row: Spread) -> dict[str, float]:
    low, middle, high = row.quantiles
    return {"p2_5": low, "p50": middle, "p97_5": high}


def least_error(wishes: Wishes, connection: str) -> float:
    """Worst error, as a fraction, of a connection with parts of any value at all."""
    return 0.0 if connection == SERIES_SWITCHED else one_pot_error(wishes)


def choice_spread(stage: GlideStage, wishes: Wishes) -> SpreadResult:
    """What tolerances do to the choice at the rotations wished; gaps are those of the whole pot."""
    whole = spread(stage, BUILDS, SEED)
    if wishes.ends == (0.0, 1.0):
        return whole
    # A pot whose stops are at these rotations: its two ends grow alike, as the whole one's do.
    low, high = (stage.pot.resistance_at(rotation) for rotation in wishes.ends)
    between = replace(stage.pot, resistance_ohms=high, end_ohms=low)
    return replace(
        spread(replace(stage, pot=between), BUILDS, SEED), gap_fraction=whole.gap_fraction
    )


def _candidate(number: int, one: Candidate, stage: GlideStage) -> dict[str, Any]:
    return {
        "choice": number,
        "score": one.score,
        "pareto": one.pareto,
        "topology": one.connection,
        "series_ohms": one.series[0].resistance_ohms,
        "pot_ohms": one.pot.resistance_ohms,
        "pot_taper": one.pot.taper.name,
        "capacitors_f": [part.capacitance_f for part in one.capacitors],
        "capacitor_kinds": [part.kind for part in one.capacitors],
        "ranges": [
            {"name": name, "shortest_s": low, "longest_s": high, "series_ohms": ohms}
            for name, (low, high), ohms in _each_range(one)
        ],
        "worst_error_fraction": one.worst_error_fraction,
        "rms_error_fraction": math.expm1(one.rms_log),
        "errors": [
            {
                "range": row.range_name,
                "end": row.end,
                "wished_s": row.wished_s,
                "got_s": row.got_s,
                "error_fraction": row.error_fraction,
            }
            for row in one.reached
        ],
        "tuning_cents_per_octave": one.insulation_cents_per_octave,
        "bias_limit_cents": one.bias_cents,
        "drive_a": one.drive_a,
        "parts": one.part_count,
    }


def _each_range(one: Candidate) -> Iterator[tuple[str, tuple[float, float], float]]:
    names = [row.range_name for row in one.reached[::2]]
    series = one.series * (len(names) // len(one.series))
    for name, times, part in zip(names, one.ranges_s, series, strict=True):
        yield name, times, part.resistance_ohms


def csv_rows(wishes: Wishes, candidates: Sequence[Candidate]) -> Rows:
    """A row for each range of each candidate."""
    header = (
        "choice", "score", "pareto", "topology", "range", "series_ohms", "pot_ohms", "pot_taper",
        "capacitor_f", "capacitor_kind", "shortest_s", "longest_s", "wished_shortest_s",
        "wished_longest_s", "worst_error_fraction", "tuning_cents_per_octave", "drive_a", "parts",
    )  # fmt: skip

    def rows() -> Iterator[tuple[object, ...]]:
        for number, one in enumerate(candidates, start=1):
            for (name, (low, high), ohms), part, wished in zip(
                _each_range(one), one.capacitors, wishes.targets, strict=True
            ):
                yield (
                    number, one.score, one.pareto, one.connection, name, ohms,
                    one.pot.resistance_ohms, one.pot.taper.name, part.capacitance_f, part.kind,
                    low, high, *wished, one.worst_error_fraction,
                    one.insulation_cents_per_octave, one.drive_a, one.part_count,
                )  # fmt: skip

    return header, rows()
