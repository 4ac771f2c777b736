"""The open loop along its frequencies, at the chosen gain, on a mesh that can't step over what matters."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.optimize import brentq

from ...ident.plant import ComplexArray
from ...ident.run import FloatArray
from ..discretise import GainColumns, law_columns
from ..locus.loop import OpenLoop
from ..locus.stability import stable_gain_intervals
from ..margins import frequency_mesh
from ..sampled.frequency import margins_of
from ..sampled.pulse import law_response
from ..values import Bench
from .spans import Span, joined

_STEP = 0.06  # largest change of ln F between neighbours of the mesh
_ENDLESS = 1e6  # factor up to which a loop that is stable for good is looked at
_SIZE = 400  # points of the mesh before it is refined


@dataclass(frozen=True, eq=False)
class Curve:
    """F on the imaginary axis or on the upper half of the unit circle; the loop is factor * F.

    Attributes
    ----------
    at : callable
        (k,) angular frequencies, rad/s, to (k,) values.
    mesh : (m,) array, rad/s, increasing
    value : (m,) complex array
    falls_from_infinity, falls_to_nothing : bool
        Whether |F| grows without bound below the mesh, and vanishes above it.
    stable : tuple of Span
        Factors at which the closed loop is stable.
    """

    at: Callable[[FloatArray], ComplexArray]
    mesh: FloatArray
    value: ComplexArray
    falls_from_infinity: bool
    falls_to_nothing: bool
    stable: tuple[Span, ...]


def sampled_curve(bench: Bench, gains: GainColumns) -> Curve:
    """Of plant 0 under one sampled law."""
    zero = np.zeros(1, dtype=int)
    law, interval = law_columns(gains, bench.exact.interval), bench.exact.interval
    pulse = bench.spectra.pulse

    def at(w: FloatArray) -> ComplexArray:
        z = np.exp(1j * w * interval)
        z = np.where(w * interval >= np.pi * (1.0 - 1e-14), -1.0 + 0j, z)
        with np.errstate(all="ignore"):
            return np.asarray(pulse.at(z[:, None], zero)[:, 0] * law_response(law, z[:, None])[:, 0])

    start = bench.spectra.frequency[:, 0]
    mesh = _refined(at, np.unique(np.concatenate([start, np.geomspace(start[0], start[-1], _SIZE)])))
    value = at(mesh)
    ends = _critical(at, mesh, value)
    rest = _at_rest(bench, law.response[:, 0], law.command[:, 0])
    every = np.unique([*ends, *([-1.0 / rest] if rest < 0.0 else []), *_last(value[-1])])
    grows = bool(np.abs(value[0]) > 1.02 * np.abs(value[3]))
    return Curve(at, mesh, value, grows, False, _stable_spans(bench, gains, every))


def _at_rest(bench: Bench, response: FloatArray, command: FloatArray) -> float:
    """F(1), where it is finite; else 0."""
    if bench.exact.integrators[0] or abs(command.sum()) < 1e-12:
        return 0.0
    return float(bench.exact.static_gain[0] * response.sum() / command.sum())


def _last(value: complex) -> list[float]:
    return [-1.0 / value.real] if value.real < 0.0 else []


def _stable_spans(bench: Bench, gains: GainColumns, ends: FloatArray) -> tuple[Span, ...]:
    """Spans between critical factors in which Nyquist's count finds no unstable pole."""
    bounds = np.concatenate([[0.0], ends, [np.inf]])
    if ends.size:
        inside = np.concatenate([[ends[0] / 3.0], np.sqrt(ends[1:] * ends[:-1]), [ends[-1] * 3.0]])
    else:
        inside = np.ones(1)
    many = np.zeros(inside.size, dtype=int)
    laws = law_columns(gains.take(many).times(inside), bench.exact.interval)
    stable = margins_of(bench.spectra, many, laws, exact=False).stable
    return joined((float(bounds[i]), float(bounds[i + 1])) for i in np.flatnonzero(stable))


def continuous_curve(loop: OpenLoop, chosen: float) -> Curve:
    """Of the continuous loop at K = `chosen`."""

    def at(w: FloatArray) -> ComplexArray:
        return np.asarray(chosen * loop.at(1j * w))

    stable = tuple(
        (low / chosen, np.inf if high is None else high / chosen) for low, high in stable_gain_intervals(loop)
    )
    last = max((high for _, high in stable), default=1.0)
    mesh = _refined(at, frequency_mesh(loop, chosen * (max(last, 1.0) if np.isfinite(last) else _ENDLESS)))
    grows = loop.denominator[-1] == 0.0
    return Curve(at, mesh, at(mesh), grows, loop.relative_degree > 0, stable)


def _refined(at: Callable[[FloatArray], ComplexArray], mesh: FloatArray) -> FloatArray:
    """Halve the steps (in the logarithm) over which F changes too much."""
    for _ in range(9):
        value = at(mesh)
        with np.errstate(all="ignore"):
            change = np.abs(np.log(value[1:] / value[:-1]))
        wide = np.flatnonzero(~(change <= _STEP) & (np.diff(mesh) > 1e-9 * mesh[1:]))
        if not wide.size or mesh.size > 60_000:
            break
        mesh = np.sort(np.concatenate([mesh, np.sqrt(mesh[wide] * mesh[wide + 1])]))
    return mesh


def _critical(at: Callable[[FloatArray], ComplexArray], mesh: FloatArray, value: ComplexArray) -> FloatArray:
    """Factors at which F passes through the negative real axis; where it vanishes, as under an integral at half the
    sample rate, none does."""
    turn = np.angle(-value)
    near = np.abs(turn) < 0.5 * np.pi
    place = np.flatnonzero((turn[1:] * turn[:-1] < 0.0) & near[1:] & near[:-1])
    w = roots_between(lambda x: np.angle(-at(x)), mesh[place], mesh[place + 1])
    exact = np.flatnonzero((turn == 0.0) & np.isfinite(value) & (value != 0.0))
    return 1.0 / np.abs(at(np.concatenate([w, mesh[exact]])))


def roots_between(measure: Callable[[FloatArray], FloatArray], low: FloatArray, high: FloatArray) -> FloatArray:
    """(k,) roots of a measure that changes sign in each bracket, to rounding, by Brent's method."""

    def one(x: float) -> float:
        return float(measure(np.array([x]))[0])

    found = [brentq(one, a, b, xtol=1e-300, rtol=4.0 * np.finfo(float).eps) for a, b in zip(low, high, strict=True)]
    return np.array(found, dtype=float)
