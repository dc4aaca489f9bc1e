"""What part tolerances do to the ranges: quantiles, exact corners, gaps, and who is to blame.

Every end of a range, and the overlap of neighbours, is a product and quotient of sums of parts:
it rises or falls with each part whatever the others are, so its extremes are at corners.

Blame. The parts are independent, so the share of the variance of ln(time) that a part explains
is its squared correlation with it; in the linear approximation ln(time) = sum of S_i t_i d_i
with sensitivities S_i = d ln(time)/d ln(x_i) it is (S_i t_i)^2 over the sum of these.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from livelag.bench.builds import Recipe, check_draw, corners, draw, draw_one
from livelag.bench.ranges import neighbours
from livelag.circuit.network import Matrix, Vector
from livelag.circuit.parts import require
from livelag.circuit.stage import GlideStage

QUANTILES = (0.025, 0.5, 0.975)
MOST_KEPT = 1_000_000  # up to here quantiles are exact; beyond they come from bins
BINS = 65_536
SHOWN_BINS = 256
_STEP = 1e-6  # of a tolerance-sized step, for sensitivities


@dataclass(frozen=True, slots=True)
class Spread:
    """How one quantity spreads.

    Attributes:
        of: the range, or the two neighbours that overlap.
        what: ``shortest``, ``longest`` (time constants in seconds) or ``overlap`` (a ratio).
        nominal: with every part at its value.
        quantiles: at `QUANTILES` of the builds.
        lowest: its exact least over all parts inside their tolerances.
        highest: its exact greatest.
        lowest_build: the build in which it is least, from 1.
        highest_build: the build in which it is greatest.
        blame: part -> share of the variance of its logarithm, from the builds; they sum to
            about 1. Empty if nothing varies.
        linear_blame: the same in the linear approximation; they sum to 1.
        counts: (`SHOWN_BINS`,) builds in equal ratios from lowest to highest.
    """

    of: str
    what: str
    nominal: float
    quantiles: tuple[float, float, float]
    lowest: float
    highest: float
    lowest_build: int
    highest_build: int
    blame: dict[str, float]
    linear_blame: dict[str, float]
    counts: NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class SpreadResult:
    """What a number of builds came to.

    Attributes:
        builds: how many.
        spreads: both ends of every range in switch order, then the overlaps of neighbours.
        gap_fraction: share of the builds with a gap somewhere between ranges; None for one range.
    """

    builds: int
    spreads: tuple[Spread, ...]
    gap_fraction: float | None

    def of(self, name: str, what: str) -> Spread:
        """The spread of one quantity.

        Raises:
            KeyError: if there is none such.
        """
        return {(row.of, row.what): row for row in self.spreads}[name, what]


def spread(
    stage: GlideStage,
    builds: int,
    seed: int,
    distribution: str = "uniform",
    progress: Callable[[int], None] = lambda builds: None,
) -> SpreadResult:
    """Draw builds and look at their times, in constant memory beyond `MOST_KEPT`.

    Args:
        stage: as designed.
        builds: how many, 1 to 100 million.
        seed: the same seed draws the same builds.
        distribution: ``uniform`` within the tolerance, or ``normal``: tolerance at two standard
            deviations, cut there.
        progress: called with the number of builds done after each chunk.

    Raises:
        InputError: if a number is out of range, or the stage has too many parts.
        UnknownNameError: if there is no such distribution.
    """
    check_draw(builds, seed, distribution)
    recipe = Recipe(stage)
    quantities = _Quantities(recipe)
    tally = _Tally(quantities, builds)
    done = 0
    for deviates in draw(builds, len(recipe.parts), seed, distribution):
        tally.add(deviates)
        done += len(deviates)
        progress(done)
    return tally.result()


def build_stage(
    stage: GlideStage, build: int, builds: int, seed: int, distribution: str
) -> GlideStage:
    """One of so many builds as a stage whose parts are exact; builds count from 1.

    Raises:
        InputError: if a number is out of range.
        UnknownNameError: if there is no such distribution.
    """
    check_draw(builds, seed, distribution)
    require(1 <= build <= builds, f"build is {build}; there are builds 1 to {builds}")
    recipe = Recipe(stage)
    deviates = draw_one(build, len(recipe.parts), seed, distribution)
    about = f"Build {build} of seed {seed}, {distribution} parts. {stage.about}".strip()
    return recipe.built_stage(deviates, f"{stage.title}, build {build}", about)


class _Quantities:
    """What is looked at in each build, as one column each."""

    def __init__(self, recipe: Recipe) -> None:
        self.recipe = recipe
        names = recipe.stage.range_names
        joins = neighbours(recipe.stage)
        self._pairs = [(names.index(row.faster), names.index(row.slower)) for row in joins]
        self.names = [
            *((name, "shortest") for name in names),
            *((name, "longest") for name in names),
            *((f"{row.faster} to {row.slower}", "overlap") for row in joins),
        ]
        at_corners = self.columns(*recipe.times(corners(len(recipe.parts))))
        self.lowest, self.highest = at_corners.min(axis=0), at_corners.max(axis=0)
        self.nominal = self.columns(*recipe.times(np.zeros((1, len(recipe.parts)))))[0]

    def columns(self, shortest: Matrix, longest: Matrix) -> Matrix:
        """(builds, quantities)."""
        overlaps = [longest[:, a] / shortest[:, b] for a, b in self._pairs]
        return np.column_stack([shortest, longest, *overlaps])

    def linear_variances(self) -> Matrix:
        """(parts, quantities) (S_i t_i)^2, from central differences of the logarithm."""
        steps = _STEP * np.eye(len(self.recipe.parts))
        up = np.log(self.columns(*self.recipe.times(steps)))
        down = np.log(self.columns(*self.recipe.times(-steps)))
        squares: Matrix = ((up - down) / (2.0 * _STEP)) ** 2
        return squares


class _Tally:
    """What is kept of the builds as they pass."""

    def __init__(self, quantities: _Quantities, builds: int) -> None:
        self._quantities = quantities
        self._builds = builds
        self._done = 0
        self._gaps = 0
        count = len(quantities.names)
        parts = len(quantities.recipe.parts)
        self._kept = np.empty((builds, count)) if builds <= MOST_KEPT else None
        self._counts = np.zeros((count, BINS), dtype=np.int64)
        self._log_low = np.log(quantities.lowest)
        width = np.log(quantities.highest) - self._log_low
        self._bins_per_log = np.divide(BINS, width, out=np.zeros(count), where=width > 1e-12)
        self._log_nominal = np.log(quantities.nominal)
        self._d, self._dd = np.zeros(parts), np.zeros(parts)
        self._y, self._yy = np.zeros(count), np.zeros(count)
        self._dy = np.zeros((parts, count))
        self._least, self._least_build = np.full(count, np.inf), np.zeros(count, dtype=np.int64)
        self._most, self._most_build = np.full(count, -np.inf), np.zeros(count, dtype=np.int64)

    def add(self, deviates: Matrix) -> None:
        """Take in the next builds."""
        shortest, longest = self._quantities.recipe.times(deviates)
        columns = self._quantities.columns(shortest, longest)
        self._gaps += _gap_count(shortest, longest)
        self._note_extremes(columns)
        if self._kept is not None:
            self._kept[self._done : self._done + len(columns)] = columns
        logs = np.log(columns)
        places = ((logs - self._log_low) * self._bins_per_log).astype(np.int64)
        np.clip(places, 0, BINS - 1, out=places)
        for number in range(places.shape[1]):
            self._counts[number] += np.bincount(places[:, number], minlength=BINS)
        y = logs - self._log_nominal
        self._d += deviates.sum(axis=0)
        self._dd += (deviates**2).sum(axis=0)
        self._y += y.sum(axis=0)
        self._yy += (y**2).sum(axis=0)
        self._dy += deviates.T @ y
        self._done += len(columns)

    def _note_extremes(self, columns: Matrix) -> None:
        every = np.arange(columns.shape[1])
        for sign, best, build in (
            (1.0, self._least, self._least_build),
            (-1.0, self._most, self._most_build),
        ):
            rows = (sign * columns).argmin(axis=0)
            found = columns[rows, every]
            better = sign * found < sign * best
            best[better] = found[better]
            build[better] = self._done + rows[better] + 1

    def result(self) -> SpreadResult:
        """What the builds came to."""
        q = self._quantities
        parts = [part.name for part in q.recipe.parts]
        blame, linear = self._correlations(), q.linear_variances()
        quantiles = self._quantiles()
        spreads = tuple(
            Spread(
                of=of,
                what=what,
                nominal=float(q.nominal[n]),
                quantiles=(float(quantiles[0, n]), float(quantiles[1, n]), float(quantiles[2, n])),
                lowest=float(q.lowest[n]),
                highest=float(q.highest[n]),
                lowest_build=int(self._least_build[n]),
                highest_build=int(self._most_build[n]),
                blame=_shares(parts, blame[:, n], total=1.0),
                linear_blame=_shares(parts, linear[:, n], total=float(linear[:, n].sum())),
                counts=self._counts[n].reshape(SHOWN_BINS, -1).sum(axis=1),
            )
            for n, (of, what) in enumerate(q.names)
        )
        several = len(q.recipe.stage.ranges) > 1
        return SpreadResult(self._builds, spreads, self._gaps / self._builds if several else None)

    def _correlations(self) -> Matrix:
        """(parts, quantities) squared correlation of deviate and logarithm; 0 where none varies."""
        n = self._builds
        covariance = self._dy - np.outer(self._d, self._y) / n
        spread_d = self._dd - self._d**2 / n
        spread_y = self._yy - self._y**2 / n
        product = np.outer(spread_d, spread_y)
        # What is left of logarithms that do not vary is rounding.
        varies = product > 1e-24 * n**2
        squares: Matrix = np.divide(
            covariance**2, product, out=np.zeros_like(product), where=varies
        )
        return squares

    def _quantiles(self) -> Matrix:
        """(quantiles, quantities): of the builds themselves, or of their bins, 1e-4 or finer."""
        if self._kept is not None:
            exact: Matrix = np.quantile(self._kept, QUANTILES, axis=0)
            return exact
        found = np.empty((len(QUANTILES), len(self._counts)))
        for number, counts in enumerate(self._counts):
            reached = np.cumsum(counts) / self._builds
            for row, share in enumerate(QUANTILES):
                place = int(np.searchsorted(reached, share))
                before = reached[place - 1] if place else 0.0
                part = (share - before) / (reached[place] - before)
                per_log = self._bins_per_log[number]
                log = self._log_low[number] + ((place + part) / per_log if per_log else 0.0)
                found[row, number] = np.exp(log)
        return found


def _shares(parts: list[str], weights: Vector, total: float) -> dict[str, float]:
    if not total > 0.0 or not weights.any():
        return {}
    return dict(zip(parts, (weights / total).tolist(), strict=True))


def _gap_count(shortest: Matrix, longest: Matrix) -> int:
    """How many builds have a time between their ranges that none of them reaches."""
    order = np.argsort(shortest, axis=1)
    starts = np.take_along_axis(shortest, order, axis=1)
    reach = np.maximum.accumulate(np.take_along_axis(longest, order, axis=1), axis=1)
    return int((starts[:, 1:] > reach[:, :-1]).any(axis=1).sum())
