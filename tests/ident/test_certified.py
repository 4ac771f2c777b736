"""The fit engine against certified answers: exponential problems of the Statistical Reference Datasets of NIST/ITL.

A rise b1 (1 - exp(-b2 x)) is the unit step of a lag; a sum of decays is how a plant with as many lags goes to rest.
Where a problem knows a level to be zero that the fit leaves free, thousands of zeros pin it: 1e-5 or what a test says.
"""

import numpy as np
import pytest
from gainwright.ident.catalogue import LAG, TWO_LAGS, Named, Shape, Structure
from gainwright.ident.fit import finish
from gainwright.ident.polish import polish
from gainwright.ident.regression import Regression
from gainwright.ident.run import Run
from gainwright.ident.whiten import WHITE

MISRA1A = (
    (77.6, 114.9, 141.1, 190.8, 239.9, 289.0, 332.8, 378.4, 434.8, 477.3, 536.8, 593.1, 689.1, 760.0),
    (10.07, 14.73, 17.94, 23.93, 29.61, 35.18, 40.02, 44.82, 50.76, 55.05, 61.01, 66.40, 75.47, 81.78),
)
OXYGEN = ((1, 2, 3, 4, 5, 7), (8.3, 10.3, 19.0, 16.0, 15.6, 19.8))
OXYGEN_AGAIN = ((1, 2, 3, 4, 5, 7, 9, 11), (0.47, 0.74, 1.17, 1.42, 1.60, 1.84, 2.19, 2.17))
BOXBOD = ((1, 2, 3, 5, 7, 10), (109, 149, 149, 191, 213, 224))


@pytest.mark.parametrize(
    ("points", "rate", "certified"),
    [
        pytest.param(MISRA1A, 1e-4, (2.3894212918e2, 5.5015643181e-4, 1.2455138894e-1), id="ID-01 Misra1a"),
        pytest.param(BOXBOD, 1.0, (2.1380940889e2, 5.4723748542e-1, 1.1680088766e3), id="ID-02 BoxBOD, hard start"),
        pytest.param(OXYGEN, 0.1, (19.142573, 0.531092, 25.990267), id="ID-09 oxygen demand"),
        pytest.param(OXYGEN_AGAIN, 1.0, (2.497922, 0.202456, 0.0262437), id="ID-09b oxygen demand again"),
    ],
)
def test_exponential_rises_are_fitted_to_their_certified_values(points, rate, certified):
    """NIST StRD (Misra 1978; Box, Hunter & Hunter 1978), points retyped from memory, estimates and residual sum of
    squares as certified; the demand for oxygen after Bates and Watts, Nonlinear Regression (1988), App. A1.4 and
    A4.1: points and first estimates from memory, further digits by an independent least squares fit.
    """
    x, y = (np.array(values, float) for values in points)
    time = np.concatenate([np.arange(-20000.0, 1.0), x])
    run = Run("certified", time, np.where(time >= 0, 1.0, 0.0), np.concatenate([np.zeros(20001), y]), between="held")
    problem = Regression((run,), LAG, 0.0, True)
    start = np.array([-np.log(rate), 0.0])
    theta, solved = polish(problem, start, WHITE, hold_dead_time=True, tolerance=1e-14, rounds=200)
    found = (solved.coefficients[0], np.exp(-theta[0]), solved.cost)
    assert found[:2] == pytest.approx(certified[:2], rel=1e-5)
    assert found[2] == pytest.approx(certified[2], rel=1e-4)


OSBORNE = (
    0.844, 0.908, 0.932, 0.936, 0.925, 0.908, 0.881, 0.850, 0.818, 0.784, 0.751, 0.718, 0.685, 0.658, 0.628, 0.603,
    0.580, 0.558, 0.538, 0.522, 0.506, 0.490, 0.478, 0.467, 0.457, 0.448, 0.438, 0.431, 0.424, 0.420, 0.414, 0.411,
    0.406,
)  # fmt: skip
LANCZOS3 = (
    2.5134, 2.0443, 1.6684, 1.3664, 1.1232, 0.9269, 0.7679, 0.6389, 0.5338, 0.4479, 0.3776, 0.3197, 0.2720, 0.2325,
    0.1997, 0.1723, 0.1493, 0.1301, 0.1138, 0.1000, 0.0883, 0.0783, 0.0698, 0.0624,
)  # fmt: skip


def going_to_rest(time, response, structure):
    """A record whose command never moves but from what it was before: level and initial state are all there is to fit.

    What the gain could do, the initial state can.
    """
    run = Run("certified", time, np.zeros(len(time)), response, between="held", command_before=1.0)
    return Regression((run,), structure, 0.0, True)


def ended(problem, start):
    """Theta and cost after the walk down and lmfit's last minimisation."""
    theta, solved = polish(problem, start, WHITE, hold_dead_time=True, tolerance=1e-14, rounds=400)
    theta, _, cost = finish(problem, theta, solved.coefficients, WHITE)
    return theta, cost


def test_two_decays_and_a_level_are_fitted_to_their_certified_values():
    """MGH17 of NIST StRD (Osborne 1972), the problem b1 + b2 exp(-x b4) + b3 exp(-x b5), 33 points from memory.

    Certified: b1 0.37541005211, b4 0.012867534640, b5 0.022122699662, residual sum of squares 5.4648946975e-5. Started
    from rates of 0.005 and 0.1: 0.4 and 4.5 times the certified ones.
    """
    time = 10.0 * np.arange(33)
    problem = going_to_rest(time, np.array(OSBORNE), TWO_LAGS)
    start = np.array([0.5 * np.log(0.005 * 0.1), np.log(0.5 * (200 + 10) / np.sqrt(2000)), 0.0])
    theta, cost = ended(problem, start)
    rates = np.exp(theta[0]) * np.exp(np.array([-1, 1]) * np.arccosh(np.exp(theta[1])))
    assert rates == pytest.approx([1.2867534640e-2, 2.2122699662e-2], rel=1e-5)
    assert cost == pytest.approx(5.4648946975e-5, rel=1e-7)


def three_lags(shape):
    """1/((T1 s + 1)(T2 s + 1)(T3 s + 1))."""
    below = np.array([1.0])
    for lag in shape:
        below = np.polymul(below, [lag, 1.0])
    return (1.0,), tuple(below.tolist())


def test_three_decays_are_fitted_to_their_certified_values():
    """Lanczos3 of NIST StRD (Lanczos 1956): three exponentials, rates 0.95498101505, 2.9515951832 and 4.9863565084, 24
    points from memory, residual sum of squares 1.6117193594e-8.

    Ill-conditioned: started from rates of 0.5, 2 and 8.
    """
    names = ("time constant 1", "time constant 2", "time constant 3")
    structure = Structure(
        "three lags", "K / ((T1 s + 1)(T2 s + 1)(T3 s + 1))", tuple(Shape(name, "time") for name in names), three_lags,
        tuple(Named(name, "s") for name in names), lambda shape: shape,
    )  # fmt: skip
    time = np.concatenate([0.05 * np.arange(24), 1e3 + np.arange(5_000.0)])
    problem = going_to_rest(time, np.concatenate([LANCZOS3, np.zeros(5_000)]), structure)
    theta, cost = ended(problem, np.array([*-np.log([0.5, 2.0, 8.0]), 0.0]))
    rates = np.sort(np.exp(-theta[:-1]))
    assert rates == pytest.approx([0.95498101505, 2.9515951832, 4.9863565084], rel=1e-3)
    assert cost == pytest.approx(1.6117193594e-8, rel=1e-3)
