"""First guesses from frequency tables: a library of unit-gain responses, held against them at many dead times."""

import itertools

import numpy as np

from .catalogue import Shape
from .run import FloatArray
from .start import different
from .table_regression import TableRegression

# Radians at the highest frequency between one tried dead time and the next.
_TURN = 0.4
_MOST_DELAYS = 240


def table_guesses(problem: TableRegression, count: int = 4) -> list[FloatArray]:
    """The best `count` different thetas (log shapes, dead time) of the library, best first.

    For each shape gain and zero are in closed form, so one projection scores every dead time.
    """
    delays = _delays(problem)
    target = problem.measured[problem.timed_count :]
    scored = []
    for values in itertools.product(*(_axis(shape, problem) for shape in problem.structure.shapes)):
        costs = _costs(problem, values, delays, target)
        best = int(np.argmin(costs))
        scored.append((float(costs[best]), np.array([*np.log(values), delays[best]])))
    scored.sort(key=lambda pair: pair[0])
    return different([theta for _, theta in scored], problem, count)


def _delays(problem: TableRegression) -> FloatArray:
    """Dead times to try, s: as far as the phase could have turned, and a turn more."""
    with_phase = [w for w in problem.weighed if w.table.phase is not None]
    if not with_phase or problem.latest <= 0.0:
        return np.zeros(1)
    highest = max(w.table.span[1] for w in with_phase)
    turned = max(float(np.ptp(np.unwrap(np.angle(w.table.response)))) for w in with_phase)
    longest = min((turned + 2 * np.pi) / highest, problem.latest)
    return np.linspace(0.0, longest, int(np.clip(longest * highest / _TURN, 2, _MOST_DELAYS)))


def _axis(shape: Shape, problem: TableRegression) -> FloatArray:
    low = min(w.table.span[0] for w in problem.weighed)
    high = max(w.table.span[1] for w in problem.weighed)
    if shape.kind == "time":
        return np.geomspace(0.3 / high, 4.0 / low, shape.steps)
    if shape.kind == "frequency":
        return np.concatenate([np.geomspace(0.4 * low, 2.0 * high, shape.steps), _peaks(problem)])
    return np.geomspace(shape.low, shape.high, shape.steps)


def _peaks(problem: TableRegression) -> FloatArray:
    """Frequencies, rad/s, of up to three of the highest local maxima of magnitude times frequency.

    Times frequency, so that a resonance on the slope of an integrator or behind a lag is a maximum too.
    """
    found: list[tuple[float, float]] = []
    for w in problem.weighed:
        lifted = w.table.magnitude * w.table.frequency
        inside = np.flatnonzero((lifted[1:-1] > lifted[:-2]) & (lifted[1:-1] > lifted[2:])) + 1
        found += [(float(lifted[i]), float(w.table.frequency[i])) for i in inside]
    return np.array([frequency for _, frequency in sorted(found, reverse=True)[:3]])


def _costs(
    problem: TableRegression, values: tuple[float, ...], delays: FloatArray, target: FloatArray
) -> FloatArray:
    """(d,) least sums of squares over gain and zero, one a dead time."""
    numerator, denominator = problem.structure.polynomials(values)
    lead, slope = [], []
    for w in problem.weighed:
        s = 1j * w.table.frequency
        unit = (np.polyval(numerator, s) / np.polyval(denominator, s))[:, None] * np.exp(-s[:, None] * delays)
        lead.append(w.rows(unit))
        slope.append(w.rows(s[:, None] * unit))
    of_gain = np.concatenate(lead)
    power, along = np.einsum("ij,ij->j", of_gain, of_gain), target @ of_gain
    total = np.full(len(delays), float(target @ target))
    if problem.structure.zero:
        of_zero = np.concatenate(slope)
        size = np.einsum("ij,ij->j", of_zero, of_zero)
        share, rest = np.einsum("ij,ij->j", of_gain, of_zero) / size, target @ of_zero
        total = total - rest**2 / size
        along, power = along - share * rest, np.maximum(power - share**2 * size, 1e-12 * power)
    return np.asarray(total - along**2 / np.maximum(power, 1e-300))
