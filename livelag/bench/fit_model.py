"""The model that is fitted, and its least squares: two or four numbers, the rest is linear.

    output(t) = g sum_m A_m lag_m(input, t - d) + b + sum_m x_m e^(-(t - t_0)/tau_m)
                + sum_k d_k h_k(t)

| symbol    | name here           | meaning                                                 | unit |
|-----------|---------------------|---------------------------------------------------------|------|
| tau       | ``time_constant_s`` | R C                                                     | s    |
| d         | ``delay_s``         | of the output's samples after the input's               | s    |
| g, b      | gain, offset        | of the output                                           | 1, V |
| A, tau_m  | `Decays`            | one lag, or two with absorption                         | 1, s |
| x         |                     | the glide that was still going on as the capture began  | V    |
| d_k, h_k  |                     | where between two rows edge k of the input was, k > 1   | s    |

The linear ones are solved for at each step (variable projection: Golub and Pereyra 1973).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from livelag.bench.fit_response import Decays, lag_at, one_lag, with_absorption
from livelag.bench.fit_window import Edge, Trace, edges_of

Vector = NDArray[np.float64]
Matrix = NDArray[np.float64]


@dataclass(frozen=True)
class Solution:
    """The least-squares fit of one model.

    Attributes:
        shape: ln RC, delay in seconds; then share and ln time of absorption if fitted.
        linear: gain, offset in volts, then what is of no interest by itself.
        jacobian: (rows, parameters) of the output in ``shape`` and ``linear``, usable rows only.
        fitted_v: (rows,) every row.
        residual_v: (usable rows,) output less fit.
    """

    shape: Vector
    linear: Vector
    jacobian: Matrix
    fitted_v: Vector
    residual_v: Vector

    @property
    def decays(self) -> Decays:
        """The lags of the fit."""
        return decays_of(self.shape)


def decays_of(shape: Vector) -> Decays:
    """The lags that the non-linear numbers stand for."""
    if len(shape) == 2:
        return one_lag(float(np.exp(shape[0])))
    return with_absorption(
        float(np.exp(shape[0])), max(float(shape[2]), 0.0), float(np.exp(shape[3]))
    )


class Model:
    """The model on one trace.

    Attributes:
        trace: what is fitted.
        edges: jumps of its input.
    """

    def __init__(self, trace: Trace) -> None:
        self.trace = trace
        rows = len(trace.times_s)
        self.edges: tuple[Edge, ...] = tuple(e for e in edges_of(trace) if e.last_row < rows - 3)
        self._use = trace.usable
        self._target = trace.output_v[self._use]

    def columns(self, shape: Vector) -> Matrix:
        """(rows, columns) of the linear model, every row of the trace."""
        t, u = self.trace.times_s, self.trace.input_v
        decays, delay_s = decays_of(shape), float(shape[1])
        pairs = list(zip(decays.weights, decays.times_s, strict=True))
        response = np.zeros_like(t)
        for weight, tau in pairs:
            response += weight * lag_at(t, u, tau, delay_s)
        columns = [response, np.ones_like(t)]
        columns += [np.exp(-(t - t[0]) / tau) for _, tau in pairs]
        for edge in self.edges[1:]:
            since = t - delay_s - edge.time_s
            late = since > 0.0
            column = np.zeros_like(t)
            for weight, tau in pairs:
                column[late] += weight * edge.volts / tau * np.exp(-since[late] / tau)
            columns.append(column)
        return np.column_stack(columns)

    def leftover(self, shape: Vector) -> Vector:
        """Residual (usable rows,) with the linear numbers at their best."""
        basis, _ = np.linalg.qr(self.columns(shape)[self._use])
        left: Vector = self._target - basis @ (basis.T @ self._target)
        return left

    def solve(self, start: Vector, low: Vector, high: Vector, steps: Vector) -> Solution:
        """Least squares from a start, within bounds.

        Args:
            start: non-linear numbers to start from.
            low: least that they may be.
            high: most that they may be.
            steps: what counts as a small change of each, for scaling and derivatives.
        """
        from scipy.optimize import least_squares

        found = least_squares(
            lambda scaled: self.leftover(scaled * steps),
            np.clip(start, low, high) / steps,
            jac=lambda scaled: self._slopes(scaled * steps, steps),
            bounds=(low / steps, high / steps),
            xtol=1e-8,
            ftol=1e-11,
            gtol=1e-12,
            max_nfev=60,
        )
        return self.at(np.asarray(found.x) * steps, steps)

    def _slopes(self, shape: Vector, steps: Vector) -> Matrix:
        columns = []
        for i, step in enumerate(steps):
            moved = shape.copy()
            moved[i] += 1e-3 * step
            back = shape.copy()
            back[i] -= 1e-3 * step
            columns.append((self.leftover(moved) - self.leftover(back)) / 2e-3)
        return np.column_stack(columns)

    def at(self, shape: Vector, steps: Vector) -> Solution:
        """The fit with the non-linear numbers given."""
        whole = self.columns(shape)
        linear = np.linalg.lstsq(whole[self._use], self._target, rcond=None)[0].astype(np.float64)
        slopes = []
        for i, step in enumerate(steps):
            moved, back = shape.copy(), shape.copy()
            moved[i] += 1e-3 * step
            back[i] -= 1e-3 * step
            slope = (self.columns(moved) - self.columns(back)) @ linear / (2e-3 * step)
            slopes.append(slope[self._use])
        jacobian = np.column_stack([*slopes, whole[self._use]])
        fitted: Vector = np.asarray(whole @ linear, dtype=np.float64)
        return Solution(shape, linear, jacobian, fitted, self._target - fitted[self._use])
