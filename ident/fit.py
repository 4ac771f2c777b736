"""The only door to lmfit: the last minimisation, on the full model with every parameter free."""

import lmfit
import numpy as np

from .polish import bounds_of
from .regression import Regression
from .run import FloatArray
from .whiten import Colour


def finish(
    problem: Regression, theta: FloatArray, coefficients: FloatArray, colour: Colour
) -> tuple[FloatArray, FloatArray, float]:
    """Minimise the whitened residual of the full model from a point near its minimum.

    Parameters
    ----------
    problem : Regression
    theta : (s + 1,) array
        Log shapes and dead time (s).
    coefficients : (q,) array
        Gain, levels, drift rate, initial states.
    colour : Colour

    Returns
    -------
    theta, coefficients, cost
        The better of the start and lmfit's end; cost is the whitened sum of squares.
    """
    target = problem.target_under(colour)
    sizes = np.where(coefficients == 0, 1.0, np.abs(coefficients))
    dt = problem.interval
    low, high = bounds_of(problem)
    parameters = lmfit.Parameters()
    for i, value in enumerate(theta[:-1]):
        parameters.add(f"shape_{i}", value=float(value))
    parameters.add("dead_time", value=max(float(theta[-1]) / dt, 1e-6), min=0.0, vary=not problem.jumps)
    for i, value in enumerate(coefficients / sizes):
        parameters.add(f"linear_{i}", value=float(value))

    def vectors(values: FloatArray) -> tuple[FloatArray, FloatArray]:
        point = np.array([*np.clip(values[: len(theta) - 1], low[:-1], high[:-1]), values[len(theta) - 1] * dt])
        return point, values[len(theta) :] * sizes

    def residual(trial: lmfit.Parameters) -> FloatArray:
        point, linear = vectors(np.array([p.value for p in trial.values()]))
        out = target - problem.at(point).columns_under(colour) @ linear
        return np.nan_to_num(out, nan=1e150, posinf=1e150, neginf=-1e150)

    def slopes(trial: lmfit.Parameters) -> FloatArray:
        """Of the residual in the values that vary; lmfit adds what its bounds do to them."""
        values = np.array([p.value for p in trial.values()])
        point, linear = vectors(values)
        here = problem.at(point)
        inside = (values[: len(theta) - 1] > low[:-1]) & (values[: len(theta) - 1] < high[:-1])
        of_theta = here.slopes_under(linear, colour) * np.concatenate([inside, [dt]])
        whole = -np.column_stack([of_theta, here.columns_under(colour) * sizes])
        return np.asarray(np.nan_to_num(whole[:, [p.vary for p in trial.values()]], nan=0.0, posinf=0.0, neginf=0.0))

    start = residual(parameters)
    before = float(start @ start)
    result = lmfit.minimize(
        residual, parameters, method="leastsq", Dfun=slopes, max_nfev=40 * len(parameters), calc_covar=False
    )
    after = float(np.sum(np.asarray(result.residual) ** 2))
    if not after < before:
        return theta, coefficients, before
    point, linear = vectors(np.array([p.value for p in result.params.values()]))
    return point, linear, after
