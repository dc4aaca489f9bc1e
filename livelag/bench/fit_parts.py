"""What several captures at known rotations and ranges say about the parts.

    ln tau = ln K_r + ln(s + (1 - e) f(theta; m))                                       (1)

| symbol | name here           | meaning                                                    | unit |
|--------|---------------------|------------------------------------------------------------|------|
| K_r    | ``whole_pot_s``     | whole pot times the capacitance of range r                 | s    |
| s      | ``series_ratio``    | series resistor and end resistance over the whole pot      | 1    |
| e      |                     | planned end resistance over the whole pot                  | 1    |
| f      |                     | two straight lines over theta that meet at mid-travel      | 1    |
| m      | ``law_middle``      | f at mid-travel: 0.5 linear, less logarithmic              | 1    |

Weighted by the intervals of the time constants and by how well a rotation can be set; what the
captures cannot tell stays as planned. A measured taper stays as planned.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from livelag.bench.builds import corners
from livelag.bench.fit import Measured
from livelag.bench.limits import Limits
from livelag.circuit.parts import Taper
from livelag.circuit.stage import GlideStage, Setting
from livelag.errors import InputError

Vector = NDArray[np.float64]

ROTATION_U95 = 0.01  # of a pot set against a scale; at its stops it is exact. Common practice.
LINEAR_MIDDLE = (0.45, 0.55)  # common practice, no source
LOGARITHMIC_MIDDLE = (0.10, 0.20)  # published track measurements, as in `Taper.logarithmic`


@dataclass(frozen=True)
class PartsFit:
    """Ratios of the parts of a built stage.

    Attributes:
        series_ratio: (series + end resistance) over the whole pot; None if it cannot be told.
        law_middle: fraction of the track at mid-travel; None if it cannot be told.
        whole_pot_s: for each range captured, by index, the whole pot times its capacitance.
        capacitor_ratios: for each range captured after the first, by index, its capacitance over
            that of the first.
        taper: the law, as fitted or as planned.
        misfit: root mean square of what is left over, in standard deviations; None if every number
            was needed.
        missing: sentences on what cannot be told, and what to capture for it.
    """

    series_ratio: Measured | None
    law_middle: Measured | None
    whole_pot_s: dict[int, Measured]
    capacitor_ratios: dict[int, Measured]
    taper: Taper
    misfit: float | None
    missing: tuple[str, ...]


def fit_parts(stage: GlideStage, measured: list[tuple[Setting, Measured]]) -> PartsFit:
    """Fit eq. 1 to the time constants of several captures.

    Args:
        stage: as designed.
        measured: settings, two or more, with the time constant found at each.

    Raises:
        InputError: if no two captures differ in range or rotation.
    """
    if len({(s.range_index, s.rotation) for s, _ in measured}) < 2:
        raise InputError(
            "several captures of one setting tell no more than one; give captures at other "
            "rotations or ranges"
        )
    problem = _Problem(stage, measured)
    return problem.answer()


class _Problem:
    def __init__(self, stage: GlideStage, measured: list[tuple[Setting, Measured]]) -> None:
        self.stage = stage
        self.measured = measured
        self.ranges = sorted({setting.range_index for setting, _ in measured})
        self.end = stage.pot.end_ohms / stage.pot.resistance_ohms
        turns = {setting.rotation for setting, _ in measured}
        own = any(stage.ranges[i].series is not None for i in self.ranges)
        within = [{s.rotation for s, _ in measured if s.range_index == i} for i in self.ranges]
        self.missing: list[str] = []
        self.free_series = not own and max(len(found) for found in within) >= 2
        inner = any(0.0 < turn < 1.0 for turn in turns)
        enough = max(len(found) for found in within) >= 3 or (
            len(turns) >= 3 and len(measured) >= len(self.ranges) + 2 and self.free_series
        )
        self.free_law = inner and enough and stage.pot.taper.name != "measured" and not own
        if own:
            self.missing.append("ranges with series resistors of their own keep them as planned")
        elif not self.free_series:
            self.missing.append(
                "the series resistor stays as planned: capture one range at rotation 0 and at 1"
            )
        if not self.free_law and not own:
            self.missing.append(
                "the pot's law stays as planned: "
                + (
                    "its taper is a measured table"
                    if stage.pot.taper.name == "measured"
                    else "capture one range at rotation 0, 0.5 and 1"
                )
            )
        self._law_planned = stage.pot.taper.fraction(0.5)

    def _fraction(self, rotation: float, middle: float) -> float:
        if not self.free_law:
            return self.stage.pot.taper.fraction(rotation)
        if rotation <= 0.5:
            return 2.0 * middle * rotation
        return middle + (1.0 - middle) * (2.0 * rotation - 1.0)

    def _planned_series(self, range_index: int) -> float:
        series = self.stage.ranges[range_index].series or self.stage.series
        pot = self.stage.pot
        return (series.resistance_ohms + pot.end_ohms) / pot.resistance_ohms

    def _unpack(self, x: Vector) -> tuple[Vector, float | None, float]:
        count = len(self.ranges)
        rest = list(x[count:])
        series = math.exp(rest.pop(0)) if self.free_series else None
        middle = 1.0 / (1.0 + math.exp(-rest.pop(0))) if self.free_law else self._law_planned
        return x[:count], series, middle

    def _shares(self, x: Vector, turns: list[float]) -> Vector:
        """The sum s + (1 - e) f for each capture, at the rotations given."""
        _, series, middle = self._unpack(x)
        values = []
        for (setting, _), turn in zip(self.measured, turns, strict=True):
            ratio = self._planned_series(setting.range_index) if series is None else series
            values.append(ratio + (1.0 - self.end) * self._fraction(turn, middle))
        return np.array(values)

    def _spread(self, x: Vector) -> Vector:
        """Standard deviation of each ln tau: of its fit, and of setting the rotation."""
        turns = [setting.rotation for setting, _ in self.measured]
        step = 1e-3
        up = self._shares(x, [min(turn + step, 1.0) for turn in turns])
        down = self._shares(x, [max(turn - step, 0.0) for turn in turns])
        width = np.array([min(t + step, 1.0) - max(t - step, 0.0) for t in turns])
        steep = np.abs(np.log(up / down)) / width
        at_stop = np.array([turn in (0.0, 1.0) for turn in turns])
        turning = np.where(at_stop, 0.0, steep * ROTATION_U95 / 1.96)
        fitted = np.array([max(m.u95 / m.value, 1e-6) / 1.96 for _, m in self.measured])
        spread: Vector = np.hypot(fitted, turning)
        return spread

    def answer(self) -> PartsFit:
        from scipy.optimize import least_squares

        turns = [setting.rotation for setting, _ in self.measured]
        target = np.log([m.value for _, m in self.measured])
        place = np.array([self.ranges.index(s.range_index) for s, _ in self.measured])
        pot = self.stage.pot.resistance_ohms
        x = [math.log(pot * self.stage.capacitance_f(i)) for i in self.ranges]
        if self.free_series:
            x.append(math.log(self._planned_series(self.ranges[0])))
        if self.free_law:
            x.append(math.log(self._law_planned / (1.0 - self._law_planned)))
        start = np.array(x)
        spread = self._spread(start)
        for _ in range(3):  # the spread depends a little on the answer

            def left(y: Vector, spread: Vector = spread) -> Vector:
                residual: Vector = (target - y[place] - np.log(self._shares(y, turns))) / spread
                return residual

            found = least_squares(left, start, x_scale=0.1, xtol=1e-12, ftol=1e-14)
            start = np.asarray(found.x)
            spread = self._spread(start)
        slopes = np.asarray(found.jac)
        freedom = len(target) - len(start)
        squares = float(np.sum(found.fun**2))
        cover = np.linalg.pinv(slopes.T @ slopes, rcond=1e-12)
        if freedom > 0:
            cover = cover * max(1.0, squares / freedom)
        return self._result(start, cover, math.sqrt(squares / freedom) if freedom > 0 else None)

    def _result(self, x: Vector, cover: Vector, misfit: float | None) -> PartsFit:
        count = len(self.ranges)
        u95 = 1.96 * np.sqrt(np.maximum(np.diag(cover), 0.0))
        logs, series, middle = self._unpack(x)
        whole = {
            i: Measured(math.exp(logs[k]), math.exp(logs[k]) * float(u95[k]))
            for k, i in enumerate(self.ranges)
        }
        ratios = {}
        for k, i in enumerate(self.ranges[1:], start=1):
            variance = cover[k, k] + cover[0, 0] - 2.0 * cover[0, k]
            ratio = math.exp(logs[k] - logs[0])
            ratios[i] = Measured(ratio, 1.96 * ratio * math.sqrt(max(variance, 0.0)))
        series_ratio = law = None
        taper = self.stage.pot.taper
        if series is not None:
            relative = float(u95[count])
            if relative < 0.7:
                series_ratio = Measured(series, series * relative)
            else:
                self.missing.append("the series resistor cannot be told: capture rotation 0")
        if self.free_law:
            at = count + int(self.free_series)
            law = Measured(middle, middle * (1.0 - middle) * float(u95[at]))
            taper = _law(middle, law.u95)
        return PartsFit(series_ratio, law, whole, ratios, taper, misfit, tuple(self.missing))


def _law(middle: float, u95: float) -> Taper:
    if abs(middle - 0.5) <= u95:
        return Taper.linear()
    if middle < 0.5:
        return Taper.logarithmic(middle)
    return Taper.reverse_logarithmic(1.0 - middle)


def series_limits(stage: GlideStage) -> Limits:
    """What the series ratio may be with the resistor and the pot within their tolerances."""
    pot, series = stage.pot, stage.series
    end = pot.end_ohms / pot.resistance_ohms
    bare = series.resistance_ohms / pot.resistance_ohms
    return Limits(
        bare + end,
        bare * (1.0 - series.tolerance) / (1.0 + pot.tolerance) + end,
        bare * (1.0 + series.tolerance) / (1.0 - pot.tolerance) + end,
    )


def law_limits(stage: GlideStage) -> Limits:
    """What the law at mid-travel may be for the kind of track that is planned."""
    planned = stage.pot.taper.fraction(0.5)
    low, high = {
        "logarithmic": LOGARITHMIC_MIDDLE,
        "reverse logarithmic": (1.0 - LOGARITHMIC_MIDDLE[1], 1.0 - LOGARITHMIC_MIDDLE[0]),
    }.get(stage.pot.taper.name, LINEAR_MIDDLE)
    return Limits(planned, min(low, planned), max(high, planned))


def capacitor_limits(stage: GlideStage, range_index: int, first: int) -> Limits:
    """What the capacitance of a range over that of another may be within the tolerances."""
    nominal = np.array([part.capacitance_f for part in stage.capacitors])
    tolerance = np.array([part.tolerance for part in stage.capacitors])
    connected = np.array(stage.wiring.connected, dtype=np.float64)
    values = nominal * (1.0 + tolerance * corners(len(nominal)))
    ratios = (values @ connected[range_index]) / (values @ connected[first])
    plan = stage.capacitance_f(range_index) / stage.capacitance_f(first)
    return Limits(plan, float(ratios.min()), float(ratios.max()))
