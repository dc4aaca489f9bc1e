"""How sure a fit is: the covariance of least squares under the noise that a capture has.

The residual of the fit holds the noise of the output, which grows with slope where instants jitter,
and the noise of the measured input, which the lag has smoothed and so made to hang together over a
time constant. With J the derivatives, the covariance of the parameters is

    (J'J)^-1 J' W J (J'J)^-1,   W = diag(a + b slope^2) + g^2 s^2 H H' + steps         (1)

with H the lag, s the noise of a sample of the input. J'H is the lag run backwards over J. Where a
converter's steps show as long runs of one value, each run is given an error of its own, uniform
over the step. If the residual hangs together more than that, all of it is scaled up.

Source: (1) is the covariance of ordinary least squares under any noise, as in textbooks of
statistics.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from livelag.bench.fit_model import Solution
from livelag.bench.fit_response import lag_at_samples
from livelag.bench.fit_window import Trace

Vector = NDArray[np.float64]
Matrix = NDArray[np.float64]


@dataclass(frozen=True)
class Spread:
    """How sure a fit is.

    Attributes:
        covariance: (parameters, parameters).
        excess: factor of variance by which the residual hangs together more than its noise
            explains; 1 if it does not.
        colour: variance that the residual has over long stretches over that of single rows, 1 for
            white noise.
        jitter_s: standard deviation of the instants of the rows, 0 if it does not show.
    """

    covariance: Matrix
    excess: float
    colour: float
    jitter_s: float


def spread_of(trace: Trace, solution: Solution) -> Spread:
    """How sure a fit is, eq. 1.

    Args:
        trace: what was fitted.
        solution: the fit.
    """
    use = trace.usable
    J, residual = solution.jacobian, solution.residual_v
    rows, count = J.shape
    scale = np.sqrt((J * J).sum(axis=0))
    scale[scale == 0.0] = 1.0
    unit = J / scale
    bread = np.linalg.pinv(unit.T @ unit, rcond=1e-14, hermitian=True)
    slope = np.gradient(solution.fitted_v, trace.times_s)[use]
    freedom = rows / max(rows - count, 1)
    variance, jitter_s = _white(residual**2 * freedom, slope**2)
    meat = (unit * variance[:, None]).T @ unit
    gain = float(solution.linear[0])
    smoothed = _backwards(trace, solution, unit)
    through = gain**2 * trace.input_noise_v**2
    meat += through * smoothed.T @ smoothed
    for step, values, weights in (
        (trace.output_step_v, trace.output_v[use], unit),
        (gain * trace.input_step_v, trace.input_v, smoothed),
    ):
        if step:
            sums = np.add.reduceat(weights, _run_starts(values), axis=0)
            meat += step**2 / 12.0 * sums.T @ sums
    # A run of one value adds up by itself; that is in the covariance already.
    still = trace.output_step_v**2 / 12.0 * _mean_run(trace.output_v) if trace.output_step_v else 0
    white = float(variance.mean())
    expected = white + through + still
    excess = _excess(trace, solution, residual, expected)
    answer: Matrix = bread @ meat @ bread * excess / np.outer(scale, scale)
    return Spread(answer, excess, excess * expected / white if white > 0.0 else 1.0, jitter_s)


def _white(squares: Vector, slopes: Vector) -> tuple[Vector, float]:
    """Variance a + b slope^2 of each row, fitted to squared residuals, and the root of b."""
    from scipy.optimize import nnls

    steepest = float(slopes.max())
    if steepest <= 0.0:
        return np.full_like(squares, squares.mean()), 0.0
    design = np.column_stack([np.ones_like(slopes), slopes / steepest])
    # Squares scatter by twice their size squared: weigh them by a first idea of it.
    found = nnls(design, squares)[0]
    weight = 1.0 / np.maximum(design @ found, 0.05 * squares.mean() + 1e-300)
    found = nnls(design * weight[:, None], squares * weight)[0]
    modelled: Vector = design @ found
    if modelled.mean() > 0.0:  # the mean of the squares is known better than how they are spread
        modelled *= squares.mean() / modelled.mean()
    return modelled, float(np.sqrt(found[1] / steepest))


def _backwards(trace: Trace, solution: Solution, weights: Matrix) -> Matrix:
    """H' J: how each sample of the input moves J' times the output."""
    whole = np.zeros((len(trace.times_s), weights.shape[1]))
    whole[trace.usable] = weights
    reversed_times = trace.times_s[-1] - trace.times_s[::-1]
    decays = solution.decays
    answer = np.zeros_like(whole)
    for column in range(whole.shape[1]):
        flipped = np.ascontiguousarray(whole[::-1, column])
        flipped[0] = 0.0  # so that the lag starts from rest
        for weight, tau in zip(decays.weights, decays.times_s, strict=True):
            answer[:, column] += weight * lag_at_samples(reversed_times, flipped, tau)[::-1]
    return answer


def _run_starts(values: Vector) -> NDArray[np.int64]:
    starts = np.concatenate([[0], np.flatnonzero(np.diff(values)) + 1])
    return np.asarray(starts, dtype=np.int64)


def _excess(trace: Trace, solution: Solution, residual: Vector, expected: float) -> float:
    """How much more than expected the residual adds up over stretches; 1 unless clearly more."""
    rows = len(residual)
    if expected <= 0.0:
        return 1.0
    tau_rows = solution.decays.times_s[0] / trace.interval_s
    worst = 1.0
    for length in {4, round(tau_rows / 4.0), round(tau_rows)}:
        blocks = rows // max(length, 1)
        if length < 4 or blocks < 12:
            continue
        sums = residual[: blocks * length].reshape(blocks, length).sum(axis=1)
        seen = float(np.mean(sums**2)) / length
        ratio = seen / expected
        if ratio > 1.0 + 5.0 * (2.0 / blocks) ** 0.5:
            worst = max(worst, ratio)
    return worst


def _mean_run(values: Vector) -> float:
    """Length of the run that a sample finds itself in, on average over the samples."""
    lengths = np.diff(np.append(_run_starts(values), len(values)))
    return float(np.sum(lengths**2) / len(values))
