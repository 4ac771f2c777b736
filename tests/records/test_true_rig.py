"""The true rig against scipy's solve_ivp, written out as plain differential equations, without noise."""

import itertools

import numpy as np
import pytest
from scipy.integrate import solve_ivp
from true_rig import Sensor, SheetController, TrueRig, closed_loop, open_loop
from true_rig.controller import Equation
from true_rig.linear_stages import Gain, Integrator, Lag, Pair, Resonance, SlowShare
from true_rig.rough_stages import Actuator, Disturbed, FrictionDrive

GENERATOR = np.random.default_rng(1)


def stepped(profile, before, dead_time):
    """The delayed held command as a function of time."""

    def command(t):
        value = before
        for when, level in profile:
            if t - dead_time >= when:
                value = level
        return value

    return command


def integrate(derivative, start, profile, dead_time, ends, longest):
    """solve_ivp from jump to jump of the delayed command, so that no step straddles one; (n, q) at `ends`."""
    jumps = sorted({0.0, *(when + dead_time for when, _ in profile if when + dead_time < ends[-1]), float(ends[-1])})
    state, rows = np.asarray(start, dtype=float), np.empty((len(ends), len(start)))
    for low, high in itertools.pairwise(jumps):
        middle = 0.5 * (low + high)
        answer = solve_ivp(
            lambda t, x, m=middle: derivative(t, x, m), (low, high), state, rtol=1e-9, atol=1e-11,
            max_step=longest, dense_output=True,
        )  # fmt: skip
        inside = (ends >= low) & (ends <= high)
        if inside.any():
            rows[inside] = answer.sol(ends[inside]).T
        state = answer.y[:, -1]
    return rows


PROFILE = [(0.3, 6.0), (1.1, 2.0), (2.0, 4.5)]


def difference(rig, rows):
    """Largest difference of the true response from solve_ivp, as a share of its span."""
    log = open_loop(rig, PROFILE, 4.0, 0.01, GENERATOR)
    return np.max(np.abs(log.reading - rows)) / np.ptp(rows)


def rig_of(stages, *, lag=0.0, step=0.002, rest=4.0):
    return TrueRig(tuple(stages), 0.0737, rest, 20.0, Sensor(lag=lag), step)


TIMES = np.arange(400) * 0.01


def test_a_lag_behind_a_slow_rate_limited_actuator_and_a_lagging_sensor_agrees_with_solve_ivp():
    """Actuator 0 to 5.5, lag 0.05 s, 8 units/s; plant gain -3, lag 0.4 s with a bend; sensor lag 0.03 s."""
    stages = [Actuator(0.0, 5.5, 0.05, 8.0), Gain(-3.0, 4.0, 0.02), Lag(0.4)]
    command = stepped(PROFILE, 4.0, 0.0737)

    def derivative(_, x, middle):
        u = min(max(command(middle), 0.0), 5.5)
        rate = np.clip((u - x[0]) / 0.05, -8.0, 8.0)
        d = x[0] - 4.0
        return [rate, (-3.0 * d * (1 + 0.02 * d) - x[1]) / 0.4, (x[1] - x[2]) / 0.03]

    rows = 20.0 + integrate(derivative, [4.0, 0.0, 0.0], PROFILE, 0.0737, TIMES, 0.01)[:, 2]
    # second-order steps of 2 ms against lags of 30 ms: (h/T)^2/12 = 4e-4 of a fast transient, less of the span
    assert difference(rig_of(stages, lag=0.03), rows) < 1e-4


def test_the_error_falls_as_the_square_of_the_step():
    """Halving the step quarters the error: a slip of one step at a jump would only halve it."""
    command = stepped(PROFILE, 4.0, 0.0737)

    def derivative(_, x, middle):
        return [(command(middle) - x[0]) / 0.05, (2.0 * (x[0] - 4.0) - x[1]) / 0.2]

    rows = 20.0 + integrate(derivative, [4.0, 0.0], PROFILE, 0.0737, TIMES, 0.01)[:, 1]
    stages = [Actuator(0.0, 9.0, 0.05), Gain(2.0, 4.0), Lag(0.2)]
    coarse, fine = (difference(rig_of(stages, step=h), rows) for h in (0.01, 0.005))
    assert 3.0 < coarse / fine < 5.0


def test_two_resonances_and_a_slow_share_agree_with_solve_ivp():
    """38 rad/s damping 0.04 and 60 rad/s damping 0.1 side by side, then 20 % through a 1.5 s wall."""
    stages = [Gain(0.7, 4.0), Pair(Resonance(38.0, 0.04), Resonance(60.0, 0.1), 0.3), SlowShare(0.2, 1.5)]
    command = stepped(PROFILE, 4.0, 0.0737)

    def derivative(_, x, middle):
        u = 0.7 * (command(middle) - 4.0)
        y = 0.7 * x[0] + 0.3 * x[2]
        return [
            x[1], 38.0**2 * (u - x[0]) - 2 * 0.04 * 38.0 * x[1],
            x[3], 60.0**2 * (u - x[2]) - 2 * 0.1 * 60.0 * x[3],
            (y - x[4]) / 1.5,
        ]  # fmt: skip

    x = integrate(derivative, [0.0] * 5, PROFILE, 0.0737, TIMES, 0.01)
    rows = 20.0 + 0.8 * (0.7 * x[:, 0] + 0.3 * x[:, 2]) + 0.2 * x[:, 4]
    assert difference(rig_of(stages), rows) < 1e-3  # the wall sees 2 ms chords of a 60 rad/s wave: (wh)^2/12 = 1.2e-3


def test_a_drive_with_friction_stops_sticks_and_breaks_loose_as_solve_ivp_says():
    """v' = (w - v - c sign v)/T smoothed by tanh over 0.1 % of the speed, the limit of Coulomb friction."""
    profile = [(0.2, 5.0), (0.9, 4.0), (1.4, 4.2), (1.8, 2.5), (2.6, 4.0), (3.0, 4.9)]
    rig = rig_of([Gain(10.0, 4.0), FrictionDrive(0.15, 3.0), Integrator()], step=0.001)
    log = open_loop(rig, profile, 4.0, 0.01, GENERATOR)
    command = stepped(profile, 4.0, 0.0737)

    def derivative(_, x, middle):
        w = 10.0 * (command(middle) - 4.0)
        return [(w - x[0] - 3.0 * np.tanh(x[0] / 0.01)) / 0.15, x[0]]

    jumps = [0.0] + [when + 0.0737 for when, _ in profile] + [4.0]
    state, rows = np.zeros(2), np.zeros(len(TIMES))
    for low, high in itertools.pairwise(jumps):
        answer = solve_ivp(
            lambda t, x, m=0.5 * (low + high): derivative(t, x, m),
            (low, high), state, method="LSODA", rtol=1e-8, atol=1e-10, max_step=0.002, dense_output=True,
        )  # fmt: skip
        inside = (low <= TIMES) & (high >= TIMES)
        rows[inside] = answer.sol(TIMES[inside])[1]
        state = answer.y[:, -1]
    # stuck, the smoothed drive creeps by at most 0.01 atanh(w/3) = 0.008 units/s over 1.5 s: 0.012 of a span of 5
    assert np.max(np.abs(log.reading - 20.0 - rows)) / np.ptp(rows) < 4e-3
    stuck = (TIMES > 1.6) & (TIMES < 1.87)
    assert np.ptp(log.reading[stuck]) == 0.0


def test_an_integrator_under_a_wave_agrees_with_the_closed_form():
    """y' = 2 (4 + sin 3t - 4) from rest: y = 2 (1 - cos 3t)/3."""
    rig = rig_of([Gain(2.0, 4.0), Disturbed(lambda t: float(2.0 * np.sin(3.0 * t))), Integrator()])
    log = open_loop(rig, [], 4.0, 0.01, GENERATOR)
    assert np.max(np.abs(log.reading - 20.0 - 2.0 * (1.0 - np.cos(3.0 * TIMES)) / 3.0)) < 1e-5


def test_the_difference_equation_in_closed_loop_agrees_with_solve_ivp_from_sample_to_sample():
    """PI on a lag with fractional dead time, T = 0.1 s, computation delay 0.03 s, command clamped at 0.5 above rest."""
    interval, delay, dead = 0.1, 0.03, 0.0737
    gain, integral = 0.8, 1.5
    equation = Equation(
        interval, (1.0, -1.0), (gain + integral * interval, -gain), (gain + integral * interval, -gain), (1.0, 0.0),
        lowest=-0.5, highest=0.5,
    )  # fmt: skip
    rig = TrueRig((Gain(2.0, 4.0), Lag(0.5)), dead, 4.0, 20.0, Sensor(), 0.005)
    log = closed_loop(rig, SheetController(equation, 4.0, 20.0), lambda t: 21.0, 6.0, computation_delay=delay)

    y, sent, u, previous, outputs = 0.0, [], 0.0, 0.0, []
    for k in range(len(log.time)):
        outputs.append(y)
        error = 1.0 - y
        wanted = u + gain * (error - previous) + integral * interval * error
        u, previous = float(np.clip(wanted, -0.5, 0.5)), error
        sent.append((k * interval + delay + dead, u))
        edges = [k * interval, *[t for t, _ in sent if k * interval < t < (k + 1) * interval], (k + 1) * interval]
        for low, high in itertools.pairwise(edges):
            level = next((v for t, v in reversed(sent) if t <= low + 1e-12), 0.0)
            y = solve_ivp(lambda _, x, v=level: (2.0 * v - x) / 0.5, (low, high), [y], rtol=1e-10, atol=1e-12).y[0, -1]
    assert np.max(np.abs(log.reading - 20.0 - np.array(outputs))) < 1e-8
    assert max(value for _, value in sent) == 0.5


def test_the_noise_has_the_stated_size_and_memory():
    """Standard deviation 0.2 and correlation exp(-dt/0.05 s) between samples, 20,000 of them."""
    rig = TrueRig((Gain(1.0, 4.0),), 0.0, 4.0, 0.0, Sensor(noise=0.2, noise_time=0.05), 0.01)
    y = open_loop(rig, [], 200.0, 0.01, np.random.default_rng(5)).reading
    # effective samples about 20000 * (1 - 0.82)/(1 + 0.82) = 2000: 3 sigma of the deviation 5 %
    assert np.std(y) == pytest.approx(0.2, rel=0.05)
    assert np.corrcoef(y[:-1], y[1:])[0, 1] == pytest.approx(np.exp(-0.2), abs=0.02)
