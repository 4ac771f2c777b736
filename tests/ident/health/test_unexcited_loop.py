"""A closed loop that only noise moves tells nothing of the plant, whatever its controller."""

import numpy as np
import pytest
from gainwright.ident.health.unexcited_loop import see_unexcited_loop, unexplained_share


def quiet_loop(seed: int, derivative: float = 0.0, dither: float = 0.0, digits: int = 12, clamp: float = 1e9):
    """100 s at 20 Hz of a lag (2, 1 s) under PI or PID control with noise of 0.1, the setpoint at zero."""
    random = np.random.default_rng(seed)
    count, interval = 2000, 0.05
    added, noise = dither * random.choice([-1.0, 1.0], count), 0.1 * random.standard_normal(count)
    state = integral = filtered = 0.0
    command, response = np.zeros(count), np.zeros(count)
    for k in range(count):
        response[k] = state + noise[k]
        integral -= 0.6 * interval * response[k]
        rate = (response[k] - filtered) / 0.1
        filtered += (1 - np.exp(-interval / 0.1)) * (response[k] - filtered)
        command[k] = np.clip(-0.8 * response[k] + integral - derivative * rate + added[k], -clamp, clamp)
        state += (1 - np.exp(-interval)) * (2.0 * command[k] - state)
    return interval * np.arange(count), np.round(command, digits), np.round(response, digits)


@pytest.mark.parametrize("changes", [{}, {"derivative": 0.1}, {"digits": 3}, {"clamp": 0.12}])
def test_a_loop_that_only_noise_moves_is_seen(changes: dict[str, float]) -> None:
    """PI, PID, readings of three digits, a clamped command: each follows from the response alone."""
    time, command, response = quiet_loop(1, **changes)
    (seen,) = see_unexcited_loop(time, command, response, np.zeros(2000), "mm")
    assert (seen.kind, seen.refuses) == ("closed loop without excitation", "stops")
    assert see_unexcited_loop(time, command, response, None, "mm")


def test_a_setpoint_that_moves_or_a_dither_is_excitation() -> None:
    """One step of the setpoint is enough; so is a tenth of a volt on the command."""
    time, command, response = quiet_loop(2)
    assert see_unexcited_loop(time, command, response, np.where(time < 5, 0.0, 1.0), "mm") == ()
    time, command, response = quiet_loop(2, dither=0.1)
    assert see_unexcited_loop(time, command, response, np.zeros(2000), "mm") == ()


def test_the_share_that_the_response_does_not_explain_is_the_dither() -> None:
    """Its rms over the command's, to some per cent: the dither is white and known."""
    _, command, response = quiet_loop(3, dither=0.05)
    assert unexplained_share(command, response) == pytest.approx(0.05 / np.std(command), rel=0.05)


def test_a_log_slower_than_its_controller_can_not_show_a_dither() -> None:
    """Every fourth sample: the response does not explain the command, and there is no excitation for all that."""
    time, command, response = (values[::4] for values in quiet_loop(4))
    (seen,) = see_unexcited_loop(time, command, response, np.zeros(500), "mm", 0.05)
    assert "too slow" in seen.size
