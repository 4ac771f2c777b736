"""Published approximations and tables beside the exact law, by their row of the list of check values.

What is an approximation is tested as one: the program's own measure gives the exact value, and the print is off by what
the row says, no more and no less.
"""

import math

import numpy as np
import pytest
from gainwright.design.discretise import columns_of, law_columns
from gainwright.design.forms import Timed, from_standard
from gainwright.design.gains import Gains
from gainwright.design.locus.loop import OpenLoop
from gainwright.design.margins import margins
from gainwright.design.sampled.pulse import law_response
from gainwright.design.step_metrics import first_reach, overshoot, rise_time
from scipy import signal

TENTHS = np.arange(1, 10) / 10.0
SPACING = 0.004


def step_of(denominator: list[float], numerator: list[float] | None = None, length: float = 45.0) -> np.ndarray:
    """Unit step response by scipy, one column, from `SPACING` on."""
    time = np.arange(0.0, length, SPACING)
    _, response = signal.step((numerator or [denominator[-1]], denominator), T=time)
    return response[1:, None]


def rises(damping: float) -> float:
    """wn Tr, 10 to 90 %, as the program measures it."""
    return float(rise_time(step_of([1.0, 2.0 * damping, 1.0]), np.ones(1), SPACING)[0])


def delays(damping: float) -> float:
    """wn Td: time to 50 %."""
    return float(first_reach(step_of([1.0, 2.0 * damping, 1.0]), 0.5, SPACING)[0])


def errors(formula, exact, at) -> np.ndarray:
    """Relative errors of an approximation at damping ratios."""
    return np.array([formula(z) / exact(z) - 1.0 for z in at])


def test_so_05_cubic_for_the_rise_time() -> None:
    """Nise Sec. 4.6 (from memory): 1.76 z^3 - 0.417 z^2 + 1.039 z + 1 within 0.5 %: -0.25 to +0.15 %, +0.72 % at 1."""
    found = errors(lambda z: 1.76 * z**3 - 0.417 * z**2 + 1.039 * z + 1.0, rises, [*TENTHS, 1.0])
    assert np.abs(found[:-1]).max() < 0.005
    assert (found[:-1].min(), found[:-1].max()) == pytest.approx((-0.0025, 0.0015), abs=5e-4)
    assert found[-1] == pytest.approx(0.0072, abs=2e-4)


def test_so_06_quadratic_that_is_no_rise_time() -> None:
    """Kuo: 1 - 0.4167 z + 2.917 z^2 as 10 to 90 % is 14 % low at 0.2 to 0.3, 7 % low at 0.5, 4 % high at 1."""
    found = errors(lambda z: 1.0 - 0.4167 * z + 2.917 * z**2, rises, [0.2, 0.3, 0.5, 1.0])
    assert found == pytest.approx([-0.14, -0.14, -0.07, 0.04], abs=7e-3)


def test_so_07_straight_line_for_the_rise_time() -> None:
    """Dorf & Bishop Sec. 5.3 (from memory): 2.16 z + 0.60 for 0.3 to 0.8: -5.6, +2.6, -5.7 %."""
    found = errors(lambda z: 2.16 * z + 0.60, rises, [0.3, 0.5, 0.8])
    assert found == pytest.approx([-0.056, 0.026, -0.057], abs=1e-3)


def test_so_08_rise_and_delay_in_one_line() -> None:
    """Public note, Kuo: (0.8 + 2.5 z) is 25 % high at 0.5; the delay 1 + 0.7 z within +4.6/-1.7 %."""
    assert errors(lambda z: 0.8 + 2.5 * z, rises, [0.5])[0] == pytest.approx(0.25, abs=5e-3)
    found = errors(lambda z: 1.0 + 0.7 * z, delays, [*TENTHS, 1.0])
    assert (found.min(), found.max()) == pytest.approx((-0.017, 0.046), abs=3e-3)


def test_so_09_delay_by_a_quadratic() -> None:
    """Kuo (from memory): 1.1 + 0.125 z + 0.469 z^2 within 2.7 % for 0.1 to 1."""
    found = errors(lambda z: 1.1 + 0.125 * z + 0.469 * z**2, delays, [*TENTHS, 1.0])
    assert np.abs(found).max() == pytest.approx(0.027, abs=1e-3)


def test_so_10_rule_of_thumb_for_the_rise_time() -> None:
    """Franklin, Powell & Emami-Naeini Sec. 3.4 (from memory): 1.8: +10 % at 0.5, -15 % at 0.7, +36 % at 0.3."""
    found = errors(lambda z: 1.8, rises, [0.5, 0.7, 0.3])
    assert found == pytest.approx([0.10, -0.15, 0.36], abs=5e-3)


PRINTED = {2: (1.4,), 3: (1.75, 2.15), 4: (2.1, 3.4, 2.7), 5: (2.8, 5.0, 5.5, 3.4), 6: (3.25, 6.60, 8.60, 7.45, 3.95)}
BEST = {
    2: (1.505,), 3: (1.783, 2.172), 4: (1.952, 3.346, 2.647), 5: (2.067, 4.498, 4.673, 3.257),
    6: (2.153, 5.629, 6.935, 6.793, 3.740),
}  # fmt: skip


def itae(error: np.ndarray) -> float:
    """Integral of t |e|, by the trapezoid."""
    time = SPACING * np.arange(1, error.size + 1)
    return float(np.trapezoid(time * np.abs(error), time))


@pytest.mark.parametrize(
    ("order", "printed_peak", "printed_cost"),
    [(2, 4.60, 1.9896), (3, 1.98, 3.1432), (4, 1.93, 4.6263), (5, 2.10, 7.1544), (6, 4.99, 9.5650)],
)
def test_so_12_standard_forms_as_a_table(order: int, printed_peak: float, printed_cost: float) -> None:
    """Graham & Lathrop, Trans. AIEE 72 (1953) 273-288; overshoots and costs were computed independently."""
    step = step_of([1.0, *PRINTED[order], 1.0])
    assert 100.0 * overshoot(step, np.ones(1))[0] == pytest.approx(printed_peak, abs=6e-3)
    assert itae(1.0 - step[:, 0]) == pytest.approx(printed_cost, abs=6e-4)


@pytest.mark.parametrize(("order", "cost"), [(2, 1.9519), (3, 3.1383), (4, 4.5913), (5, 6.3216), (6, 8.3339)])
def test_so_13_the_table_is_not_the_optimum(order: int, cost: float) -> None:
    """Later re-computation (Cao 1989, from memory): other coefficients cost less, and no change of them less still."""
    best = itae(1.0 - step_of([1.0, *BEST[order], 1.0])[:, 0])
    assert best == pytest.approx(cost, abs=2e-3)
    assert best < itae(1.0 - step_of([1.0, *PRINTED[order], 1.0])[:, 0])
    for i in range(order - 1):
        for factor in (0.98, 1.02):
            moved = [c * (factor if j == i else 1.0) for j, c in enumerate(BEST[order])]
            assert itae(1.0 - step_of([1.0, *moved, 1.0])[:, 0]) > best


@pytest.mark.parametrize(
    ("printed", "cost", "better", "least"),
    [
        ((3.2,), 3.20, (1.685,), 1.80), ((1.75, 3.25), 4.69, (1.391, 2.765), 3.08),
        ((2.41, 4.93, 5.14), 22.9, (2.006, 3.373, 2.628), 8.14),
    ],
)  # fmt: skip
def test_so_14_ramp_forms_are_no_optimum(printed: tuple, cost: float, better: tuple, least: float) -> None:
    """Dorf & Bishop Table 5.7 (from memory): (a s + 1)/(s^n + ... + a s + 1) follows a ramp at these costs; none of
    the prints is near its own best."""

    def ramp_cost(coefficients: tuple) -> float:
        below = [1.0, *coefficients, 1.0]  # the error of a ramp is the step response of (1 - closed loop)/s
        return itae(step_of(below, [*below[:-2], 0.0])[:, 0])

    assert ramp_cost(printed) == pytest.approx(cost, rel=5e-3)
    assert ramp_cost(better) == pytest.approx(least, rel=5e-3)
    assert ramp_cost(better) < ramp_cost(printed)


LAG = np.array([1.0, 1.0])
CUBE, DRIFT = np.polymul(LAG, np.polymul(LAG, LAG)), np.polymul([1.0, 0.0], np.polymul(LAG, LAG))
FOUR = np.polymul(np.polymul([20.0, 1.0], LAG), np.polymul([0.1, 1.0], [0.1, 1.0]))
QUICK = np.polymul(np.polymul(LAG, [0.2, 1.0]), np.polymul([0.04, 1.0], [0.008, 1.0]))


@pytest.mark.parametrize(
    ("name", "above", "below", "gain", "reset", "lead", "recalled", "computed", "close"),
    [
        ("E3 PID", (30.0, 2.0), FOUR, 1.0 / 0.15, 0.4, 0.15, 1.47, 1.498, 6e-4),
        ("E5 PID", (1.0,), QUICK, 1.0 / 0.056, 0.224, 0.22, 1.58, 1.829, 3e-3),
        ("E7 PI", (-2.0, 1.0), CUBE, 0.214, 1.5, 0.0, 1.85, 1.659, 6e-4),
        ("E8 PID", (1.0,), DRIFT, 1.0, 4.0, 1.5, 1.79, 1.603, 6e-4),
    ],
)
def test_tu_14_recalled_sensitivities_that_do_not_reproduce(
    name: str, above: tuple, below: np.ndarray, gain: float, reset: float, lead: float, recalled: float,
    computed: float, close: float,
) -> None:  # fmt: skip
    """Skogestad 2003, peak sensitivities as recalled: the series law without filter gives others, so they aren't
    asserted anywhere; the settings are from memory, too. E11's plant is not known here."""
    top = np.polymul(np.polymul(above, [lead, 1.0] if lead else [1.0]), [1.0, 1.0 / reset])
    found = margins(OpenLoop(tuple(top), tuple(np.polymul(below, [1.0, 0.0]))), gain).peak_sensitivity
    assert found == pytest.approx(computed, abs=close), name
    assert abs(found - recalled) > 0.02


def test_sd_10_the_bilinear_rule_warps_the_frequency() -> None:
    """Exact: w = 10, T = 0.1: w lands at (2/T) atan(w T/2) = 9.273 rad/s; prewarped w/tan(w T/2) = 18.305."""
    interval, w = 0.1, 10.0
    assert 2.0 / interval * math.atan(0.5 * w * interval) == pytest.approx(9.27295, abs=6e-6)
    assert w / math.tan(0.5 * w * interval) == pytest.approx(18.30488, abs=6e-6)
    law = law_columns(columns_of([Gains("lag", 1.0, zero=30.0, pole=w)]), interval)
    warped = 2.0 / interval * math.atan(0.5 * w * interval)
    seen = complex(law_response(law, np.array([[np.exp(1j * warped * interval)]]))[0, 0])
    assert seen == pytest.approx((1j * w + 30.0) / (1j * w + w), rel=1e-12)


@pytest.mark.parametrize(("share", "lead"), [(8.0, 51.1), (10.0, 54.9), (20.0, 64.8)])
def test_sd_14_what_the_derivative_filter_leaves(share: float, lead: float) -> None:
    """Td s/(1 + Td s/N), N 8 to 20 (common practice, no source): ideal form (1 + N) Kc far up; as a lead
    (1 + Td s)/(1 + Td s/N) by 51.1, 54.9, 64.8 deg at most."""
    gains = from_standard(Timed(2.0, None, 1.0, 1.0 / share), "PD")
    far = 1e9j
    value = gains.proportional + gains.derivative * far / (gains.filter_time * far + 1.0)
    assert abs(value) == pytest.approx(2.0 * (1.0 + share), rel=1e-6)
    w = np.geomspace(0.1, 100.0, 20001)
    found = np.degrees(np.angle(OpenLoop((1.0, 1.0), (1.0 / share, 1.0)).at(1j * w))).max()
    assert found == pytest.approx(lead, abs=0.05)
