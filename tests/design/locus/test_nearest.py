"""A wished pole: K and residual in closed form, and the nearest point against a dense list of closed-loop roots."""

import math
import sys
from pathlib import Path

import numpy as np
import pytest
from gainwright.design.locus.loop import OpenLoop
from gainwright.design.locus.nearest import ask, nearest_point_on_locus

sys.path.insert(0, str(Path(__file__).parent))
from random_loops import random_loop

MOTOR = OpenLoop((1.0,), (1.0, 2.0, 0.0))  # its locus: the real axis from -2 to 0, and the line Re s = -1


@pytest.mark.parametrize(
    ("wished", "nearest", "gain"),
    [
        (-1 + 2j, -1 + 2j, 5.0),  # on it: K = |s| |s + 2|
        (-1.3 + 4j, -1 + 4j, 17.0),  # beside the line: its foot, K = 1 + 4^2
        (-1.3 - 4j, -1 + 4j, 17.0),  # the lower half-plane is the upper one mirrored
        (-1.5 + 0.1j, -1.5, 0.75),  # above the real axis: the point below, K = 1.5 * 0.5
        (-4 + 1j, -2, 0.0),  # beyond the end of the stretch: the open-loop pole itself
        (-1, -1, 1.0),  # the breakaway point, K = 1
        (-2, -2, 0.0),
        (0, 0, 0.0),
    ],
)
def test_a_locus_of_two_lines_is_answered_in_closed_form(wished: complex, nearest: complex, gain: float) -> None:
    """1/(s (s + 2)): distances and gains by hand."""
    found = ask(MOTOR, wished)
    upper = complex(wished.real, abs(wished.imag))
    assert found.nearest.point == pytest.approx(nearest, abs=1e-12)
    assert found.nearest.loop_gain == pytest.approx(gain, abs=1e-10)
    assert found.on_locus == (abs(upper - nearest) < 1e-12)
    assert found.point.loop_gain == pytest.approx(abs(upper) * abs(upper + 2.0), rel=1e-12)
    assert found.distance == pytest.approx(abs(upper - nearest), abs=1e-12)
    assert nearest.imag != 0.0 or found.nearest.point.imag == 0.0


def test_dead_time_enters_gain_and_residual() -> None:
    """exp(-s/2)/s at s = -1 + 2j: K = sqrt(5) exp(-1/2), and the angle of -G is 180 - 57.2958 - 116.5651 deg."""
    found = ask(OpenLoop((1.0,), (1.0, 0.0), 0.5), -1 + 2j)
    assert found.point.loop_gain == pytest.approx(math.sqrt(5.0) * math.exp(-0.5), rel=1e-12)
    assert found.point.angle_residual_deg == pytest.approx(180.0 - math.degrees(1.0 + math.atan2(2.0, -1.0)), abs=1e-9)
    assert not found.on_locus
    # on that locus s = x + jy has x = -y/tan(y/2), up to y = pi/L: as near as any of them
    y = np.linspace(1e-6, 6.2, 400_001)
    assert found.distance == pytest.approx(float(np.min(np.hypot(-y / np.tan(0.5 * y) + 1.0, y - 2.0))), rel=1e-8)


def test_a_wish_too_far_for_any_number_has_no_gain_and_still_a_nearest_point() -> None:
    """exp(-s) at -1e4: K = e^-10000 can't be held."""
    found = ask(OpenLoop((1.0,), (1.0, 0.0), 1.0), -1e4)
    assert math.isnan(found.point.loop_gain)
    assert not found.on_locus
    assert math.isfinite(abs(found.nearest.point))


def test_no_root_of_random_loops_without_delay_is_nearer() -> None:
    """Roots of D + K N at 6,000 gains each, 30 loops with three wishes: none is nearer than what was found,
    and what was found is one of theirs to the spacing of the list."""
    rng, checked = np.random.default_rng(3101), 0
    gains = np.geomspace(1e-7, 1e7, 6000)
    while checked < 90:
        loop = random_loop(rng)
        loop = OpenLoop(loop.numerator, loop.denominator)
        roots = closed_loop(loop, gains)
        for _ in range(3):
            size = 10 ** rng.uniform(-1, 1.5)
            wished = complex(size * np.exp(1j * rng.uniform(0.0, np.pi)))
            found = nearest_point_on_locus(loop, wished)
            least = float(np.min(np.abs(roots - wished)))
            assert abs(found.point - wished) <= least * (1.0 + 1e-9) + 1e-12, (loop, wished)
            assert abs(found.point - wished) >= least - 0.02 * (abs(found.point) + size), (loop, wished)
            checked += 1


def closed_loop(loop: OpenLoop, gains: np.ndarray) -> np.ndarray:
    """Roots of D + K N as eigenvalues of companion matrices."""
    bottom = np.array(loop.denominator)
    top = np.concatenate([np.zeros(bottom.size - len(loop.numerator)), loop.numerator])
    closed = bottom + gains[:, None] * top
    companion = np.zeros((gains.size, bottom.size - 1, bottom.size - 1))
    companion[:, 1:, :-1] = np.eye(bottom.size - 2)
    companion[:, 0] = -closed[:, 1:] / closed[:, :1]
    return np.linalg.eigvals(companion).ravel()
