"""What a record leaves open of a friction that it hardly shows: as much above as below, not decades above."""

from dataclasses import replace

import numpy as np
from gainwright.ident.catalogue import DRIVE_WITH_FRICTION
from gainwright.ident.choose import colour_of, fit_candidates
from gainwright.ident.ensemble import draw_structure, freedom_of
from gainwright.ident.run import Run
from scipy.stats import t as student
from test_friction import march


def drifting_drive(seed):
    """Pulses of 3 V either way on a drive of 0.4 s that 0.1 V of friction holds; its place wanders by itself."""
    time = 0.05 * np.arange(400)
    levels = ((2.0, 3.0), (4.0, 0.0), (6.0, -3.0), (8.0, 0.0), (11.0, -2.0), (13.0, 2.0), (15.0, 0.0))
    command = np.zeros(400)
    for start, level in levels:
        command[time >= start] = level
    walk = np.cumsum(np.random.default_rng(seed).standard_normal(400)) * 0.02
    return Run("drive", time, command, march(time, command, 0.0, 0.4, (0.1, 0.1), 0.1, 50) + walk)


def test_frictions_are_drawn_by_a_normal_law_of_themselves_not_of_their_logarithms():
    """The upper end is c (1 + s t), with s the standard error as a share and t Student's 97.5 % point.

    Draws that the record itself rules out are drawn back towards the fit, so that the end may lie nearer; the law of
    the logarithm would put it at c exp(s t). The truth is inside.
    """
    (fitted, *_), _ = fit_candidates([drifting_drive(3)], 0.0, False, [DRIVE_WITH_FRICTION])
    plain = replace(fitted, whitened=False)
    colour = colour_of(plain)
    coefficients = plain.problem.solve(plain.theta, colour).coefficients
    covariance = plain.problem.least_squares_covariance(plain.theta, coefficients, colour)
    freedom = freedom_of(plain.problem, colour, len(plain.theta) + len(coefficients))
    drawn = np.exp(draw_structure(plain, colour, 1024, 0).draws[:, 1:3])
    for i in (0, 1):
        best, error = float(np.exp(plain.theta[1 + i])), float(np.sqrt(covariance[1 + i, 1 + i]))
        point = float(student.ppf(0.975, freedom))
        assert error * point > 1.0  # the record hardly shows it
        upper = float(np.quantile(drawn[:, i], 0.975))
        assert upper < 1.05 * best * (1.0 + error * point)
        assert upper < 0.8 * best * np.exp(error * point)
        assert np.quantile(drawn[:, i], 0.025) < 0.1 < upper
