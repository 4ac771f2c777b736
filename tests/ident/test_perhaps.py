"""What a record can't rule out shares the plausible plants: friction that hardly shows, a valve that sticks perhaps."""

import numpy as np
import pytest
from gainwright.ident.identify import identify
from gainwright.ident.play import Sticking, Valve
from gainwright.ident.run import Run

INTERVAL, GAIN, LAG = 0.02, 4.0, 0.25


def drive(friction, noise, seed=2):
    """T v' = u - c sign(v) - v, x' = gain v, under doublets; by small Euler steps, at rest where u is too weak."""
    command = np.tile(np.repeat([0.0, 1.0, -1.0, 0.0, -1.0, 1.0, 0.0], 60), 2)
    small, speed, place, response = INTERVAL / 40, 0.0, 0.0, []
    for u in command:
        response.append(place)
        for _ in range(40):
            if speed == 0.0 and abs(u) <= friction:
                continue
            way = np.sign(speed) if speed else np.sign(u)
            faster = speed + small / LAG * (u - friction * way - speed)
            speed = 0.0 if faster * way < 0.0 else faster
            place += small * GAIN * speed
    reading = 30.0 + np.array(response) + noise * np.random.default_rng(seed).standard_normal(len(command))
    return Run("made", INTERVAL * np.arange(len(command)), command, reading)


def test_friction_that_shows_nowhere_stays_among_the_plausible_plants():
    """The upper end is what the record leaves open, so that it falls with the noise."""
    highest = []
    for noise in (0.05, 0.005):
        fit = identify([drive(0.0, noise)])
        assert fit.structure == "integrator with lag"
        highest.append(float(np.quantile(fit.plausible.stiction, 0.99)))
    assert 0.0 < highest[1] < 0.3 * highest[0]
    assert highest[0] < 0.05  # of a command of 1 V


def test_friction_that_is_there_lies_within_what_the_plausible_plants_have():
    fit = identify([drive(0.03, 0.05)])
    assert np.quantile(fit.plausible.stiction, 0.99) > 0.03


@pytest.mark.parametrize("chance", [0.3, 0.8, 1.0])
def test_a_valve_that_is_there_perhaps_stands_before_its_share_of_the_plants(chance):
    """In the first few as in all: every part of the plants is looked at by somebody."""
    sticking = Sticking(Valve(0.2, 0.1), 0.01, np.full(4, 0.1), np.linspace(0.3, 0.9, 4), np.full(4, 0.25), 9.0, chance)
    valves = sticking.draws(1000, 0)
    there = valves[:, 0] > 0.0
    assert np.mean(there) == pytest.approx(chance, abs=0.01)
    assert np.mean(there[:200]) == pytest.approx(chance, abs=0.02)
    assert np.all(valves[~there] == 0.0)
    assert np.all(valves[there, 1] <= valves[there, 0])
    assert sticking.sure == (chance == 1.0)
