"""The locus of random loops against mpmath at 40 digits: roots, critical gains, angles, breakaway, far ends, branches.

Each has a short form, and one of 1,000 loops under the mark `campaign`. The loops hold lags, integrators, modes down to
damping 0.002, a quarter of them unstable, dead time in four of five and a hold in two of five (random_loops.py).
"""

import math
import sys
from pathlib import Path

import mpmath
import numpy as np
import pytest
from gainwright.design.locus.branches import locus_branches
from gainwright.design.locus.crossings import axis_crossings
from gainwright.design.locus.loop import OpenLoop
from gainwright.design.locus.roots import closed_loop_roots
from gainwright.design.locus.special_points import arrivals, asymptotes, breakaway_points, departures
from gainwright.design.locus.stability import stable_gain_intervals, unstable_roots
from scipy.integrate import solve_ivp

sys.path.insert(0, str(Path(__file__).parent))
from exact_loops import condition, equation, newton, polynomial, slope_roots, value
from random_loops import random_loop, unstable_count

COUNTS = [12, pytest.param(1000, marks=[pytest.mark.campaign, pytest.mark.timeout(7200)])]


def loops(seed: int, count: int) -> list[OpenLoop]:
    rng = np.random.default_rng(seed)
    return [random_loop(rng) for _ in range(count)]


def a_gain(loop: OpenLoop, rng: np.random.Generator) -> float:
    """Near one of the first critical gains where there is one."""
    gains = [c.loop_gain for c in axis_crossings(loop) if 1e-6 < c.loop_gain < 1e4]
    return float((rng.choice(gains[:4]) if gains else 1.0) * rng.choice([0.6, 0.97, 1.05, 1.8]))


@pytest.mark.parametrize("count", COUNTS)
def test_counts_of_unstable_roots_are_right_on_all_of_them(count: int) -> None:
    """Critical gains, certified roots and a Nyquist winding of numpy's polynomials agree on every loop; among them are
    open-loop unstable ones, and ones that are stable above some gain or between two only."""
    rng = np.random.default_rng(1900)
    unstable = conditional = 0
    for loop in loops(900, count):
        gain = a_gain(loop, rng)
        counted = unstable_count(loop, gain)
        assert abs(counted - round(counted)) < 1e-6, (loop, gain)
        assert unstable_roots(loop, gain) == round(counted), (loop, gain)
        assert closed_loop_roots(loop, gain, 0.0).size == round(counted), (loop, gain)
        unstable += bool(np.any(loop.poles.real > 1e-9))
        conditional += any(low > 0.0 for low, _ in stable_gain_intervals(loop))
    assert unstable >= 0.1 * count
    assert conditional >= 0.01 * count


@pytest.mark.parametrize("count", COUNTS)
def test_roots_are_within_their_condition_of_forty_digits(count: int) -> None:
    """The eight rightmost roots of each are roots of mpmath's to 1e-12 times their condition number."""
    rng, checked = np.random.default_rng(1901), 0
    for loop in loops(901, count):
        gain = a_gain(loop, rng)
        roots = closed_loop_roots(loop, gain)
        for root in roots[roots.imag >= 0.0][:8]:
            exact = newton(lambda s, loop=loop, gain=gain: equation(loop, gain, s), complex(root))
            off, known = abs(complex(exact - mpmath.mpc(complex(root)))), condition(loop, gain, exact)
            assert off <= 1e-12 * known, (loop, gain, root, off, known)
            checked += 1
    assert checked >= count


@pytest.mark.parametrize("count", COUNTS)
def test_critical_gains_to_twelve_digits(count: int) -> None:
    """Each crossing solved anew in 40 digits: gain and frequency within 1e-12. Beside a zero of the hold rounding the
    frequency alone moves K by |w G'/G| times as much; where that is above 1,000 it is granted."""
    checked = 0
    for loop in loops(902, count):
        for crossing in axis_crossings(loop)[:6]:
            if crossing.frequency == 0.0 or not math.isfinite(crossing.frequency):
                continue
            w = mpmath.re(
                newton(lambda x, loop=loop: mpmath.im(value(loop, mpmath.mpc(0, mpmath.re(x)))), crossing.frequency)
            )
            gain = float(-1 / mpmath.re(value(loop, mpmath.mpc(0, w))))
            steep = abs(complex(loop.log_derivative(1j * float(w)))) * float(w)
            assert crossing.loop_gain == pytest.approx(gain, rel=1e-12 * max(1.0, 1e-3 * steep)), loop
            assert crossing.frequency == pytest.approx(float(w), rel=1e-12), loop
            checked += 1
    assert checked >= count // 2


@pytest.mark.parametrize("count", COUNTS)
def test_angles_of_departure_and_arrival_are_where_the_first_and_last_roots_lie(count: int) -> None:
    """In 40 digits, a root at a gain so small or large that it lies within 1e-9 of its pole or zero."""
    checked = 0
    for loop in loops(903, count):
        for leaving, small in [(d, True) for d in departures(loop)] + [(a, False) for a in arrivals(loop)]:
            if len(leaving.angles_deg) > 1 or abs(leaving.root) == 0.0:
                continue
            side = loop.denominator if small else loop.numerator
            root = newton(lambda s, side=side: polynomial(side, s), leaving.root)
            near = root * (1 + mpmath.mpf("1e-13"))
            size = abs(value(loop, near))
            gain = 1 / size
            step = abs(near - root) * mpmath.expj(mpmath.radians(leaving.angles_deg[0]))
            found = newton(lambda s, loop=loop, gain=gain: 1 + gain * value(loop, s), root + step)
            away = found - root
            turned = complex(away / abs(away) / mpmath.expj(mpmath.radians(leaving.angles_deg[0])))
            assert abs(math.degrees(math.atan2(turned.imag, turned.real))) < 1e-6, (loop, leaving)
            checked += 1
    assert checked >= count


@pytest.mark.parametrize("count", COUNTS)
def test_breakaway_points_are_all_there_with_dead_time_too(count: int) -> None:
    """Real and complex roots of N'D - L N D - N D' in 40 digits with K > 0 and the angle met: no more and no fewer."""
    checked = 0
    for loop in loops(904, count):
        if loop.hold is not None:
            continue
        wanted = []
        for root in slope_roots(loop):
            if abs(polynomial(loop.denominator, mpmath.mpc(root))) == 0:  # a double pole
                continue
            gain = -1 / value(loop, mpmath.mpc(root)) if abs(value(loop, mpmath.mpc(root))) > 0 else mpmath.mpc(-1)
            if mpmath.re(gain) > 0 and abs(mpmath.arg(gain)) < 1e-9:
                wanted.append(root)
        found = [point.point for point in breakaway_points(loop)]
        repeated = [r for r in loop.poles if np.sum(np.abs(loop.poles - r) < 1e-6) > 1]
        wanted = [r for r in wanted if not any(abs(r - pole) < 1e-6 for pole in repeated)]
        assert len(found) == len(wanted), (loop, found, wanted)
        for point in found:
            assert min(abs(point - root) for root in wanted) <= 1e-7 * abs(point), loop
        checked += len(found)
    assert checked >= count // 4


@pytest.mark.parametrize("count", COUNTS)
def test_the_locus_ends_on_its_asymptotes(count: int) -> None:
    """At K = 1e60 the roots of a loop without delay lie in the directions given, their mean at the centroid; with dead
    time, at K = exp(1e5), on the horizontal lines given (1e-3: they close in as n/(L Re s))."""
    lines = heights = 0
    for loop in loops(905, count):
        ends = asymptotes(loop)
        if ends.angles_deg:
            size = (mpmath.mpf(10) ** 60 * abs(mpmath.mpf(loop.leading))) ** (mpmath.mpf(1) / len(ends.angles_deg))
            roots = []
            for angle in ends.angles_deg:
                start = ends.centroid + size * mpmath.expj(mpmath.radians(angle))
                root = newton(lambda s, loop=loop: mpmath.log(-(mpmath.mpf(10) ** 60) * value(loop, s)), start)
                assert abs(complex(root / start) - 1.0) < 1e-9
                roots.append(root)
            if len(roots) == 1:  # one line is the axis itself: no place on it is marked
                continue
            assert abs(complex(sum(roots) / len(roots)) - ends.centroid) < 1e-6 * (1.0 + abs(ends.centroid))
            lines += 1
        elif ends.heights and loop.hold is None and loop.relative_degree > 0:
            for height in ends.heights:
                assert height_at(loop, 1e5, height) == pytest.approx(height, abs=1e-3 / loop.dead_time), loop
            heights += 1
    assert lines >= 1
    assert heights >= 1


def height_at(loop: OpenLoop, log_gain: float, height: float) -> float:
    """Imaginary part of the closed-loop root at ln K whose phase is met near a height: s from the magnitude at that
    height, then the height from the angle, until both hold."""
    late, s = mpmath.mpf(loop.dead_time), mpmath.mpc(log_gain / loop.dead_time, height)
    for _ in range(40):
        ratio = polynomial(loop.numerator, s) / polynomial(loop.denominator, s)
        real = (log_gain + mpmath.log(abs(ratio))) / late
        turn = mpmath.arg(-ratio * mpmath.expj(-mpmath.mpf(height) * late))
        s = mpmath.mpc(real, height + turn / late)
    return float(mpmath.im(s))


@pytest.mark.parametrize("count", [4, pytest.param(200, marks=[pytest.mark.campaign, pytest.mark.timeout(7200)])])
def test_no_branch_is_swapped_on_the_way(count: int) -> None:
    """From each gain to the next every branch is where an independent integration of ds/dlnK = -G/G' takes it. Steps
    that start beside another root, or leave or reach the real axis, pass a breakaway point and are left out."""
    checked = 0
    for loop in loops(906, count):
        gains, late = np.geomspace(0.05, 20.0, 40), loop.dead_time + (loop.hold or 0.0)
        left = -1.5 / late if late else None
        if closed_loop_roots(loop, 20.0, left).size > 30:  # as many zeros as poles: no end of roots right of any line
            continue
        table = np.array(locus_branches(loop, gains, left))
        for i in range(gains.size - 1):
            known = np.flatnonzero(np.isfinite(table[:, i]) & np.isfinite(table[:, i + 1]))
            for j in known:
                start, end = table[j, i], table[j, i + 1]
                if (start.imag == 0.0) != (end.imag == 0.0):
                    continue
                others = np.abs(np.delete(table[known, i], np.flatnonzero(known == j)) - start)
                if others.size and others.min() < 0.02 * abs(start) + 3.0 * abs(end - start):
                    continue
                assert abs(integrated(loop, start, gains[i], gains[i + 1]) - end) < 1e-5 * (abs(end) + 1e-3), loop
                checked += 1
    assert checked >= 15 * count


def integrated(loop: OpenLoop, start: complex, low: float, high: float) -> complex:
    """ds/dlnK = -G/G' from low to high, G'/G from the roots of the polynomials."""
    zeros, poles = np.roots(loop.numerator), np.roots(loop.denominator)

    def slope(_: float, y: np.ndarray) -> list[float]:
        s = complex(y[0], y[1])  # a trial step may end far away
        share = np.sum(1.0 / (s - zeros)) - np.sum(1.0 / (s - poles)) - loop.dead_time
        if loop.hold is not None:
            x = s * loop.hold
            share += -0.5 * loop.hold if abs(x) < 1e-6 else loop.hold / (np.exp(x) - 1.0) - 1.0 / s
        moved = -1.0 / share
        return [moved.real, moved.imag]

    with np.errstate(all="ignore"):
        found = solve_ivp(slope, (math.log(low), math.log(high)), [start.real, start.imag], rtol=1e-9, atol=1e-12)
    return complex(found.y[0, -1], found.y[1, -1])
