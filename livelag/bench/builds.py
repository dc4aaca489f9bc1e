"""Builds: units of a stage made of parts inside their tolerances, drawn so that each repeats.

| symbol | name here       | meaning                                                | unit |
|--------|-----------------|--------------------------------------------------------|------|
| d      | ``deviates``    | deviation over tolerance, -1 to 1, one a part          | 1    |
| x      | ``values``      | nominal value x (1 + tolerance x d)                    | SI   |

A pot deviates as a whole, its end resistance with its track. Part and part are independent.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np

from livelag.circuit.network import Matrix, Vector
from livelag.circuit.parts import Resistor, require
from livelag.circuit.stage import GlideStage, Range
from livelag.errors import UnknownNameError

DISTRIBUTIONS = ("uniform", "normal")
SIGMAS_AT_TOLERANCE = 2.0  # where the normal distribution is cut
MOST_BUILDS = 100_000_000
MOST_PARTS = 16
CHUNK_BUILDS = 32_768


@dataclass(frozen=True, slots=True)
class SpreadPart:
    """A part that deviates.

    Attributes:
        name: what it is, in words.
        unit: ``ohms`` or ``f`` (farads).
        nominal: its value.
        tolerance: largest relative deviation.
    """

    name: str
    unit: str
    nominal: float
    tolerance: float


class Recipe:
    """Which parts a stage is built of, and what times come of them.

    Attributes:
        stage: as designed.
        parts: what deviates: the pot, the series resistors that are in use, every capacitor.

    Raises:
        InputError: if there are too many parts for every corner to be looked at.
    """

    def __init__(self, stage: GlideStage) -> None:
        self.stage = stage
        parts = [SpreadPart("pot", "ohms", stage.pot.resistance_ohms, stage.pot.tolerance)]
        self._shared: int | None = None
        if any(position.series is None for position in stage.ranges):
            self._shared = len(parts)
            parts.append(_series_part("series resistor", stage.series))
        self._series_of: list[int] = []
        for position in stage.ranges:
            if position.series is None and self._shared is not None:
                self._series_of.append(self._shared)
            elif position.series is not None:
                self._series_of.append(len(parts))
                parts.append(_series_part(f"series of {position.name!r}", position.series))
        self._first_capacitor = len(parts)
        parts += [
            SpreadPart(f"capacitor {part.name!r}", "f", part.capacitance_f, part.tolerance)
            for part in stage.capacitors
        ]
        require(
            len(parts) <= MOST_PARTS,
            f"the stage has {len(parts)} parts with tolerances; at most {MOST_PARTS} can be spread",
        )
        self.parts = tuple(parts)
        self._connected = np.array(stage.wiring.connected, dtype=np.float64)
        self._nominal = np.array([part.nominal for part in parts])
        self._tolerance = np.array([part.tolerance for part in parts])

    def values(self, deviates: Matrix) -> Matrix:
        """(builds, parts) values in ohms and farads from (builds, parts) deviates."""
        built: Matrix = self._nominal * (1.0 + self._tolerance * deviates)
        return built

    def times(self, deviates: Matrix) -> tuple[Matrix, Matrix]:
        """Shortest and longest time constants, each (builds, ranges) in seconds."""
        values = self.values(deviates)
        pot = values[:, :1]
        end = pot * (self.stage.pot.end_ohms / self.stage.pot.resistance_ohms)
        series = values[:, self._series_of]
        capacitance = values[:, self._first_capacitor :] @ self._connected.T
        return (series + end) * capacitance, (series + pot) * capacitance

    def built_stage(self, deviates: Vector, title: str, about: str) -> GlideStage:
        """The stage made of the parts of one build, (parts,), each exact.

        Raises:
            InputError: if a value is beyond what the stage can take.
        """
        values = self.values(deviates[np.newaxis])[0].tolist()
        stage = self.stage
        pot = replace(
            stage.pot,
            resistance_ohms=values[0],
            end_ohms=stage.pot.end_ohms * values[0] / stage.pot.resistance_ohms,
            tolerance=0.0,
        )
        series = stage.series if self._shared is None else Resistor(values[self._shared], 0.0)
        ranges = tuple(
            _built_range(position, values[at])
            for position, at in zip(stage.ranges, self._series_of, strict=True)
        )
        capacitors = tuple(
            replace(part, capacitance_f=value, tolerance=0.0)
            for part, value in zip(stage.capacitors, values[self._first_capacitor :], strict=True)
        )
        return replace(
            stage, title=title, about=about, pot=pot, series=series, ranges=ranges,
            capacitors=capacitors,
        )  # fmt: skip


def _series_part(name: str, part: Resistor) -> SpreadPart:
    return SpreadPart(name, "ohms", part.resistance_ohms, part.tolerance)


def _built_range(position: Range, series_ohms: float) -> Range:
    if position.series is None:
        return position
    return replace(position, series=Resistor(series_ohms, 0.0))


def corners(parts: int) -> Matrix:
    """(2^parts, parts) deviates: every combination of parts at the ends of their tolerances."""
    bits = np.arange(2**parts)[:, np.newaxis] >> np.arange(parts) & 1
    return 2.0 * bits.astype(np.float64) - 1.0


def check_draw(builds: int, seed: int, distribution: str) -> None:
    """Refuse a draw that cannot be made.

    Raises:
        InputError: if the number of builds or the seed is out of range.
        UnknownNameError: if there is no such distribution.
    """
    require(1 <= builds <= MOST_BUILDS, f"builds is {builds}; it must be 1 to {MOST_BUILDS:,}")
    require(0 <= seed < 2**63, f"seed is {seed}; it must be a whole number from 0 to 2^63 - 1")
    if distribution not in DISTRIBUTIONS:
        raise UnknownNameError("distribution", distribution, DISTRIBUTIONS)


def draw(builds: int, parts: int, seed: int, distribution: str) -> Iterator[Matrix]:
    """Deviates of all builds, chunk by chunk, each (up to `CHUNK_BUILDS`, parts)."""
    for chunk in range(-(-builds // CHUNK_BUILDS)):
        count = min(CHUNK_BUILDS, builds - chunk * CHUNK_BUILDS)
        yield _chunk(chunk, count, parts, seed, distribution)


def draw_one(build: int, parts: int, seed: int, distribution: str) -> Vector:
    """Deviates of one build, (parts,); builds count from 1."""
    chunk, row = divmod(build - 1, CHUNK_BUILDS)
    deviates: Vector = _chunk(chunk, row + 1, parts, seed, distribution)[row]
    return deviates


def _chunk(chunk: int, count: int, parts: int, seed: int, distribution: str) -> Matrix:
    # A seed of its own for every chunk: a build can be drawn again without those before it.
    generator = np.random.default_rng(np.random.SeedSequence(seed, spawn_key=(chunk,)))
    uniform = generator.random((count, parts))
    if distribution == "uniform":
        deviates: Matrix = 2.0 * uniform - 1.0
        return deviates
    from scipy.special import ndtr, ndtri

    # The inverse of the distribution between its cuts: no draw is thrown away.
    low, high = ndtr(-SIGMAS_AT_TOLERANCE), ndtr(SIGMAS_AT_TOLERANCE)
    cut = ndtri(low + uniform * (high - low)) / SIGMAS_AT_TOLERANCE
    return np.asarray(cut, dtype=np.float64)
