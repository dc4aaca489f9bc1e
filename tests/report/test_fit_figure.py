"""The picture of a fit shows what was captured, the fit and what is left over."""

import numpy as np
import pytest
from bench.capture_maker import Circuit, Generator, Scope, record

from livelag.bench.capture import Capture
from livelag.bench.capture_roles import find_roles
from livelag.bench.fit import fit_capture
from livelag.report.fit_figure import fit_figure


def fit_of(**scope):
    times, *volts = record(
        Circuit(), Generator((0.0, 4.0), (1e-4,)), Scope(**{"samples": 600, **scope})
    )
    capture = Capture("a$b$.csv", times, ("key $x$", "glide"), np.array(volts))
    return fit_capture(capture.name, find_roles(capture))


def lines(axes):
    return {line.get_label(): line.get_xydata() for line in axes.get_lines()}


def test_data_fit_and_residual(tmp_path):
    fit = fit_of()
    figure = fit_figure("A stage", [("range 'fast', rotation 0.5", fit)])
    upper, lower = figure.get_axes()
    shown = lines(upper)
    np.testing.assert_allclose(shown["out: glide"][:, 1], fit.trace.output_v)
    np.testing.assert_allclose(shown["in: key $x$"][:, 1], fit.trace.input_v)
    np.testing.assert_allclose(shown["fit"][:, 0], fit.trace.times_s * 1e3)  # in ms
    residual = lower.get_lines()[1].get_ydata()
    np.testing.assert_allclose(residual, 1e3 * (shown["out: glide"][:, 1] - shown["fit"][:, 1]))
    low, high = lower.get_ylim()
    assert low < residual.min()
    assert residual.max() < high
    assert "rotation 0.5" in upper.get_title()
    figure.savefig(tmp_path / "x.svg")  # names with $ are drawn as they are


def test_clipped_samples_are_told_apart():
    upper, lower = fit_figure("", [("", fit_of(clip_v=(np.inf, 3.0)))]).get_axes()
    shown = lines(upper)
    assert shown["clipped, left out"][:, 1].max() == 3.0
    assert len(lower.get_lines()[1].get_ydata()) == len(shown["out: glide"])


@pytest.mark.parametrize("count", [2, 5])
def test_several_captures_have_panels_of_their_own(count):
    fit = fit_of()
    figure = fit_figure("A stage", [(f"rotation {k}", fit) for k in range(count)])
    assert len(figure.get_axes()) == 2 * count


def test_long_captures_are_thinned():
    fit = fit_of(samples=15_000, interval_s=4e-5)
    upper = fit_figure("", [("", fit)]).get_axes()[0]
    assert 2000 < len(lines(upper)["fit"]) <= 4000
