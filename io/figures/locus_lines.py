"""The locus inside a window of the s plane, as smooth lines of rising gain.

The lines are where the angle of -G_L(s) is zero. They are found as the zero level of Im(-G_L)/(|G_L| Im s) on a grid
over the upper half plane (on the real axis its limit -G_L'/|G_L| is taken, so that lines meet the axis where they break
away), moved onto the locus by Newton's method, and mirrored. On the real axis the sign of -G_L between real roots
decides.
"""

from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from ...design.locus.loop import OpenLoop

ComplexArray = NDArray[np.complex128]
FloatArray = NDArray[np.float64]
View = tuple[float, float, float, float]
ACROSS, UP = 300, 220
_OFF = 1e-3  # rad; a vertex further off than this after polishing lies at a root, where no angle is defined


def locus_lines(loop: OpenLoop, view: View) -> tuple[ComplexArray, ...]:
    """Lines of the locus of K > 0 inside a window.

    Parameters
    ----------
    loop : OpenLoop
    view : (left, right, low, high), 1/s

    Returns
    -------
    tuple of (m,) complex arrays, 1/s
        Each in order of rising gain.

    Examples
    --------
    >>> lines = locus_lines(OpenLoop((1.0,), (1.0, 3.0, 2.0, 0.0)), (-3.0, 1.0, -2.0, 2.0))
    >>> round(float(max(line.imag.max() for line in lines)), 3)
    2.0
    """
    upper = [line for piece in _contours(loop, view) for line in _polished(loop, piece)]
    rising = [line for whole in upper for line in _rising(loop, whole)]
    mirrored = [line.conj() for line in rising]
    return (*rising, *mirrored, *(line for whole in _real_axis(loop, view) for line in _rising(loop, whole)))


def at_gain(loop: OpenLoop, lines: tuple[ComplexArray, ...], gain: float) -> ComplexArray:
    """Points of the lines at one gain, 1/s: the closed-loop poles inside the window."""
    found: list[complex] = []
    for line in lines:
        with np.errstate(divide="ignore"):
            size = -np.log(np.abs(loop.at(line))) - np.log(gain)
        for place in np.flatnonzero((size[:-1] <= 0.0) & (size[1:] > 0.0) & np.isfinite(size[1:] - size[:-1])):
            share = -size[place] / (size[place + 1] - size[place])
            found.append(complex(line[place] + share * (line[place + 1] - line[place])))
    return _settled(loop, np.asarray(found, dtype=np.complex128), gain)


def _settled(loop: OpenLoop, s: ComplexArray, gain: float) -> ComplexArray:
    """Interpolated points moved onto closed-loop poles by Newton's method on ln(-K G_L) = 0."""
    with np.errstate(all="ignore"):
        for _ in range(4):
            step = np.log(-gain * loop.at(s)) / loop.log_derivative(s)
            s = np.where(np.abs(step) < 0.05 * np.abs(s), s - step, s)
    return s


def _contours(loop: OpenLoop, view: View) -> list[ComplexArray]:
    from contourpy import contour_generator

    left, right, low, high = view
    cell = (right - left) / ACROSS
    x = left + cell * (np.arange(ACROSS) + 0.5 / np.sqrt(2.0))  # seldom on a root
    y = np.linspace(0.0, max(high, -low), UP)
    turned = np.ma.masked_invalid(_turn(loop, x, y))
    found = [np.asarray(line) for line in contour_generator(x=x, y=y, z=turned).lines(0.0)]
    return [line[:, 0] + 1j * line[:, 1] for line in found if len(line) > 2]


def _turn(loop: OpenLoop, x: FloatArray, y: FloatArray) -> FloatArray:
    """(len(y), len(x)) of Im(-G_L)/(|G_L| y), the limit on the real axis."""
    s = x[None, :] + 1j * y[1:, None]
    with np.errstate(all="ignore"):
        value = -loop.at(s)
        upper = value.imag / (np.abs(value) * y[1:, None])
        real = x.astype(np.complex128)
        on_axis = -loop.at(real)
        axis = np.real(on_axis * loop.log_derivative(real)) / np.abs(on_axis)
    return np.vstack([axis[None, :], upper])


def _polished(loop: OpenLoop, line: ComplexArray) -> list[ComplexArray]:
    """The pieces of a line that belong to K > 0, each vertex moved onto the locus."""
    s = line.copy()
    with np.errstate(all="ignore"):
        positive = (-loop.at(s)).real > 0.0
        reach = 4.0 * np.abs(np.gradient(s))
        for _ in range(4):
            step = 1j * np.angle(-loop.at(s)) / loop.log_derivative(s)
            s = np.where(np.isfinite(step) & (np.abs(step) < reach), s - step, s)
        good = positive & (np.abs(np.angle(-loop.at(s))) < _OFF)
    edges = np.flatnonzero(np.diff(good.astype(int))) + 1
    pieces = np.split(np.arange(len(s)), edges)
    return [s[piece] for piece in pieces if good[piece[0]] and len(piece) > 2]


def _rising(loop: OpenLoop, line: ComplexArray) -> list[ComplexArray]:
    """The line cut where the gain turns, each piece in order of rising gain."""
    with np.errstate(divide="ignore"):
        size = np.abs(loop.at(line))
    up = np.diff(-size) > 0.0
    turns = np.flatnonzero(np.diff(up.astype(int))) + 1
    ends = [0, *turns, len(line) - 1]
    pieces = [line[first : last + 1] for first, last in pairwise(ends)]
    return [piece if up[first] else piece[::-1] for first, piece in zip(ends[:-1], pieces, strict=True)]


def _real_axis(loop: OpenLoop, view: View) -> list[ComplexArray]:
    left, right, _, _ = view
    roots = np.concatenate([loop.poles, loop.zeros])
    real = sorted({float(root.real) for root in roots if root.imag == 0.0 and left < root.real < right})
    places = [left, *real, right]
    lines = []
    for first, last in pairwise(places):
        middle = complex(loop.at(complex(0.5 * (first + last))))
        if -middle.real > 0.0:
            inset = 1e-6 * (last - first)
            lines.append(np.linspace(first + inset, last - inset, 240).astype(np.complex128))
    return lines
