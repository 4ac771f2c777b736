"""What may lie behind a run that the fitted plant does not foretell: one cause at a time, each with its size.

The record's level (and an integrating plant's drift) is free throughout: it tells of the operating point, not of the
plant. Each cause has one size; the size that leaves least of the miss is found, and what it leaves is compared. That a
cause explains a miss does not prove it: it says what to look for first.
"""

from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import partial

import numpy as np
from scipy.optimize import minimize_scalar

from .fitted import Fit
from .friction import rough_free_run
from .noise import effective_samples
from .plant import Plant
from .regression import starts_unsettled
from .run import FloatArray, Run
from .whiten import Colour

_NORMAL_95 = 1.959964
# A miss below this multiple of the fitted noise has nothing to explain.
_SOMETHING = 1.1
_RATIOS = ("natural frequency", "damping ratio", "time constants", "friction")
_LIGHT = 0.7  # damping ratio under which a pole pair is called by its frequency


@dataclass(frozen=True)
class Cause:
    """One cause at its best size.

    Attributes
    ----------
    name : str
        "gain", "natural frequency", "damping ratio", "time constants", "delay", "friction", "play", "command ends" or
        "drift".
    size : float
        gain, natural frequency, damping ratio, time constants, friction: relative change; delay: s; play: command unit;
        command ends: the reading at which it does; drift: response unit over the whole record.
    error : float
        Half the 95 % interval of the size, from the curvature of the miss and the noise's colour.
    explains : float
        Share of what the prediction misses beyond the noise (in squares) that it takes away.
    """

    name: str
    size: float
    error: float
    explains: float


@dataclass(frozen=True)
class Explained:
    """All causes of one record.

    Attributes
    ----------
    missed : float, response unit
        rms that the prediction misses, the level free.
    level : float, response unit
        How far the record's level lies from the fitted one; for an integrating plant, how far it drifts by itself over
        the record.
    level_command : float, command unit
        The change of the operating command that this amounts to.
    causes : tuple of Cause
        Best first; empty where there is nothing to explain.
    """

    missed: float
    level: float
    level_command: float
    causes: tuple[Cause, ...]


class _Miss:
    """Residuals of changed predictions, whatever enters freely taken off."""

    def __init__(self, run: Run, fit: Fit) -> None:
        self.run = replace(run, between=fit.between) if run.between == "auto" else run
        self.fit, self.valid = fit, run.valid
        self.time = run.time - run.time[0]
        self.free = self._free()
        self.basis, _ = np.linalg.qr(self.free)
        self.measured = run.response[self.valid]
        self.model = self.predicted(fit.plant)

    def _free(self) -> FloatArray:
        columns = [np.ones(int(self.valid.sum()))]
        at = self.time[self.valid]
        if self.fit.plant.integrators:
            columns.append(at)
        for pole in self.fit.plant.poles[self.fit.plant.poles.imag >= 0] if starts_unsettled(self.run) else ():
            if pole.real < 0.0:
                decay = np.exp(pole * at)
                columns += [decay.real, decay.imag] if pole.imag else [decay.real]
        return np.column_stack(columns)

    def predicted(
        self, plant: Plant, run: Run | None = None, friction: tuple[float, float] | None = None
    ) -> FloatArray:
        """(n,) free run of another plant, run or friction, from level zero."""
        pair = self.fit.friction if friction is None else friction
        return rough_free_run(plant, run or self.run, self.fit.operating_command, 0.0, pair)[self.valid]

    def cleared(self, values: FloatArray) -> FloatArray:
        """Less what the free columns take up."""
        return np.asarray(values - self.basis @ (self.basis.T @ values))

    def left(self, model: FloatArray) -> float:
        """Sum of squares that a prediction leaves."""
        away = self.cleared(self.measured - model)
        return float(away @ away)


def explain(run: Run, fit: Fit) -> Explained:
    """Try every cause on what the free run misses.

    Parameters
    ----------
    run : Run
        Not fitted.
    fit : Fit
        With its plant and noise.
    """
    miss = _Miss(run, fit)
    start = miss.left(miss.model)
    missed = float(np.sqrt(start / len(miss.measured)))
    level, command = _level(miss)
    floor = fit.noise.std**2 * len(miss.measured)
    if start <= _SOMETHING**2 * floor:
        return Explained(missed, level, command, ())
    found = [cause for tried in (_linear(miss, start, floor), _searched(miss, start, floor)) for cause in tried]
    return Explained(missed, level, command, tuple(sorted(found, key=lambda cause: -cause.explains)))


def _level(miss: _Miss) -> tuple[float, float]:
    """How far the level moved, or the drift over the record; and the command that it amounts to."""
    weights, *_ = np.linalg.lstsq(miss.free, miss.measured - miss.model, rcond=None)
    plant = miss.fit.plant
    if plant.integrators:
        rate = float(weights[1])
        gain = plant.numerator[-1] / plant.denominator[-1 - plant.integrators]
        return rate * float(miss.time[-1]), rate / gain if plant.integrators == 1 else 0.0
    moved = float(weights[0]) - miss.fit.operating_response
    return moved, moved / plant.static_gain


def _linear(miss: _Miss, start: float, floor: float) -> list[Cause]:
    """Gain and drift enter linearly."""
    line = miss.time[miss.valid]
    shape = line**2 if miss.fit.plant.integrators else line
    drift = shape / max(float(np.ptp(shape)), 1e-300)
    out = []
    for name, column in (("gain", miss.model), ("drift", drift)):
        clear = miss.cleared(column)
        power = float(clear @ clear)
        if power > 0.0:
            size = float(clear @ miss.cleared(miss.measured - miss.model)) / power
            after = start - size**2 * power
            out.append(Cause(name, size, _half(miss, after, power), _share(start, after, floor)))
    return out


def _searched(miss: _Miss, start: float, floor: float) -> list[Cause]:
    out = []
    for name, models, low, high in _families(miss):
        grid = np.linspace(low, high, 13)
        lefts = [miss.left(models(float(size))) for size in grid]
        best = int(np.argmin(lefts))
        ends = (float(grid[max(best - 1, 0)]), float(grid[min(best + 1, len(grid) - 1)]))
        found = minimize_scalar(
            lambda size, m=models: miss.left(m(float(size))), bounds=ends, method="bounded", options={"maxiter": 14}
        )
        size, after = min((float(found.x), float(found.fun)), (float(grid[best]), lefts[best]), key=lambda end: end[1])
        if after >= start:
            continue
        step = 1e-3 * (high - low)
        slope = miss.cleared(models(size + step) - models(size - step)) / (2.0 * step)
        told = float(np.expm1(size)) if name in _RATIOS else size
        half = (1.0 + told if name in _RATIOS else 1.0) * _half(miss, after, float(slope @ slope))
        out.append(Cause(name, told, half, _share(start, after, floor)))
    return out


_Family = tuple[str, Callable[[float], FloatArray], float, float]


def _families(miss: _Miss) -> list[_Family]:
    """(name, prediction of a size, lowest and highest size); ratios by their logarithm."""
    plant, fit, run = miss.fit.plant, miss.fit, miss.run
    moving = plant.poles[plant.poles != 0]
    slowest = float(np.max(1.0 / np.abs(moving.real), initial=0.0)) if moving.size else 0.0
    swinging = any(abs(p.imag) > 0.0 and -p.real / abs(p) < _LIGHT for p in moving)
    interval = float(np.median(np.diff(run.time)))
    out: list[_Family] = []
    if moving.size:
        name, way = ("natural frequency", 1.0) if swinging else ("time constants", -1.0)
        out.append((name, lambda size: miss.predicted(_sped(plant, float(np.exp(way * size)))), -0.7, 0.7))
    if swinging:
        out.append(("damping ratio", lambda size: miss.predicted(_damped(plant, float(np.exp(size)))), -1.2, 1.2))
    most = max(8.0 * interval, plant.dead_time, min(0.5 * slowest, 0.2 * float(miss.time[-1])))
    out.append((
        "delay",
        lambda size: miss.predicted(replace(plant, dead_time=max(plant.dead_time + size, 0.0))),
        -plant.dead_time, most,
    ))  # fmt: skip
    if any(fit.friction):
        pair = fit.friction
        out.append((
            "friction",
            lambda size: miss.predicted(plant, friction=(pair[0] * float(np.exp(size)), pair[1] * float(np.exp(size)))),
            -1.5, 1.5,
        ))  # fmt: skip
    reach = float(np.ptp(run.command))
    if reach > 0.0:
        low, high = float(run.command.min()), float(run.command.max())
        out.append(("play", lambda size: miss.predicted(plant, _loose(run, size)), 0.0, 0.5 * reach))
        rest = run.start_command
        for top in (True, False):
            ends = (rest, high) if top else (low, rest)
            if ends[1] - ends[0] > 0.05 * reach:
                ended = partial(_ended_model, miss, top)
                out.append(("command ends", ended, *ends))
    return out


def _ended_model(miss: _Miss, top: bool, size: float) -> FloatArray:
    return miss.predicted(miss.fit.plant, _ended(miss.run, size, top))


def _sped(plant: Plant, factor: float) -> Plant:
    """G(s / factor), an integrator's gain kept."""
    top = [c / factor**k for k, c in enumerate(reversed(plant.numerator))]
    bottom = [c / factor**k for k, c in enumerate(reversed(plant.denominator))]
    kept = factor ** (-plant.integrators)
    return Plant(tuple(kept * c for c in reversed(top)), tuple(reversed(bottom)), plant.dead_time)


def _damped(plant: Plant, factor: float) -> Plant:
    """Its lightest pole pair with another damping ratio, at the same distance from the origin."""
    poles = plant.poles.astype(complex)
    lightest = min((p for p in poles if p.imag > 0.0), key=lambda p: -p.real / abs(p))
    ratio = min(-lightest.real / abs(lightest) * factor, 0.999)
    moved = abs(lightest) * complex(-ratio, np.sqrt(1.0 - ratio**2))
    pair = np.isclose(poles, lightest) | np.isclose(poles, np.conj(lightest))
    bottom = np.real(np.poly([*poles[~pair], moved, np.conj(moved)]))
    scale = plant.denominator[-1 - plant.integrators] / bottom[len(bottom) - 1 - plant.integrators]
    return Plant(plant.numerator, tuple(float(scale * c) for c in bottom), plant.dead_time)


def _loose(run: Run, width: float) -> Run:
    """The command behind a play of this width: it must turn back so far before anything follows."""
    half, at = 0.5 * width, float(run.start_command)
    out = np.empty(len(run.command))
    last, value = None, at
    for i, u in enumerate(run.command.tolist()):
        if u != last:
            last, value = u, min(max(value, u - half), u + half)
        out[i] = value
    return replace(run, command=out)


def _ended(run: Run, level: float, top: bool) -> Run:
    """The command that goes no further than a level."""
    return replace(run, command=np.minimum(run.command, level) if top else np.maximum(run.command, level))


def _half(miss: _Miss, after: float, power: float) -> float:
    """Half a 95 % interval: least squares, each sample counted as far as the noise's colour lets it."""
    count = len(miss.measured)
    noise = miss.fit.noise
    worth = max(effective_samples(count, Colour(noise.rho, noise.c)), 1.0)
    return float(_NORMAL_95 * np.sqrt(after / worth / max(power, 1e-300)))


def _share(start: float, after: float, floor: float) -> float:
    """Of what is missed beyond the noise."""
    return float(np.clip((start - after) / max(start - min(floor, after), 1e-300), 0.0, 1.0))
