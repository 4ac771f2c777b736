"""Where the polish starts: zeros on a coarse grid, gains up to the first crossing of the axis on extreme plants."""

import numpy as np

from ...ident.run import FloatArray
from ..discretise import law_columns
from ..sampled.bank import IndexArray
from ..sampled.frequency import margins_of, stable_factors
from ..sampled.pulse import law_response
from ..values import Bench
from .candidates import Space
from .objective import scores_of, wish

_LIGHT = 0.4  # damping ratio under which a pair wants damping by the derivative
_TINY = 1e-9  # gain at which every loop of this kind is still left of its first crossing


def critical_gains(bench: Bench, space: Space, shapes: FloatArray, plants: IndexArray) -> FloatArray:
    """(g,) natural logarithm of the least gain on these plants at which a pole meets the stability border.

    It is the magnitude condition K = 1/|G_L| at the first crossing, on the sampled loop.
    """
    unit = np.column_stack([np.full(shapes.shape[0], np.log(_TINY) - _level(bench)), shapes])
    gains = space.gains(unit).take(np.repeat(np.arange(shapes.shape[0]), plants.size))
    law = law_columns(gains, bench.exact.interval)
    upper = margins_of(bench.spectra, np.tile(plants, shapes.shape[0]), law, exact=False).upper
    least = np.minimum(upper, 1e18).reshape(shapes.shape[0], plants.size).min(axis=1)
    return np.asarray(np.log(least) + unit[:, 0])


def stable_gains(bench: Bench, space: Space, shapes: FloatArray, plants: IndexArray) -> tuple[FloatArray, FloatArray]:
    """(g,) natural logarithms of the ends of the range of gains that all these plants are stable in.

    For plants that a small gain leaves unstable: the range begins at a crossing, too. Where there is none, the ends of
    the fitted plant's own.
    """
    unit = np.column_stack([np.full(shapes.shape[0], -_level(bench)), shapes])
    gains = space.gains(unit).take(np.repeat(np.arange(shapes.shape[0]), plants.size))
    law = law_columns(gains, bench.exact.interval)
    low, high = stable_factors(bench.spectra, np.tile(plants, shapes.shape[0]), law)
    low, high = low.reshape(-1, plants.size), high.reshape(-1, plants.size)
    least, most = low.max(axis=1), high.min(axis=1)
    alone = ~(least < most)
    least, most = np.where(alone, low[:, 0], least), np.where(alone, high[:, 0], most)
    lost = ~np.isfinite(least)
    least = np.where(lost, 1.0, np.maximum(least, 1e-12))
    most = np.where(lost, 10.0, np.minimum(most, 1e18))
    return np.log(least) + unit[:, 0], np.log(most) + unit[:, 0]


def _level(bench: Bench) -> float:
    return float(np.log(np.abs(bench.exact.static_gain).max()))


def pace(bench: Bench, plants: IndexArray) -> float:
    """Angular frequency in rad/s at which the plant with its hold and dead time has turned by 180 degrees."""
    rates = []
    for i in plants:
        phase = np.unwrap(np.angle(bench.spectra.plant[7:, i] * np.sign(bench.exact.static_gain[i])))
        turned = np.flatnonzero(phase - phase[0] < -np.pi + (0.5 * np.pi) * min(bench.exact.integrators[i], 1))
        rates.append(bench.spectra.frequency[turned[0] if turned.size else -1, i])
    mean = float(np.exp(np.mean(np.log(rates))))
    return min(mean, _quickest(bench)) if bench.situation.setting.continuous else mean


def _quickest(bench: Bench) -> float:
    """Angular frequency in rad/s beyond which a loop would be quicker than anybody asks for."""
    return 60.0 / (bench.samples * bench.running.interval)


def crossing_gains(bench: Bench, space: Space, shapes: FloatArray, count: int) -> FloatArray:
    """(g, count) natural logarithms of the gains that put the gain crossing of the fitted plant along its pace."""
    unit = np.column_stack([np.full(shapes.shape[0], -_level(bench)), shapes])
    law = law_columns(space.gains(unit), bench.exact.interval)
    quick = _quickest(bench)
    z = np.exp(1j * np.geomspace(0.02 * quick, quick, count)[:, None] * bench.exact.interval)
    size = np.abs(bench.spectra.pulse.at(z, np.zeros(1, dtype=int)) * law_response(law, z))
    return np.asarray(unit[:, :1] - np.log(size).T)


def zero_grid(space: Space, bench: Bench, plants: IndexArray) -> FloatArray:
    """(g, zeros [+ 1]) zeros and setpoint weight to try, spread round the pace of the plants."""
    ultimate = pace(bench, plants)
    slow = 1.0 / _longest_time(bench)
    swing = _swing(bench)
    reset = np.geomspace(min(0.3 * slow, 0.02 * ultimate), max(1.5 * ultimate, 2.0 * slow, 6.0 * swing), 12)
    lead = np.geomspace(0.08 / ultimate, max(2.5 / ultimate, 0.5 / slow, 10.0 / swing if swing else 0.0), 6)
    grids = {
        "PI": [reset],
        "PD": [np.geomspace(0.05 / ultimate, max(4.0 / ultimate, 1.0 / slow), 10)],
        "PID": [reset[::2], lead],
        "lead": [np.geomspace(0.1 * ultimate, 2.0 * ultimate, 7), np.array([2.5, 5.0, 10.0])],
        "lag": [np.geomspace(0.02 * ultimate, 0.5 * ultimate, 6), np.array([3.0, 10.0])],
        "lead-lag": [
            np.geomspace(0.1 * ultimate, 1.5 * ultimate, 5),
            np.array([3.0, 10.0]),
            np.geomspace(0.01 * ultimate, 0.3 * ultimate, 4),
            np.array([8.0]),
        ],
    }.get(space.structure, [])
    mesh = np.meshgrid(*[np.log(g) for g in grids], indexing="ij") if grids else []
    shapes = np.array([m.ravel() for m in mesh]).T if mesh else np.zeros((1, 0))
    if not space.weighted:
        return shapes
    light = np.column_stack([shapes, np.full(shapes.shape[0], 1.0)])
    return np.concatenate([light, np.column_stack([shapes, np.full(shapes.shape[0], 0.4)])])


def needs_gain(bench: Bench, plants: IndexArray) -> bool:
    """Whether one of the plants is unstable, or drifts twice over, so that too small a gain can leave it unstable."""
    return bool(np.any(bench.exact.unstable[plants] > 0) or np.any(bench.exact.integrators[plants] > 1))


def _swing(bench: Bench) -> float:
    """Natural frequency of a lightly damped pair of the fitted plant, rad/s; 0 where there is none."""
    poles = bench.plausible.plants[0].poles
    light = np.abs(poles[(poles.imag > 0.0) & (np.abs(poles.real) < _LIGHT * np.abs(poles))])
    return float(light.max()) if light.size else 0.0


def _longest_time(bench: Bench) -> float:
    sizes = np.abs(bench.exact.poles[:5])
    moving = sizes[sizes > 0.0]
    return 1.0 / float(moving.min()) if moving.size else float(bench.exact.delay.max() + bench.exact.interval)


def coarse_search(bench: Bench, space: Space, plants: IndexArray, keep: int) -> tuple[FloatArray, FloatArray]:
    """The best (keep, size) points of the grid, apart from each other, and their wishes."""
    shapes = zero_grid(space, bench, plants)
    count = 30 if space.zeros == 0 else 10
    if bench.situation.setting.continuous:
        levels = crossing_gains(bench, space, shapes, count)
    elif needs_gain(bench, plants):
        low, high = stable_gains(bench, space, shapes, plants)
        levels = low[:, None] + np.linspace(0.03, 0.97, count) * (high - low)[:, None]
    else:
        top = critical_gains(bench, space, shapes, plants)
        levels = top[:, None] + np.log(np.geomspace(0.004 if space.zeros == 0 else 0.03, 0.85, count))
    points = np.column_stack([levels.ravel(), np.repeat(shapes, count, axis=0)])
    scores = scores_of(bench, plants, space.gains(points))
    everyone = np.ones(plants.size, dtype=bool)
    worth = wish(scores.smallest(everyone), space.gains(points), bench.situation)
    worth = worth + 1e-3 * np.clip(scores.items, -8.0, 0.0).sum(axis=(1, 2))
    order = np.argsort(-worth, kind="stable")
    chosen: list[int] = []
    for i in order:
        if all(np.abs(points[i] - points[j]).max() > 0.45 for j in chosen):
            chosen.append(int(i))
        if len(chosen) == keep:
            break
    return points[chosen], worth[chosen]
