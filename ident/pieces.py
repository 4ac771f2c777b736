"""Columns in closed form between events, read off at any time, under white or coloured noise.

After an event at time a_j a column is, with s = t - a_j,

    m(t) = flat_0 + flat_1 s + flat_2 s^2 + Re sum_i amount_i exp(p_i s)

and whitening, w[k] = m[k] - rho m[k-1] - c w[k-1], keeps that form: an exponential is multiplied by
F = (1 - rho/g)/(1 + c/g), g = exp(p dt), a power of s by the moments of the filter, and each event leaves a remainder
that dies out as (-c)^k. No sample has to be passed that nobody asks for.
"""

from dataclasses import dataclass

import numpy as np

from .run import FloatArray
from .whiten import Colour

# Where an exponential decays as the filter does, it is taken to decay by this much otherwise.
_APART = 1e-7


@dataclass(frozen=True, eq=False)
class Pieces:
    """One column of one run.

    Attributes
    ----------
    start : (m,) array, s
        Increasing; the first piece holds before it too.
    flat : (m, 3) array
    poles : (k,) complex array, 1/s
    amounts : (m, k) complex array
    """

    start: FloatArray
    flat: FloatArray
    poles: np.ndarray
    amounts: np.ndarray


@dataclass(frozen=True, eq=False)
class Places:
    """Where columns of one run are read off.

    Attributes
    ----------
    at : (r,) array
        In samples from the run's start, increasing; broken ones stand for blocks in which nothing arrives.
    weight : (r,) array
    interval : float, s
    begins : (b,) array of int
        First samples of the stretches between lost ones.
    """

    at: FloatArray
    weight: FloatArray
    interval: float
    begins: np.ndarray


def read_off(pieces: Pieces, places: Places, colour: Colour) -> FloatArray:
    """(r,) weighted values of the whitened column.

    Parameters
    ----------
    pieces : Pieces
    places : Places
    colour : Colour
        Its wandering level is left to others.
    """
    first = np.ceil(pieces.start / places.interval - 1e-9).astype(int)
    first[0] = 0
    # of pieces that begin between the same two samples only the last is ever seen
    seen = np.append(first[1:] != first[:-1], True)
    which, first = np.flatnonzero(seen), first[seen]
    first[0] = 0
    if colour.rho == 0.0 and colour.c == 0.0:
        piece = which[np.maximum(np.searchsorted(first, places.at, side="right") - 1, 0)]
        return places.weight * _value(pieces, piece, places.at * places.interval)
    return _coloured(pieces, places, colour, which, first)


def _coloured(pieces: Pieces, places: Places, colour: Colour, which: np.ndarray, first: np.ndarray) -> FloatArray:
    dt = places.interval
    steady = _whitened(pieces, colour, dt)
    event = np.union1d(first, places.begins)
    piece = which[np.searchsorted(first, event, side="right") - 1]
    fresh = np.isin(event, places.begins)
    before = np.concatenate([piece[:1], piece[:-1]])
    last = (event - 1) * dt
    left = colour.rho * (_value(pieces, piece, last) - _value(pieces, before, last))
    left += colour.c * (_value(steady, piece, last) - _value(steady, before, last))
    here = event * dt
    own = _value(pieces, piece, here)
    begun = own / colour.variance_ratio - _value(steady, piece, here)
    fade = np.power(complex(-colour.c), np.diff(event, prepend=event[0])).real
    remains = np.empty(len(event))
    total = 0.0
    for i in range(len(event)):
        total = begun[i] if fresh[i] else left[i] + fade[i] * total
        remains[i] = total
    at = np.maximum(np.searchsorted(event, places.at, side="right") - 1, 0)
    since = places.at - event[at]
    # a broken place lies in a block, which no remainder reaches
    alive = (since == np.floor(since)) & (since * np.log(max(abs(colour.c), 1e-300)) > -40.0)
    fading = np.where(alive, np.abs(colour.c) ** np.where(alive, since, 0.0), 0.0)
    if colour.c > 0:
        fading = np.where(alive & (since % 2 == 1), -fading, fading)
    out = _value(steady, piece[at], places.at * dt) + remains[at] * fading
    opens = fresh[at] & (since == 0.0)
    out[opens] = own[at[opens]] / np.sqrt(colour.variance_ratio)
    return np.asarray(places.weight * out)


def _value(pieces: Pieces, piece: np.ndarray, time: FloatArray) -> FloatArray:
    since = time - pieces.start[piece]
    flat = pieces.flat[piece]
    out = flat[:, 0].copy()
    if pieces.flat[:, 1:].any():
        out += since * (flat[:, 1] + since * flat[:, 2])
    for i, pole in enumerate(pieces.poles.tolist()):
        amount = pieces.amounts[piece, i]
        if pole.imag == 0.0:
            out += amount.real * np.exp(pole.real * since)
        else:
            out += (amount * np.exp(pole * since)).real
    return np.asarray(out)


def _whitened(pieces: Pieces, colour: Colour, dt: float) -> Pieces:
    """The same pieces behind the filter, each as if it had gone on for ever."""
    rho, c = colour.rho, colour.c
    zeroth, once = (1 - rho) / (1 + c), -(rho + c) / (1 + c) ** 2
    twice = -(rho + c) * (1 - c) / (1 + c) ** 3
    a, b, d = pieces.flat.T
    flat = np.column_stack(
        [zeroth * a - once * dt * b + twice * dt * dt * d, zeroth * b - 2 * once * dt * d, zeroth * d]
    )
    back = np.exp(-pieces.poles * dt)
    below = 1 + c * back
    below = np.where(np.abs(below) < _APART, _APART, below)
    return Pieces(pieces.start, flat, pieces.poles, pieces.amounts * ((1 - rho * back) / below))
