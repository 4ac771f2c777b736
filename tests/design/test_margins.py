"""Margins of continuous loops with exact dead time against closed forms, dense grids and each other."""

import math

import numpy as np
import pytest
from gainwright.design.locus.loop import OpenLoop
from gainwright.design.locus.stability import is_stable, stable_gain_intervals
from gainwright.design.margins import gain_crossovers, margins
from gainwright.ident.errors import RequestError

MODE = OpenLoop((100.0,), (1.0, 0.04, 100.0), 0.05)  # damping 0.002
CONDITIONAL = OpenLoop((1.0, 2.0, 1.0), (0.001, 0.11, 1.0, 0.0, 0.0, 0.0), 0.02)  # three integrators, two zeros
UNSTABLE = OpenLoop((2.0, 1.0), (1.0, 0.3, -0.6), 0.15)
HELD = OpenLoop((1.0, 0.5), (1.0, 2.0, 0.0), 0.1, 0.2)


def usable_gain(loop: OpenLoop) -> float:
    low, high = stable_gain_intervals(loop)[-1]
    assert high is not None
    return math.sqrt(max(low, high * 1e-2) * high)


@pytest.mark.parametrize("loop", [MODE, CONDITIONAL, UNSTABLE, HELD], ids=["mode", "conditional", "unstable", "hold"])
def test_the_margins_are_where_stability_ends(loop: OpenLoop) -> None:
    """Gain: just inside stable, just outside not. Delay: the loop with almost all of it is stable, with more is not."""
    gain = usable_gain(loop)
    found = margins(loop, gain)
    assert found.stable
    assert found.critical_gain_above is not None
    assert is_stable(loop, found.critical_gain_above * (1 - 1e-9))
    assert not is_stable(loop, found.critical_gain_above * (1 + 1e-9))
    if math.isfinite(found.delay_margin):
        for share, stable in ((0.9999, True), (1.0001, False)):
            slower = OpenLoop(loop.numerator, loop.denominator, loop.dead_time + share * found.delay_margin, loop.hold)
            assert is_stable(slower, gain) is stable


@pytest.mark.parametrize("loop", [MODE, CONDITIONAL, UNSTABLE, HELD], ids=["mode", "conditional", "unstable", "hold"])
def test_peak_sensitivity_is_the_top_of_a_dense_grid(loop: OpenLoop) -> None:
    """600,000 points, log and around the mode: the grid can only come short, by less than 1e-6 where it is dense."""
    gain = usable_gain(loop)
    w = np.concatenate([np.geomspace(1e-4, 1e4, 300_000), np.linspace(5.0, 15.0, 300_000)])
    grid = float(np.max(1.0 / np.abs(1.0 + gain * loop.at(1j * w))))
    found = margins(loop, gain)
    assert grid <= found.peak_sensitivity * (1 + 1e-12)
    assert found.peak_sensitivity == pytest.approx(grid, rel=1e-6)


@pytest.mark.parametrize("loop", [MODE, CONDITIONAL, UNSTABLE, HELD], ids=["mode", "conditional", "unstable", "hold"])
@pytest.mark.parametrize("share", [0.3, 0.8, 1.0])
def test_the_margins_agree_with_the_peak_sensitivity(loop: OpenLoop, share: float) -> None:
    """Exact bounds GM >= Ms/(Ms - 1) upwards, Ms (1 - 1/GM) >= ... downwards 1 + 1/Ms, and PM >= 2 asin(1/(2 Ms))."""
    low, high = stable_gain_intervals(loop)[-1]
    assert high is not None
    found = margins(loop, low + (0.9 * share) * (high - low))
    peak = found.peak_sensitivity
    assert high / (low + 0.9 * share * (high - low)) >= peak / (peak - 1.0) - 1e-9
    assert found.phase_margin_deg >= math.degrees(2.0 * math.asin(min(1.0, 1.0 / (2.0 * peak)))) - 1e-9
    if found.critical_gain_below:
        assert found.gain_margin >= min(1.0 + 1.0 / peak, peak / (peak - 1.0)) - 1e-9


def test_every_gain_crossover_of_a_light_mode_is_found() -> None:
    """Closed form: |K w0^2/(w0^2 - w^2 + 2j z w0 w)| = 1 at w^2/w0^2 = 1 - 2 z^2 +- sqrt((1 - 2 z^2)^2 - 1 + K^2)."""
    gain, damping = 0.3, 0.002
    inner = 1.0 - 2.0 * damping**2
    root = math.sqrt(inner**2 - 1.0 + gain**2)
    exact = 10.0 * np.sqrt([inner - root, inner + root])
    assert gain_crossovers(MODE, gain) == pytest.approx(exact, rel=1e-12)


def test_an_unstable_loop_has_no_positive_margin() -> None:
    """1/(s + 1)^3 at twice its critical gain of eight: 0.5, a negative phase margin, no delay margin."""
    found = margins(OpenLoop((1.0,), (1.0, 3.0, 3.0, 1.0)), 16.0)
    assert not found.stable
    assert found.gain_margin == pytest.approx(0.5, rel=1e-9)
    assert found.gain_margin_db == pytest.approx(20 * math.log10(0.5), rel=1e-9)
    assert found.phase_margin_deg < 0.0
    assert found.delay_margin == 0.0
    assert found.peak_sensitivity == math.inf


def test_a_loop_that_never_falls_below_one_has_no_delay_margin() -> None:
    """2 (s + 1)/(s + 2): |K G_L| >= 1 at every high frequency, so any added dead time destroys stability."""
    found = margins(OpenLoop((1.0, 1.0), (1.0, 2.0)), 2.5)
    assert found.stable
    assert found.delay_margin == 0.0


def test_a_lag_alone_has_infinite_margins() -> None:
    """1/(s + 1) at K = 0.5 never crosses one: gain, phase and delay margins are infinite, Ms tends to 1."""
    found = margins(OpenLoop((1.0,), (1.0, 1.0)), 0.5)
    assert found.gain_margin == found.phase_margin_deg == found.delay_margin == math.inf
    assert found.peak_sensitivity == pytest.approx(1.0, abs=1e-9)


def test_a_gain_that_is_not_positive_is_refused() -> None:
    """K > 0 throughout."""
    with pytest.raises(RequestError, match="must be positive"):
        margins(MODE, 0.0)
