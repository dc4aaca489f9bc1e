"""Time constant, gain, offset and delay of a built stage, from one capture of it.

The measured input drives the model (`livelag.bench.fit_model`), so neither the generator's edge nor
its levels need to be known. Intervals (`livelag.bench.fit_noise`) hold 95 %. A second time constant
is added where dielectric absorption shows: where it lowers the Bayesian information criterion
(Schwarz 1978) by more than 10, with rows counted for less where the residual hangs together.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from livelag.bench.capture_roles import Roles
from livelag.bench.fit_checks import check_capture, check_fit
from livelag.bench.fit_model import Model, Solution
from livelag.bench.fit_noise import Spread, spread_of
from livelag.bench.fit_window import Trace, thinned
from livelag.circuit.kinds import Absorption

Vector = NDArray[np.float64]

CLEARLY_LOWER = 10.0
_LARGEST_SHARE = 0.5


@dataclass(frozen=True, slots=True)
class Measured:
    """A value with the half-width of its 95 % interval.

    Attributes:
        value: in its unit.
        u95: same unit.
    """

    value: float
    u95: float


@dataclass(frozen=True)
class CaptureFit:
    """What one capture says of the stage.

    Attributes:
        name: the file.
        input_name: channel before the glide.
        output_name: channel after it.
        time_constant_s: R C where absorption is fitted apart, else the time constant of the decay.
        gain: volts out per volt in.
        offset_v: volts out at 0 V in.
        delay_s: of the output after the input, beyond the lag.
        rise_s: 10-90 % of a step.
        absorption_share: capacitance of the soaking branch over the capacitance; None if it does
            not show.
        absorption_time_s: time constant of the branch; None likewise.
        criterion_change: Bayesian information criterion with absorption less that without; None if
            nothing hinted at it.
        noise_v: standard deviation of the residual.
        steps: jumps of the input that were used.
        excess: factor of variance by which the residual is more than noise, 1 if it is not.
        trace: what was fitted.
        fitted_v: (rows,) the fit.
        notes: sentences about the capture.
    """

    name: str
    input_name: str
    output_name: str
    time_constant_s: Measured
    gain: Measured
    offset_v: Measured
    delay_s: Measured
    rise_s: Measured
    absorption_share: Measured | None
    absorption_time_s: Measured | None
    criterion_change: float | None
    noise_v: float
    steps: int
    excess: float
    trace: Trace
    fitted_v: Vector
    notes: tuple[str, ...]

    @property
    def residual_v(self) -> Vector:
        """(rows,) output less fit."""
        return self.trace.output_v - self.fitted_v


def fit_capture(
    name: str,
    roles: Roles,
    expected_absorption: tuple[Absorption, ...] = (),
    notes: tuple[str, ...] = (),
) -> CaptureFit:
    """Fit one capture.

    Args:
        name: the file, for messages.
        roles: from `find_roles`.
        expected_absorption: branches that the capacitors are known to have. Where they do not show,
            the interval of the time constant grows by what they may hide.
        notes: sentences to pass on.

    Raises:
        InputError: if the capture cannot tell; the message says why and what to capture instead.
    """
    said = check_capture(name, roles)
    trace = thinned(roles.trace, roles.rough_s)
    model = Model(trace)
    search = _Search(model, roles.rough_s)
    chosen = search.plain
    spread = spread_of(trace, chosen)
    soaked, change = search.absorption()
    if soaked is not None:
        apart = spread_of(trace, soaked)
        shown = Absorption(float(soaked.shape[2]), float(np.exp(soaked.shape[3])))
        allowed = expected_absorption or (shown,)
        if _unsure(soaked, apart, expected_absorption) < _unsure(chosen, spread, allowed):
            chosen, spread = soaked, apart
        else:
            expected_absorption = allowed
            said.append(
                "the capacitor soaks, but the capture cannot tell that from the time constant; "
                "the interval is wider for it: hold the step for longer, with less noise"
            )
    answer = _answer(name, roles, model, chosen, spread, expected_absorption, change)
    tau = answer.time_constant_s.value
    by_noise = tau * _unsure(chosen, spread, ())
    check_fit(name, roles, trace, tau, by_noise, answer.residual_v[trace.usable], len(model.edges))
    if trace.averaged > 1:
        said.append(f"samples are averaged in groups of {trace.averaged}")
    if spread.excess > 2.0:
        said.append(
            "the residual hangs together more than noise does; the intervals are wider for it"
        )
    return _with_notes(answer, (*notes, *said))


class _Search:
    """The best fit with one lag, and with absorption where it shows."""

    def __init__(self, model: Model, rough_s: float) -> None:
        self.model = model
        self._rough_s = rough_s
        times = model.trace.times_s
        self._interval_s = model.trace.interval_s
        self._span_s = float(times[-1] - times[0])

    def _bounds(self, tau: float) -> tuple[Vector, Vector, Vector]:
        latest = max(3.0 * self._interval_s, tau)
        low = np.array([math.log(self._interval_s / 4.0), -max(3.0 * self._interval_s, 0.3 * tau)])
        high = np.array([math.log(20.0 * self._span_s), latest])
        return low, high, np.array([0.1, max(0.1 * tau, self._interval_s)])

    @cached_property
    def plain(self) -> Solution:
        """One lag."""
        low, high, steps = self._bounds(self._rough_s)
        return self.model.solve(np.array([math.log(self._rough_s), 0.0]), low, high, steps)

    def absorption(self) -> tuple[Solution | None, float | None]:
        """The fit with absorption, None unless it shows, and how the criterion changes."""
        hint = self._hint()
        if hint is None:
            return None, None
        plain = self.plain
        tau = float(np.exp(plain.shape[0]))
        low, high, steps = self._bounds(tau)
        low = np.append(low, [1e-6, math.log(1.5 * tau)])
        high = np.append(high, [_LARGEST_SHARE, math.log(max(3.0 * self._span_s, 4.0 * tau))])
        steps = np.append(steps, [0.01, 0.3])
        start = np.append(plain.shape, [0.01, math.log(hint)])
        found = self.model.solve(start, low, high, steps)
        rows = len(plain.residual_v)
        before, after = (float(np.sum(s.residual_v**2)) for s in (plain, found))
        extra = found.jacobian.shape[1] - plain.jacobian.shape[1]
        telling = rows / spread_of(self.model.trace, found).colour
        change = telling * math.log(after / before) + extra * math.log(rows)
        return (found if change < -CLEARLY_LOWER else None), change

    def _hint(self) -> float | None:
        """The absorption time that the residual of one lag speaks for most; None if none does."""
        plain, model = self.plain, self.model
        tau = float(np.exp(plain.shape[0]))
        rows = len(plain.residual_v)
        basis, _ = np.linalg.qr(plain.jacobian)
        variance = float(np.sum(plain.residual_v**2)) / max(rows - plain.jacobian.shape[1], 1)
        best = None
        strongest = 3.0
        for time_s in tau * np.array([2.0, 4.0, 8.0, 16.0]):
            if time_s > 3.0 * self._span_s:
                continue
            shape = np.append(plain.shape, [0.01, math.log(time_s)])
            soaked = model.columns(shape)[model.trace.usable, 0]
            column = (soaked - model.columns(plain.shape)[model.trace.usable, 0]) * plain.linear[0]
            column -= basis @ (basis.T @ column)
            size = float(np.sqrt(column @ column * variance))
            score = abs(float(column @ plain.residual_v)) / size if size > 0.0 else 0.0
            if score > strongest:
                best, strongest = float(time_s), score
        return best


def _answer(
    name: str,
    roles: Roles,
    model: Model,
    found: Solution,
    spread: Spread,
    expected: tuple[Absorption, ...],
    change: float | None,
) -> CaptureFit:
    rows, count = found.jacobian.shape
    times = _quantile(rows - count)
    u95 = times * np.sqrt(np.maximum(np.diag(spread.covariance), 0.0))
    first_linear = len(found.shape)
    tau = float(np.exp(found.shape[0]))
    fraction = time = None
    if first_linear == 4:
        fraction = Measured(float(found.shape[2]), float(u95[2]))
        soak_s = float(np.exp(found.shape[3]))
        time = Measured(soak_s, soak_s * float(u95[3]))
    relative = _unsure(found, spread, expected)
    # Where between two rows the first edge was is part of the delay: uniform over the interval,
    # whose ends jitter.
    unseen = 1.96 * math.sqrt(model.trace.interval_s**2 / 12.0 + spread.jitter_s**2)
    rise = found.decays.rise_s()
    return CaptureFit(
        name=name,
        input_name=roles.input_name,
        output_name=roles.output_name,
        time_constant_s=Measured(tau, tau * relative),
        gain=Measured(float(found.linear[0]), float(u95[first_linear])),
        offset_v=Measured(float(found.linear[1]), float(u95[first_linear + 1])),
        delay_s=Measured(float(found.shape[1]), math.hypot(float(u95[1]), unseen)),
        rise_s=Measured(rise, rise * relative),
        absorption_share=fraction,
        absorption_time_s=time,
        criterion_change=change,
        noise_v=float(np.sqrt(np.sum(found.residual_v**2) / max(rows - count, 1))),
        steps=len(model.edges),
        excess=spread.excess,
        trace=model.trace,
        fitted_v=found.fitted_v,
        notes=(),
    )


def _unsure(found: Solution, spread: Spread, expected: tuple[Absorption, ...]) -> float:
    """Half-width of the interval of the time constant, relative, with what absorption may hide."""
    soak_s = float(np.exp(found.shape[3])) if len(found.shape) == 4 else None
    hidden = _hidden_share(float(np.exp(found.shape[0])), expected, soak_s)
    freedom = len(found.residual_v) - found.jacobian.shape[1]
    return math.hypot(
        _quantile(freedom) * math.sqrt(max(spread.covariance[0, 0], 0.0)), 1.96 * hidden
    )


def _with_notes(fit: CaptureFit, notes: tuple[str, ...]) -> CaptureFit:
    from dataclasses import replace

    return replace(fit, notes=notes)


def _quantile(freedom: int) -> float:
    from scipy.special import stdtrit

    return float(stdtrit(max(freedom, 1), 0.975))


def _hidden_share(tau: float, expected: tuple[Absorption, ...], fitted_s: float | None) -> float:
    """How much of the time constant absorption that is not fitted may make up.

    A branch much slower than the lag hardly acts; one much faster adds its capacitance whole.
    """
    left = list(expected)
    if fitted_s is not None and left:
        left.remove(min(left, key=lambda branch: abs(math.log(branch.time_s / fitted_s))))
    return sum(branch.fraction * tau / (tau + branch.time_s) for branch in left)
