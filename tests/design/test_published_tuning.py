"""Published tuning rules and the robustness that their authors print, by their row of the list of check values.

The rules are the cited reference functions of tests/campaign/published_rules.py; margins, ultimate gains and peak
sensitivities are the package's. PID cases of Skogestad are in his series form Kc (1 + 1/(Ti s)) (Td s + 1), unfiltered.
"""

import importlib.util
import math
import sys
from pathlib import Path

import numpy as np
import pytest
from gainwright.design.locus.crossings import axis_crossings
from gainwright.design.locus.loop import OpenLoop
from gainwright.design.margins import Margins, margins

_SPEC = importlib.util.spec_from_file_location(
    "published_rules", Path(__file__).resolve().parents[1] / "campaign" / "published_rules.py"
)
assert _SPEC is not None
assert _SPEC.loader is not None
rules = importlib.util.module_from_spec(_SPEC)
sys.modules["published_rules"] = rules
_SPEC.loader.exec_module(rules)

Polynomial = tuple[float, ...]


def poly(*factors: Polynomial) -> Polynomial:
    product = np.ones(1)
    for factor in factors:
        product = np.polymul(product, factor)
    return tuple(product)


def with_pi(above: Polynomial, below: Polynomial, dead_time: float, gain: float, integral_time: float) -> Margins:
    loop = OpenLoop(poly(above, (1.0, 1.0 / integral_time)), poly(below, (1.0, 0.0)), dead_time)
    return margins(loop, gain)


def with_series_pid(
    above: Polynomial, below: Polynomial, dead_time: float, gain: float, ti: float, td: float
) -> Margins:
    return with_pi(poly(above, (td, 1.0)), below, dead_time, gain, ti)


def with_ideal_pid(
    above: Polynomial, below: Polynomial, dead_time: float, gain: float, ti: float, td: float
) -> Margins:
    loop = OpenLoop(poly(above, (td, 1.0, 1.0 / ti)), poly(below, (1.0, 0.0)), dead_time)
    return margins(loop, gain)


def ultimate(above: Polynomial, below: Polynomial, dead_time: float = 0.0) -> tuple[float, float]:
    first = axis_crossings(OpenLoop(above, below, dead_time))[0]
    return first.loop_gain, 2.0 * math.pi / first.frequency


SKOGESTAD = "Skogestad, J. Process Control 13 (2003) 291-309"


def test_tu_01_simc_on_a_lag_with_dead_time() -> None:
    """Skogestad 2003, Table 1 (from memory): GM 3.14, PM 61.4 deg, Ms 1.59, Mt 1.00, wc L 0.50, delay error 2.14."""
    tuned = rules.simc_pi(1.0, 4.0, 1.0)
    found = with_pi((1.0,), (4.0, 1.0), 1.0, tuned.gain, tuned.integral_time)
    assert found.gain_margin == pytest.approx(math.pi, rel=1e-9)
    assert found.phase_margin_deg == pytest.approx(61.352, abs=6e-4)
    assert found.peak_sensitivity == pytest.approx(1.5905, abs=6e-5)
    assert found.peak_complementary == pytest.approx(1.0, abs=1e-9)
    assert found.phase_crossover == pytest.approx(0.5, rel=1e-9)
    assert found.delay_margin == pytest.approx(2.1416, abs=6e-5)


def test_tu_02_simc_on_an_integrator_with_dead_time() -> None:
    """Skogestad 2003, Table 1 (from memory): GM 2.96, PM 46.9 deg, Ms 1.70, Mt 1.30, wc L 0.51, delay error 1.59."""
    tuned = rules.simc_pi_integrating(1.0, 1.0)
    assert (tuned.gain, tuned.integral_time) == (0.5, 8.0)
    found = with_pi((1.0,), (1.0, 0.0), 1.0, tuned.gain, tuned.integral_time)
    assert found.gain_margin == pytest.approx(2.9634, abs=6e-5)
    assert found.phase_margin_deg == pytest.approx(46.864, abs=6e-4)
    assert found.peak_sensitivity == pytest.approx(1.7035, abs=6e-5)
    assert found.peak_complementary == pytest.approx(1.2994, abs=6e-5)
    assert found.phase_crossover == pytest.approx(0.51454, abs=6e-6)
    assert found.delay_margin == pytest.approx(1.5896, abs=6e-5)


def test_tu_03_half_rule_and_the_robustness_it_gives() -> None:
    """Skogestad 2003, Ex. E2: T 2.5, L 1.47; 2, 1.2, L 0.77; PI 0.85/2.5, PID (series) 1.30/2/1.2; Ms 1.66 and 1.73."""
    lags = (2.0, 1.0, 0.4, 0.2 - 0.08, 0.05, 0.05, 0.05)  # (0.08 s + 1)/(0.2 s + 1) taken as a lag of 0.12 s
    assert rules.half_rule(lags, (0.3,), 0.0, 1) == pytest.approx((2.5, 1.47), rel=1e-12)
    assert rules.half_rule(lags, (0.3,), 0.0, 2) == pytest.approx((2.0, 1.2, 0.77), rel=1e-12)
    above = poly((-0.3, 1.0), (0.08, 1.0))
    below = poly((2.0, 1.0), (1.0, 1.0), (0.4, 1.0), (0.2, 1.0), *[(0.05, 1.0)] * 3)
    pi = rules.simc_pi(1.0, 2.5, 1.47)
    assert (pi.gain, pi.integral_time) == pytest.approx((0.85, 2.5), abs=5e-3)
    assert with_pi(above, below, 0.0, pi.gain, pi.integral_time).peak_sensitivity == pytest.approx(1.66, abs=5e-3)
    pid = rules.simc_pid_series(1.0, 2.0, 1.2, 0.77)
    assert pid.gain == pytest.approx(1.30, abs=5e-3)
    found = with_series_pid(above, below, 0.0, pid.gain, pid.integral_time, pid.derivative_time)
    assert found.peak_sensitivity == pytest.approx(1.73, abs=6e-3)  # computed 1.725: the print rounds up


LAG = (1.0, 1.0)
CASES_PI = [
    ("TU-04 E1", (1.0,), poly(LAG, (0.2, 1.0)), 0.0, 5.5, 0.8, 1.56),
    ("TU-05 E3", poly((2.0,), (15.0, 1.0)), poly((20.0, 1.0), LAG, (0.1, 1.0), (0.1, 1.0)), 0.0, 2.33, 1.05, 1.55),
    ("TU-06 E4", (1.0,), poly(LAG, LAG, LAG, LAG), 0.0, 0.3, 1.5, 1.46),
    ("TU-07 E5", (1.0,), poly(LAG, (0.2, 1.0), (0.04, 1.0), (0.008, 1.0)), 0.0, 3.72, 1.1, 1.59),
    ("TU-08 E6", poly((0.17, 1.0), (0.17, 1.0)), poly((1.0, 0.0), LAG, LAG, (0.028, 1.0)), 0.0, 0.296, 13.5, 1.48),
    ("TU-09 E8", (1.0,), poly((1.0, 0.0), LAG, LAG), 0.0, 0.33, 12.0, 1.76),
    ("TU-10 E9", (1.0,), poly(LAG, LAG), 1.0, 0.5, 1.5, 1.61),
    ("TU-13 E14", (-1.0, 1.0), (1.0, 0.0), 0.0, 0.5, 8.0, 2.00),
    ("TU-13 E15", (-1.0, 1.0), LAG, 0.0, 0.5, 1.0, 2.00),
]
EXACT_PI = [1.5602, 1.5494, 1.4630, 1.5932, 1.4754, 1.7632, 1.6140, 2.0, 2.0]


@pytest.mark.parametrize(
    ("case", "exact"), list(zip(CASES_PI, EXACT_PI, strict=True)), ids=[case[0] for case in CASES_PI]
)
def test_peak_sensitivity_of_published_pi_settings(
    case: tuple[str, Polynomial, Polynomial, float, float, float, float], exact: float
) -> None:
    """Skogestad 2003, Table 4 (from memory): printed Ms to half a unit, and four decimals computed independently."""
    _, above, below, dead_time, gain, integral_time, printed = case
    found = with_pi(above, below, dead_time, gain, integral_time).peak_sensitivity
    assert found == pytest.approx(printed, abs=5.1e-3)
    assert found == pytest.approx(exact, abs=6e-5)


@pytest.mark.parametrize(
    ("above", "below", "dead_time", "settings", "printed", "exact"),
    [
        pytest.param((1.0,), poly(LAG, LAG, LAG, LAG), 0.0, (0.5, 1.5, 1.0), 1.43, 1.4318, id="TU-06 E4"),
        pytest.param(CASES_PI[4][1], CASES_PI[4][2], 0.0, (1.40, 2.86, 1.33), 1.23, 1.2284, id="TU-08 E6"),
        pytest.param((1.0,), poly(LAG, LAG), 1.0, (0.5, 1.0, 1.0), 1.59, 1.5905, id="TU-10 E9"),
    ],
)
def test_peak_sensitivity_of_published_series_pid_settings(
    above: Polynomial,
    below: Polynomial,
    dead_time: float,
    settings: tuple[float, float, float],
    printed: float,
    exact: float,
) -> None:
    """As for PI."""
    found = with_series_pid(above, below, dead_time, *settings).peak_sensitivity
    assert found == pytest.approx(printed, abs=5.1e-3)
    assert found == pytest.approx(exact, abs=6e-5)


def test_tu_15_ziegler_nichols_step_on_an_integrator() -> None:
    """Ziegler & Nichols 1942 (errata page of Astrom & Murray): PI originals 0.9 T/(K L), ki = 0.27 T/(K L^2): 3.33 L.

    On exp(-L s)/s (slope 1, a = L) P control 1/a has the exact gain margin pi/2 whatever L."""
    original = rules.ziegler_nichols_step("PI", 0.2, 0.2, original_pi=True)
    assert original.gain / original.integral_time == pytest.approx(0.27 / 0.2**2, rel=1e-12)
    proportional = rules.ziegler_nichols_step("P", 0.2, 0.2)
    found = margins(OpenLoop((1.0,), (1.0, 0.0), 0.2), proportional.gain)
    assert found.gain_margin == pytest.approx(math.pi / 2, rel=1e-12)


def test_tu_16_ziegler_nichols_ultimate() -> None:
    """Ziegler & Nichols 1942 (errata page): kp = 0.45 kc, ki = 0.54 kc/Tc; P 0.5 Ku has gain margin 2.

    Ku and Pu of exp(-0.5 s)/(s + 1) by the exact law of DT-02: 3.806883 and 0.5 times 3.42110."""
    gain, period = ultimate((1.0,), (1.0, 1.0), 0.5)
    tuned = rules.ziegler_nichols_ultimate("PI", gain, period)
    assert tuned.gain / tuned.integral_time == pytest.approx(0.54 * gain / period, rel=1e-12)
    assert (tuned.gain, tuned.integral_time) == pytest.approx((0.45 * 3.806883, 0.5 * 3.42110 / 1.2), abs=5e-6)
    half = rules.ziegler_nichols_ultimate("P", gain, period)
    assert margins(OpenLoop((1.0,), (1.0, 1.0), 0.5), half.gain).gain_margin == pytest.approx(2.0, rel=1e-12)


def test_tu_17_ultimate_gain_and_pid() -> None:
    """Ogata 5e, Ex. 8-1: Kcr = 30, Pcr = 2.8099; PID 18, 1.405, 0.35124; Ms of it and of retuned 18/3.077/0.7692 and
    39.42/3.077/0.7692: 2.62, 1.35, 1.61 (computed independently)."""
    below = (1.0, 6.0, 5.0, 0.0)
    gain, period = ultimate((1.0,), below)
    assert (gain, period) == pytest.approx((30.0, 2.8099), abs=5e-5)
    tuned = rules.ziegler_nichols_ultimate("PID", gain, period)
    settings = (tuned.gain, tuned.integral_time, tuned.derivative_time)
    assert settings == pytest.approx((18.0, 1.405, 0.35124), abs=5e-5)
    for case, peak in ((settings, 2.62), ((18.0, 3.077, 0.7692), 1.35), ((39.42, 3.077, 0.7692), 1.61)):
        assert with_ideal_pid((1.0,), below, 0.0, *case).peak_sensitivity == pytest.approx(peak, abs=5e-3)


def test_tu_18_three_equal_lags() -> None:
    """Astrom & Hagglund, PID Controllers 2e, Sec. 4.2 (memory): Ku = 8, Pu = 3.63; PID 4.8, 1.81, 0.45; Ms 2.132."""
    below = (1.0, 3.0, 3.0, 1.0)
    gain, period = ultimate((1.0,), below)
    assert gain == pytest.approx(8.0, rel=1e-10)
    assert period == pytest.approx(2 * math.pi / math.sqrt(3), rel=1e-10)
    tuned = rules.ziegler_nichols_ultimate("PID", gain, period)
    settings = (tuned.gain, tuned.integral_time, tuned.derivative_time)
    assert settings == pytest.approx((4.8, 1.81, 0.45), abs=5e-3)
    assert with_ideal_pid((1.0,), below, 0.0, *settings).peak_sensitivity == pytest.approx(2.132, abs=6e-4)


def test_tu_19_cohen_coon() -> None:
    """Cohen & Coon 1953 at r = 0.5: P 2.333; PI 1.8833/0.82895; PD 2.6667/0.10638; PID 2.9167/1.02941/0.16667; PI:
    GM 1.569, PM 29.0 deg, Ms 3.23; PID: Ms 3.59 (computed independently from the formulas)."""
    p, pi, pd, pid = (rules.cohen_coon(structure, 1.0, 1.0, 0.5) for structure in ("P", "PI", "PD", "PID"))
    assert p.gain == pytest.approx(2.333, abs=5e-4)
    assert (pi.gain, pi.integral_time) == pytest.approx((1.8833, 0.82895), abs=5e-5)
    assert (pd.gain, pd.derivative_time) == pytest.approx((2.6667, 0.10638), abs=5e-5)
    assert (pid.gain, pid.integral_time, pid.derivative_time) == pytest.approx((2.9167, 1.02941, 0.16667), abs=5e-5)
    found = with_pi((1.0,), LAG, 0.5, pi.gain, pi.integral_time)
    assert found.gain_margin == pytest.approx(1.569, abs=6e-4)
    assert found.phase_margin_deg == pytest.approx(29.0, abs=0.05)
    assert found.peak_sensitivity == pytest.approx(3.23, abs=6e-3)
    found = with_ideal_pid((1.0,), LAG, 0.5, pid.gain, pid.integral_time, pid.derivative_time)
    assert found.peak_sensitivity == pytest.approx(3.59, abs=6e-3)


def test_tu_20_ziegler_nichols_on_an_integrator_is_not_robust() -> None:
    """Skogestad 2003, integrating processes (from memory), 1 %: GM 1.86, PM 24.8 deg, Ms 2.83; with 0.71/3.33
    1.8593, 24.80, 2.847, with the exact rule 1.868, 24.92, 2.831."""
    found = with_pi((1.0,), (1.0, 0.0), 1.0, 0.71, 3.33)
    assert (found.gain_margin, found.phase_margin_deg) == pytest.approx((1.8593, 24.80), abs=6e-3)
    assert found.peak_sensitivity == pytest.approx(2.847, abs=6e-4)
    assert found.peak_sensitivity == pytest.approx(2.83, rel=0.01)
    tuned = rules.ziegler_nichols_ultimate("PI", *ultimate((1.0,), (1.0, 0.0), 1.0))
    exact = with_pi((1.0,), (1.0, 0.0), 1.0, tuned.gain, tuned.integral_time)
    assert (exact.gain_margin, exact.peak_sensitivity) == pytest.approx((1.868, 2.831), abs=6e-4)
    assert exact.phase_margin_deg == pytest.approx(24.92, abs=6e-3)


def test_tu_21_tyreus_luyben() -> None:
    """Tyreus & Luyben, IECR 31 (1992) 2625: Ku/3.2, 2.2 Pu: 0.491/(k L), 8.8 L; GM 3.037, PM 48.44, Ms 1.672."""
    tuned = rules.tyreus_luyben(*ultimate((1.0,), (1.0, 0.0), 1.0))
    assert (tuned.gain, tuned.integral_time) == pytest.approx((0.491, 8.8), abs=5e-4)
    found = with_pi((1.0,), (1.0, 0.0), 1.0, tuned.gain, tuned.integral_time)
    assert (found.gain_margin, found.peak_sensitivity) == pytest.approx((3.037, 1.672), abs=6e-4)
    assert found.phase_margin_deg == pytest.approx(48.44, abs=6e-3)


def test_tu_22_amigo_on_four_equal_lags() -> None:
    """Astrom & Hagglund, Advanced PID Control, Sec. 7.3 (numbers from memory), T = 2.9, L = 1.42: PI 0.414/2.66, PID
    1.12/2.40/0.619; Ms 1.318 and 1.617 (computed independently)."""
    below = poly(LAG, LAG, LAG, LAG)
    pi, pid = rules.amigo("PI", 1.0, 2.9, 1.42), rules.amigo("PID", 1.0, 2.9, 1.42)
    assert (pi.gain, pi.integral_time) == pytest.approx((0.4142, 2.655), abs=6e-4)
    assert (pid.gain, pid.integral_time, pid.derivative_time) == pytest.approx((1.1190, 2.3982, 0.6191), abs=6e-5)
    found = with_pi((1.0,), below, 0.0, pi.gain, pi.integral_time)
    assert found.peak_sensitivity == pytest.approx(1.318, abs=6e-4)
    found = with_ideal_pid((1.0,), below, 0.0, pid.gain, pid.integral_time, pid.derivative_time)
    assert found.peak_sensitivity == pytest.approx(1.617, abs=6e-4)


def test_tu_23_amigo_where_the_lag_dominates() -> None:
    """Advanced PID Control, Ex. 7.x (from memory), T = 1.04, L = 0.075: PI 4.13/0.539; PID 6.44/0.361/0.0367; Ms 1.371,
    1.297 (computed independently)."""
    below = poly(LAG, (0.1, 1.0), (0.01, 1.0), (0.001, 1.0))
    pi, pid = rules.amigo("PI", 1.0, 1.04, 0.075), rules.amigo("PID", 1.0, 1.04, 0.075)
    assert (pi.gain, pi.integral_time) == pytest.approx((4.1333, 0.5389), abs=6e-5)
    assert (pid.gain, pid.integral_time, pid.derivative_time) == pytest.approx((6.44, 0.3612, 0.0367), abs=6e-5)
    found = with_pi((1.0,), below, 0.0, pi.gain, pi.integral_time)
    assert found.peak_sensitivity == pytest.approx(1.371, abs=6e-4)
    found = with_ideal_pid((1.0,), below, 0.0, pid.gain, pid.integral_time, pid.derivative_time)
    assert found.peak_sensitivity == pytest.approx(1.297, abs=6e-4)


def test_tu_24_amigo_where_the_dead_time_dominates() -> None:
    """Advanced PID Control, Ex. 7.x (memory), T = 0.093, L = 1.01: PI 0.175/0.360, PID 0.242/0.474/0.119; 2 % on Ti
    (T and L are rounded there). Its authors design for Ms = Mt = 1.4: the loop stays below 1.6."""
    pi, pid = rules.amigo("PI", 1.0, 0.093, 1.01), rules.amigo("PID", 1.0, 0.093, 1.01)
    assert (pi.gain, pi.integral_time) == pytest.approx((0.1751, 0.3672), abs=6e-5)
    assert pi.integral_time == pytest.approx(0.360, rel=0.021)
    assert (pid.gain, pid.integral_time, pid.derivative_time) == pytest.approx((0.2414, 0.4740, 0.1186), abs=6e-5)
    below = poly((0.05, 1.0), (0.05, 1.0))
    assert 1.2 < with_pi((1.0,), below, 1.0, pi.gain, pi.integral_time).peak_sensitivity < 1.6


@pytest.mark.parametrize(
    ("share", "gain_margin", "phase_margin", "peak"),
    [(1.0, 3.1416, 61.35, 1.5905), (2.0, 4.7124, 70.90, 1.3486), (3.0, 6.2832, 75.68, 1.2489)],
)
def test_tu_25_lambda_tuning(share: float, gain_margin: float, phase_margin: float, peak: float) -> None:
    """Dahlin 1968; Rivera, Morari & Skogestad 1986; GM = (pi/2)(lambda/L + 1), PM = 90 - 57.3/(lambda/L + 1)."""
    tuned = rules.lambda_pi(2.0, 3.0, 0.7, share * 0.7)
    found = with_pi((2.0,), (3.0, 1.0), 0.7, tuned.gain, tuned.integral_time)
    assert found.gain_margin == pytest.approx(math.pi / 2 * (share + 1.0), rel=1e-9)
    assert found.gain_margin == pytest.approx(gain_margin, abs=6e-5)
    assert found.phase_margin_deg == pytest.approx(phase_margin, abs=6e-3)
    assert found.peak_sensitivity == pytest.approx(peak, abs=6e-5)


def test_tu_26_ziegler_nichols_step_is_aggressive() -> None:
    """exp(-0.1 s)/(s + 1), independent: PI GM 1.563, PM 24.5, Ms 3.41; ideal PID GM 1.420, PM 36.1, Ms 3.42."""
    pi = rules.ziegler_nichols_step("PI", 0.1, 0.1, original_pi=True)
    pid = rules.ziegler_nichols_step("PID", 0.1, 0.1)
    found = with_pi((1.0,), LAG, 0.1, pi.gain, pi.integral_time)
    assert found.gain_margin == pytest.approx(1.563, abs=6e-4)
    assert found.phase_margin_deg == pytest.approx(24.5, abs=0.05)
    assert found.peak_sensitivity == pytest.approx(3.41, abs=6e-3)
    found = with_ideal_pid((1.0,), LAG, 0.1, pid.gain, pid.integral_time, pid.derivative_time)
    assert found.gain_margin == pytest.approx(1.420, abs=6e-4)
    assert found.phase_margin_deg == pytest.approx(36.1, abs=0.05)
    assert found.peak_sensitivity == pytest.approx(3.42, abs=6e-3)
