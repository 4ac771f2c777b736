"""What is asked beyond a setpoint step: ramp, disturbance, noise at the command, setpoint weight, both directions.

Against simulations that use nothing of the package's loop (small_steps.py), and scipy's Lyapunov equation.
"""

import dataclasses

import numpy as np
import pytest
from gainwright.design.design import design_gains
from gainwright.design.discretise import law_from_gains
from gainwright.design.gains import Gains
from gainwright.design.judge import judge_plants
from gainwright.design.requirements import ControllerSetting, Limits, Requirement, Requirements
from gainwright.ident.fitted import Noise, Plausible
from gainwright.ident.law import Clamp
from gainwright.ident.plant import Plant
from scipy.linalg import expm, solve_discrete_lyapunov

T = 0.02
SETTING = ControllerSetting(T, 0.003)
LAG = Plant((2.0,), (0.5, 1.0), 0.085)
MODE = Plant((9.0,), (1.0, 1.2, 9.0), 0.06)
SERVO = Plant((3.0,), (0.1, 1.0, 0.0), 0.05)
LOOPS = [
    (LAG, Gains("PI", 0.9, 2.2)),
    (MODE, Gains("PID", 0.15, 1.1, 0.05, 0.02)),
    (SERVO, Gains("PD", 2.0, 0.0, 0.2, 0.02)),
]


def judged(gains, plant, items, *, noise=None, limits=None, step=None, **more):
    """On one plant at rest at (0 V, 0 mm)."""
    return judge_plants(
        gains,
        Plausible((plant,), np.zeros(1), np.zeros(1)),
        operating_command=0.0,
        operating_response=0.0,
        noise=noise,
        requirements=Requirements(tuple(items), step, **more),
        limits=limits or Limits(),
        setting=SETTING,
    )


@pytest.mark.parametrize(("plant", "gains"), LOOPS)
def test_the_following_error_is_that_of_a_long_ramp(plant, gains, run_small_steps):
    """5 mm/s for 40 s, sample by sample: what is left between setpoint and response at the end."""
    item = Requirement("ramp_error", 100.0, "at_most", "mm", ramp=5.0)
    found = judged(gains, plant, [item]).values["ramp_error"][0]
    law = law_from_gains(gains, T)
    ramp = 5.0 * T * np.arange(2000)
    times, response, _ = run_small_steps([plant], law, setpoint=ramp, samples=2000, computation_delay=0.003)
    left = 5.0 * times[-1] - response[-1, 0]
    assert found == pytest.approx(abs(left), rel=1e-4)
    # 1/(I g) with an integral; for the servo P e gives v/3 and makes up for D v, the derivative of the response
    lag = 1.0 / (gains.integral * plant.static_gain) if gains.integral else (1.0 / 3.0 + 0.2) / 2.0
    assert found == pytest.approx(5.0 * lag, rel=1e-4)


@pytest.mark.parametrize(("plant", "gains"), LOOPS[:2])
def test_peak_and_recovery_of_a_disturbance_are_those_of_a_fine_simulation(plant, gains, run_small_steps):
    """A command of 0.7 V more at the plant from 0 s on; extremes between samples, last entry into +-0.05 mm."""
    asked = {"command_step": 0.7, "sense": "at_most"}
    items = [
        Requirement("disturbance_peak", 9.0, unit="mm", **asked),
        Requirement("disturbance_recovery", 20.0, unit="s", band=0.05, **asked),
    ]
    values = judged(gains, plant, items).values
    times, response, _ = run_small_steps(
        [plant], law_from_gains(gains, T), setpoint=0.0, samples=700, computation_delay=0.003, disturbance=0.7, pieces=8
    )
    away = np.abs(response[:, 0])
    late = times[np.flatnonzero(away > 0.05)[-1]]
    assert values["disturbance_peak"][0] == pytest.approx(away.max(), rel=5e-4)  # a parabola over a flat corner
    wait = values["disturbance_recovery"][0] - late
    # the program counts from the sample that first sees the disturbance, the plant feels it one total delay later
    assert -T <= wait <= T


@pytest.mark.parametrize(("plant", "gains"), LOOPS)
@pytest.mark.parametrize(("rho", "c"), [(0.0, 0.0), (0.7, 0.3), (0.9, -0.5)])
def test_noise_at_the_command_is_that_of_the_lyapunov_equation(plant, gains, rho, c):
    """The closed loop with its ARMA noise as one linear recursion: variance of u from scipy's discrete Lyapunov."""
    item = Requirement("command_noise", 100.0, "at_most", "V")
    innovation = 0.2
    std = innovation * np.sqrt((1 + 2 * rho * c + c * c) / (1 - rho * rho))
    found = judged(gains, plant, [item], noise=Noise(T, std, innovation, rho, c)).values["command_noise"][0]
    assert found == pytest.approx(innovation * command_rms(plant, law_from_gains(gains, T), rho, c), rel=5e-3)


def command_rms(plant, law, rho, c):
    """Of the command for white noise of one: states x, u[k-1..], y[k-1], y[k-2] as read, noise and its innovation."""
    a, b, out = controllable(plant)
    delay = plant.dead_time + 0.003
    whole = int(delay // T)
    late = delay - whole * T
    phi, n = expm(a * T), b.size
    newer, older = fed(a, b, T - late), expm(a * (T - late)) @ fed(a, b, late)
    past = max(whole + 1, 2)
    size = n + past + 2 + 2  # x; u; y; noise and innovation of the sample before
    fixed = [np.zeros(3), np.zeros(3), np.zeros(3)]
    for row, values in zip(fixed, (law.command, law.response, law.memory), strict=True):
        row[: len(values)] = values
    command, seen, _ = fixed

    def step(z, w):
        x, u, y, noise, before = z[:n], z[n : n + past], z[n + past : n + past + 2], z[-2], z[-1]
        noise = rho * noise + w + c * before
        read = out @ x + noise
        sent = -seen[0] * read - seen[1] * y[0] - seen[2] * y[1] - command[1] * u[0] - command[2] * u[1]
        line = np.concatenate([[sent], u])
        x = phi @ x + newer * line[whole] + older * line[whole + 1]
        return np.concatenate([x, line[:past], [read, y[0]], [noise, w]])

    matrix = np.array([step(e, 0.0) for e in np.eye(size)]).T
    drive = step(np.zeros(size), 1.0)
    return float(np.sqrt(solve_discrete_lyapunov(matrix, np.outer(drive, drive))[n, n]))


def controllable(plant):
    below = np.array(plant.denominator) / plant.denominator[0]
    n = below.size - 1
    a = np.eye(n, k=1)
    a[-1] = -below[:0:-1]
    above = np.concatenate([np.zeros(n - len(plant.numerator)), plant.numerator])[::-1] / plant.denominator[0]
    return a, np.eye(n)[-1], above


def fed(a, b, time):
    both = np.zeros((b.size + 1, b.size + 1))
    both[:-1, :-1], both[:-1, -1] = a * time, b * time
    return expm(both)[:-1, -1]


def test_both_directions_are_judged_by_the_worse_one(run_small_steps):
    """Room of 1.1 V up and of 0.505 V down, 0.5 V to be held: the downward step is slower; both by Runge-Kutta."""
    gains, settle = Gains("PI", 0.9, 2.2), Requirement("settling_time", 9.0, "at_most", "s", band=0.02)
    over = Requirement("overshoot", 0.9, "at_most", "%")
    limits = Limits(-0.505, 1.1, None, -50.0, 50.0)
    values = judged(gains, LAG, [settle, over], step=1.0, limits=limits, both_directions=True).values
    alone = judged(gains, LAG, [settle, over], step=1.0, limits=limits).values
    law = law_from_gains(gains, T, Clamp(-0.505, 1.1, None))
    reached = []
    for goal in (1.0, -1.0):
        times, response, _ = run_small_steps(
            [LAG], law, setpoint=goal, samples=600, computation_delay=0.003, low=-0.505, high=1.1, pieces=8
        )
        share = response[:, 0] / goal
        reached.append((times[np.flatnonzero(np.abs(share - 1.0) > 0.02)[-1]], share.max() - 1.0))
    up, down = reached
    assert down[0] > up[0] + 0.1
    assert alone["settling_time"][0] == pytest.approx(up[0], abs=T / 4)
    assert values["settling_time"][0] == pytest.approx(max(up[0], down[0]), abs=T / 4)
    assert values["overshoot"][0] == pytest.approx(max(up[1], down[1], 0.0), abs=2e-4)


def test_a_setpoint_weight_lets_an_overshoot_be_met(run_small_steps):
    """PI on a servo that must recover from a disturbance: with weight one it overshoots by more than the 6 % asked
    (the area under the error of a double integrator is zero); the search lowers the weight and keeps it."""
    items = (
        Requirement("overshoot", 0.06, "at_most", "%", 100.0),
        Requirement("disturbance_recovery", 3.0, "at_most", "s", band=0.05, command_step=0.5),
    )
    rng = np.random.default_rng(3)
    plants = tuple(Plant((3.0 * g,), (0.1, 1.0, 0.0), 0.05) for g in np.exp(0.02 * rng.standard_normal(250)))
    design = design_gains(
        SERVO, Plausible(plants, np.zeros(250), np.zeros(250)), operating_command=0.0, operating_response=0.0,
        noise=None, requirements=Requirements(items, 1.0), limits=Limits(-9.0, 9.0, np.inf, -9.0, 9.0, np.inf),
        setting=ControllerSetting(T, 0.003, ("PI",)), command_unit="V", response_unit="mm",
    )  # fmt: skip
    assert design.reasons == ()
    assert design.gains.setpoint_weight < 0.9

    def overshoot(gains):
        law = law_from_gains(gains, T)
        _, response, _ = run_small_steps([SERVO], law, setpoint=1.0, samples=600, computation_delay=0.003)
        return response.max() - 1.0

    assert overshoot(design.gains) <= 0.06
    assert overshoot(dataclasses.replace(design.gains, setpoint_weight=1.0)) > 0.06
