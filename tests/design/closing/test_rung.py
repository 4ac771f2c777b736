"""A rung's log: climb, repeat or stop; the loop under a moving setpoint against sums of independent steps."""

import importlib.util
from pathlib import Path

import numpy as np
import pytest
from gainwright.design.closing.rung import RungAsked, judge_rung, swings
from gainwright.design.discretise import columns_of_law, law_from_gains
from gainwright.design.gains import Gains
from gainwright.design.requirements import ControllerSetting, Limits
from gainwright.design.sampled.bank import build_bank
from gainwright.design.sampled.follow import follow
from gainwright.design.sampled.loop import Clamps
from gainwright.ident.fitted import Plausible
from gainwright.ident.plant import Plant
from gainwright.ident.run import Run

T = 0.02
GAINS = Gains("PI", 0.8, 1.4)
LAW = law_from_gains(GAINS, T)
PLANT = Plant((2.0,), (0.5, 1.0), 0.113)
RNG = np.random.default_rng(3)
SIBLINGS = [
    Plant((k,), (tau, 1.0), lag)
    for k, tau, lag in zip(
        RNG.normal(2.0, 0.03, 60), RNG.normal(0.5, 0.01, 60), RNG.normal(0.113, 0.003, 60), strict=True
    )
]
NOISE = 0.02


@pytest.fixture(scope="module")
def small_steps():
    """The independent simulation beside the design's tests."""
    file = Path(__file__).resolve().parents[1] / "small_steps.py"
    spec = importlib.util.spec_from_file_location("small_steps", file)
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module.run


def stepped(small_steps, plant, samples, changes, law=LAW):
    """Response at the samples to setpoint steps (sample, size): a sum of shifted independent step responses."""
    _, rows, _ = small_steps([plant], law, setpoint=1.0, samples=samples)
    unit = np.concatenate([[0.0], rows[7::8, 0]])[:samples]
    total = np.zeros(samples)
    for at, size in changes:
        total[at:] += size * unit[: samples - at]
    return total


def test_a_moving_setpoint_is_the_sum_of_its_steps(small_steps):
    """No clamp: the loop is linear, and three steps one after the other superpose (exact law)."""
    changes, samples = ((0, 1.0), (40, -2.5), (97, 0.7)), 200
    setpoint = np.zeros(samples)
    for at, size in changes:
        setpoint[at:] += size
    bank = build_bank([PLANT], T, points=1)
    free = Clamps(np.array([-np.inf]), np.array([np.inf]))
    response, _ = follow(bank, columns_of_law(LAW), setpoint, free)
    assert np.abs(response[:, 0] - stepped(small_steps, PLANT, samples, changes)).max() < 1e-5


def judged(response, setpoint, *, command=None, limits=None, asked=None):
    """A log about response 100 of a rung that steps by 5."""
    time = T * np.arange(response.size)
    run = Run(
        "rung.csv", time, np.zeros(response.size) if command is None else command, response, setpoint, closed_loop=True
    )
    return judge_rung(
        run,
        asked or RungAsked(LAW, 5.0, 0.6, 2.0),
        PLANT,
        Plausible((PLANT, *SIBLINGS), np.zeros(61), np.zeros(61)),
        operating_command=0.0,
        operating_response=100.0,
        noise_std=NOISE,
        limits=limits or Limits(-10.0, 10.0, None, 0.0, 200.0, None),
        setting=ControllerSetting(T),
    )


@pytest.fixture(scope="module")
def log(small_steps):
    """A sound log: one step of 5 after 1 s, on a plant of its own, with noise."""
    setpoint = np.where(np.arange(400) >= 50, 105.0, 100.0)
    clean = 100.0 + stepped(small_steps, Plant((2.02,), (0.505, 1.0), 0.115), 400, ((50, 5.0),))
    return clean + np.random.default_rng(4).normal(0.0, NOISE, 400), setpoint


def test_a_sound_log_says_climb(log):
    """Nearly every sample in the band."""
    found = judged(*log)
    assert found.advice == "climb", found.why
    assert found.outside < 0.01


def test_a_plant_of_twice_the_gain_and_thrice_the_dead_time_says_stop(small_steps, log):
    """It leaves the band for longer than three response times, or swings more and more."""
    setpoint = log[1]
    wild = 100.0 + stepped(small_steps, Plant((4.0,), (0.5, 1.0), 0.35), 400, ((50, 5.0),))
    assert judged(wild, setpoint).advice == "stop"


def test_a_limit_that_is_passed_says_stop(log):
    """One reading above the highest response is enough."""
    found = judged(*log, limits=Limits(-10.0, 10.0, None, 0.0, 104.0, None))
    assert found.advice == "stop"
    assert "highest limit of 104" in found.why


def test_a_frozen_response_says_stop(log):
    """The sensor stays where it was while the loop should have moved by five."""
    found = judged(np.full(400, 100.0), log[1])
    assert found.advice == "stop"
    assert "frozen" in found.why


def test_a_growing_oscillation_says_stop(log):
    """Swings of 1.5 times the one before, about the new setpoint."""
    t = T * np.arange(400)
    swinging = log[1] + 0.3 * np.exp(0.27 * t) * np.sin(2.0 * np.pi * 0.5 * t)
    found = judged(swinging, log[1])
    assert found.advice == "stop"
    assert "oscillation grows" in found.why


def test_a_log_that_shows_too_little_says_repeat(log):
    """No step, too small a step, or an end before the response is at rest."""
    response, setpoint = log
    assert judged(np.full(400, 100.0), np.full(400, 100.0)).advice == "repeat"
    small = judged(100.0 + 0.2 * (response - 100.0), 100.0 + 0.2 * (setpoint - 100.0))
    assert small.advice == "repeat"
    assert "asks for 5" in small.why
    short = judged(response[:100], setpoint[:100])
    assert short.advice == "repeat"
    assert "needs 2 s to rest" in short.why


def test_a_short_disturbance_says_repeat(log):
    """A kick of a fifth of a second outside the band: look for its cause, and run again."""
    kicked = log[0].copy()
    kicked[300:315] += 1.0
    found = judged(kicked, log[1])
    assert found.advice == "repeat"
    assert "outside the 99.9 % band" in found.why


def test_swings_are_counted_from_turn_to_turn_and_noise_is_none():
    """By hand: up 2, down 3, and a ripple of 0.1 that is less than the least."""
    assert swings(np.array([0.0, 2.0, 1.9, 2.0, -1.0]), 0.5) == [2.0, 3.0]
    assert swings(np.array([0.0, 0.1, 0.0, 0.1]), 0.5) == [0.0]
