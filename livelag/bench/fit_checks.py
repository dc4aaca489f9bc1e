"""When a capture cannot tell, why not, and what to capture instead."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from livelag.bench.capture_roles import Roles
from livelag.bench.fit_window import Trace, clipped, edges_of
from livelag.errors import InputError
from livelag.units import format_value

Vector = NDArray[np.float64]

FEWEST_SAMPLES_A_TIME_CONSTANT = 3.0
WORST_RELATIVE = 0.25
WORST_MISFIT = 0.1  # of the output's swing, as a standard deviation


def check_capture(name: str, roles: Roles) -> list[str]:
    """Refuse a capture that is cut off; returns sentences about what is left out.

    Raises:
        InputError: if the input is clipped, or most of the output is.
    """
    trace = roles.trace
    cut = clipped(trace.input_v, smooth=False)
    if cut.any():
        top = float(np.median(trace.input_v[cut]))
        raise InputError(
            f"{name}: the input {roles.input_name!r} is clipped at {top:.4g} V, so what drove the "
            "glide is not known; capture again with more volts per division"
        )
    lost = float(np.mean(~trace.usable))
    if not lost:
        return []
    top = float(np.median(trace.output_v[~trace.usable]))
    if lost > 0.8:
        raise InputError(
            f"{name}: the output {roles.output_name!r} is clipped at {top:.4g} V for "
            f"{100 * lost:.0f} % of the capture; capture again with more volts per division"
        )
    return [
        f"the output is clipped at {top:.4g} V; {100 * lost:.3g} % of the samples are left out: "
        "more volts per division would tell more"
    ]


def check_fit(
    name: str,
    roles: Roles,
    trace: Trace,
    tau: float,
    u95: float,
    residual: Vector,
    steps: int,
) -> None:
    """Refuse a fit that does not tell the time constant.

    Args:
        name: the file.
        roles: the whole capture.
        trace: what was fitted.
        tau: time constant in seconds.
        u95: half-width of its interval in seconds, what absorption may hide left out.
        residual: (rows,) output less fit.
        steps: jumps of the input that were used.

    Raises:
        InputError: saying what is wrong and what to capture instead.
    """
    interval = roles.trace.interval_s
    if tau < FEWEST_SAMPLES_A_TIME_CONSTANT * interval:
        raise InputError(
            f"{name}: is sampled too coarsely: a sample every {_s(interval)}, and the glide is "
            f"over in a few; capture 20 samples or more in a time constant, so at most "
            f"{_s(tau / 20)} apart"
        )
    swing = float(np.ptp(trace.output_v))
    misfit = float(np.sqrt(np.mean(residual**2)))
    noise = float(np.std(np.diff(residual))) / 2**0.5
    if misfit > WORST_MISFIT * swing and misfit > 2.0 * noise:
        raise InputError(
            f"{name}: {roles.output_name!r} does not follow {roles.input_name!r} as a glide does "
            f"(it is {misfit:.3g} V off in a swing of {swing:.3g} V); check which channel is which "
            "(--in, --out) and that the bypass is open"
        )
    if np.isfinite(u95) and u95 <= WORST_RELATIVE * tau:
        return
    held = _longest_hold(trace)
    if steps and held < 2.0 * tau:
        raise InputError(
            f"{name}: is too short: the input is held for {_s(held)} at most, while the time "
            f"constant is about {_s(tau)} give or take {_s(u95)}; capture a step held for at least "
            "3, better 5 time constants"
        )
    if not steps:
        raise InputError(
            f"{name}: shows no step of the input that tells a lag from a delay; capture a step or "
            "a square wave held for 5 time constants"
        )
    raise InputError(
        f"{name}: is too noisy: noise of {misfit:.2g} V on a swing of {swing:.2g} V leaves the "
        f"time constant at {_s(tau)} give or take {_s(u95)}; use a larger step, fewer volts per "
        "division or the oscilloscope's averaging"
    )


def _longest_hold(trace: Trace) -> float:
    edges = [edge.time_s for edge in edges_of(trace)]
    if not edges:
        return 0.0
    return float(np.max(np.diff([*edges, float(trace.times_s[-1])])))


def _s(value: float) -> str:
    return format_value(value, "s")
