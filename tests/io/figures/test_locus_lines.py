"""The lines of the locus lie on the locus, whole and in order of rising gain."""

import numpy as np
import pytest
from gainwright.design.locus.loop import OpenLoop
from gainwright.io.figures.locus_lines import at_gain, locus_lines

VIEW = (-6.0, 2.0, -4.0, 4.0)


def test_a_zero_left_of_a_double_integrator_gives_the_circle_about_the_zero():
    """1 + K (s + z)/s^2 = 0 gives s^2 + K s + K z = 0; eliminating K: |s + z| = z (closed form), here z = 2."""
    lines = locus_lines(OpenLoop((1.0, 2.0), (1.0, 0.0, 0.0)), VIEW)
    off_axis = np.concatenate([line[np.abs(line.imag) > 1e-9] for line in lines])
    assert np.abs(off_axis + 2.0) == pytest.approx(2.0, abs=1e-9)
    assert off_axis.imag.max() == pytest.approx(2.0, abs=1e-3)


def test_three_lags_cross_into_instability_at_the_known_gain():
    """1/(s (s+1) (s+2)): Routh gives K = 6 at s = +-j sqrt(2) (closed form)."""
    loop = OpenLoop((1.0,), (1.0, 3.0, 2.0, 0.0))
    poles = at_gain(loop, locus_lines(loop, VIEW), 6.0)
    crossing = [s for s in poles if s.imag > 0.1]
    assert len(crossing) == 1
    assert abs(crossing[0] - 1j * 2**0.5) < 1e-12
    assert min(s.real for s in poles) == pytest.approx(-3.0, abs=1e-12)


def test_at_any_gain_the_lines_hold_every_root_of_the_polynomial_inside_the_window():
    """A loop of fourth order without delay: numpy's polynomial roots, good to 1e-12, are the outside reference."""
    numerator, denominator = (1.0, 4.0, 9.0), (1.0, 2.4, 25.0, 3.0, 0.0)
    loop = OpenLoop(numerator, denominator)
    lines = locus_lines(loop, (-8.0, 3.0, -8.0, 8.0))
    for gain in (0.3, 2.0, 11.0):
        roots = np.roots(np.polyadd(denominator, gain * np.asarray(numerator)))
        found = at_gain(loop, lines, gain)
        for root in roots:
            assert np.abs(found - root).min() < 1e-9


@pytest.mark.parametrize(
    "loop",
    [
        OpenLoop((12.0, 20.0), (0.5, 1.0, 0.0), 0.12, 0.02),
        OpenLoop((-2.0, 2.0), (1.0, 2.0, 2.0)),
        OpenLoop((1.0, 4.0, 9.0), (0.02, 1.0, 0.4, 25.0, 0.0), 0.05, 0.01),
    ],
    ids=["lag with dead time and hold", "zero on the right", "resonance with dead time"],
)
def test_every_point_meets_the_angle_condition_and_gain_rises_along_every_line(loop):
    """angle(-G_L) = 0 within 1e-6 rad, a hundredth of what a sheet may leave; K = 1/|G_L| never falls on the way."""
    lines = locus_lines(loop, (-12.0, 5.0, -8.0, 8.0))
    assert lines
    for line in lines:
        assert np.abs(np.angle(-loop.at(line))).max() < 1e-6
        assert np.all(np.diff(1.0 / np.abs(loop.at(line))) >= -1e-12)
