"""Two modes side by side: made by scipy's state-space integration, found, and told apart from one."""

import numpy as np
import pytest
from gainwright.ident.catalogue import TWO_OPPOSED_RESONANCES, TWO_RESONANCES
from gainwright.ident.identify import identify
from gainwright.ident.known import plant_of_parameters
from gainwright.ident.plant import Plant
from gainwright.ident.run import Run
from scipy.integrate import solve_ivp

FIRST, D1, SECOND, D2, GAIN, DEAD = 12.0, 0.12, 41.0, 0.05, 2.5, 0.02


def record(share, noise=0.01, seed=5):
    """gain (G1 + share G2) / (1 + share) behind a dead time, stepped; integrated by small steps of its own."""
    interval, levels = 0.005, (0.0, 1.0, 0.0, -1.0, 0.5, 0.0)
    time = interval * np.arange(400 * len(levels))
    command = np.repeat(np.array(levels), 400)

    def slope(t, x):
        u = command[min(max(int((t - DEAD) / interval + 1e-9), 0), len(command) - 1)] if t >= DEAD else 0.0
        one = [x[1], FIRST**2 * (u - x[0]) - 2 * D1 * FIRST * x[1]]
        return [*one, x[3], SECOND**2 * (u - x[2]) - 2 * D2 * SECOND * x[3]]

    states = solve_ivp(slope, (0.0, time[-1]), np.zeros(4), t_eval=time, max_step=interval, rtol=1e-7, atol=1e-9).y
    response = GAIN * (states[0] + share * states[2]) / (1.0 + share)
    return Run("made", time, command, response + noise * np.random.default_rng(seed).standard_normal(len(time)))


@pytest.mark.parametrize(("share", "name"), [(0.1, "two resonances"), (-0.08, "two opposed resonances")])
def test_both_modes_are_found(share, name):
    fit = identify([record(share)])
    assert fit.structure == name
    found = {each.name: each.value for each in fit.parameters}
    assert found["natural frequency 1"] == pytest.approx(FIRST, rel=5e-3)
    assert found["natural frequency 2"] == pytest.approx(SECOND, rel=5e-3)
    assert found["damping ratio 2"] == pytest.approx(D2, rel=0.1)
    assert found["share of mode 2"] == pytest.approx(abs(share), rel=0.1)
    assert found["gain"] == pytest.approx(GAIN, rel=5e-3)


def test_one_resonance_stays_one():
    assert identify([record(0.0)]).structure == "resonance"


@pytest.mark.parametrize(("structure", "sign"), [(TWO_RESONANCES, 1.0), (TWO_OPPOSED_RESONANCES, -1.0)])
@pytest.mark.parametrize("ratio", [3.0, 0.4])
def test_the_named_parameters_make_the_plant_again(structure, sign, ratio):
    """Against the sum of the two modes at a frequency of its own."""
    shape = (FIRST, D1, ratio, D2, 0.15)
    numerator, denominator = structure.polynomials(shape)
    s = 1j * 17.0
    modes = [w**2 / (s**2 + 2 * d * w * s + w**2) for w, d in ((FIRST, D1), (ratio * FIRST, D2))]
    expected = (modes[0] + sign * 0.15 * modes[1]) / (1.0 + sign * 0.15)
    assert np.polyval(numerator, s) / np.polyval(denominator, s) == pytest.approx(expected, rel=1e-12)
    names = ("gain", "dead time", *(each.name for each in structure.named))
    like = Plant(numerator, denominator, 0.0)
    again = plant_of_parameters(names, np.array([1.0, 0.0, *structure.values(shape)]), like)
    assert complex(again.response_at(np.array([17.0]))[0]) == pytest.approx(expected, rel=1e-9)
