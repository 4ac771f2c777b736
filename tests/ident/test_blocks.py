"""Means over blocks: what they are, and that the plant between command and response stays what it was."""

import numpy as np
import pytest
from gainwright.ident.blocks import BlockMeans, as_drawn, held
from scipy.signal import lfilter

INTERVAL = 1e-4  # s
GAIN, SLOW, FAST, DEAD_TIME, NOISE = 2.0, 1.0, 0.2, 0.05, 0.05  # mm/V, s, s, s, mm
TRUE = np.array([GAIN, SLOW, FAST, DEAD_TIME])


def lagged(values: np.ndarray, lag: float, interval: float, *, straight: bool) -> np.ndarray:
    """A lag's exact response to samples that are held, or joined by straight lines (Franklin, Powell and Workman,
    Digital Control of Dynamic Systems, zero- and first-order hold equivalents; from memory)."""
    pole = np.exp(-interval / lag)
    if not straight:
        return lfilter([0.0, 1.0 - pole], [1.0, -pole], values)
    ratio = lag / interval * (1.0 - pole)
    return lfilter([1.0 - ratio, ratio - pole], [1.0, -pole], values)


def plant(command: np.ndarray, interval: float, parameters: np.ndarray, *, straight: bool) -> np.ndarray:
    """Two lags by partial fractions behind a dead time of whole samples."""
    gain, slow, fast, dead = parameters
    late = round(dead / interval)
    assert late == pytest.approx(dead / interval)
    delayed = np.concatenate([np.zeros(late), command])[: len(command)]
    parts = (slow, slow / (slow - fast)), (fast, -fast / (slow - fast))
    return gain * sum(weight * lagged(delayed, lag, interval, straight=straight) for lag, weight in parts)


def steps(count: int) -> np.ndarray:
    """Levels of drawn size for 0.5 s to 3 s, at any sample."""
    rng = np.random.default_rng(5)
    lengths = rng.integers(5_000, 30_000, size=count // 5_000)
    return np.repeat(rng.uniform(-3.0, 3.0, len(lengths)), lengths)[:count]


def steps_at_edges(count: int) -> np.ndarray:
    """The same, every step where a block begins."""
    rng = np.random.default_rng(6)
    return np.repeat(rng.uniform(-3.0, 3.0, count // 5_000 + 1), 5_000)[:count]


def sweep(count: int) -> np.ndarray:
    """A sine from 0.05 Hz to 2 Hz."""
    time = INTERVAL * np.arange(count)
    return 3.0 * np.sin(2.0 * np.pi * (0.05 + 0.5 * 1.95 * time / time[-1]) * time)


def quick(count: int) -> np.ndarray:
    """A new level at every third sample."""
    return np.repeat(np.random.default_rng(3).uniform(-3.0, 3.0, count // 3 + 1), 3)[:count]


def bias_in_errors(command: np.ndarray, factor: int) -> np.ndarray:
    """(4,) what the blocks shift each parameter of a least-squares fit by, in standard errors of the whole record.

    To first order it is the projection of the blocks' error on the parameters' sensitivities; the truth is the exact
    response at full rate.
    """
    command = command.copy()
    command[:4000] = 0.0
    time = INTERVAL * np.arange(len(command))
    response = plant(command, INTERVAL, TRUE, straight=False)
    blocks = BlockMeans(factor * INTERVAL, INTERVAL, 2)
    parts = [blocks.add(*each) for each in split(time, np.column_stack([command, response]))] + [blocks.end()]
    stamps = np.concatenate([part.time for part in parts])
    means = np.concatenate([part.columns for part in parts])
    length = factor * INTERVAL
    drawn = means[:, 1] if blocks.share_at_edges > 0.9 else as_drawn(stamps, means[:, 1], length)
    given = held(means[:, 0], factor)
    error = drawn - plant(given, length, TRUE, straight=True)
    slopes = [np.ones(len(stamps))]
    for place, step in enumerate((1e-4, 1e-4, 1e-4, length)):
        ends = [TRUE + sign * step * np.eye(4)[place] for sign in (1.0, -1.0)]
        up, down = (plant(given, length, each, straight=True) for each in ends)
        slopes.append((up - down) / (2.0 * step))
    jacobian = np.column_stack(slopes)
    inverse = np.linalg.inv(jacobian.T @ jacobian)
    errors = NOISE / np.sqrt(factor) * np.sqrt(np.diag(inverse))
    return ((inverse @ (jacobian.T @ error)) / errors)[1:]


def split(time: np.ndarray, columns: np.ndarray) -> list[tuple[np.ndarray, np.ndarray]]:
    """In parts of 70,001 samples, which no block fits."""
    places = range(70_001, len(time), 70_001)
    return list(zip(np.split(time, places), np.split(columns, places), strict=True))


@pytest.mark.parametrize(
    ("command", "factor"),
    [(steps, 10), (steps, 50), (steps, 100), (steps_at_edges, 100), (sweep, 50), (sweep, 100), (quick, 10)],
)
def test_blocks_leave_the_plant_what_it_was(command, factor: int) -> None:
    """A million samples: no parameter moves by more than 0.1 standard errors. The fastest lag is 20 blocks at least."""
    assert np.max(np.abs(bias_in_errors(command(1_000_000), factor))) < 0.1


def test_what_is_put_right_is_needed() -> None:
    """Without the half sample and the drawn line, blocks of 100 samples shift the dead time by more."""
    command = steps(1_000_000)
    assert np.max(np.abs(bias_in_errors(command, 100))) < 0.1
    with pytest.MonkeyPatch.context() as without:
        without.setitem(globals(), "as_drawn", lambda time, response, length: response)
        assert np.max(np.abs(bias_in_errors(command, 100))) > 0.3
    with pytest.MonkeyPatch.context() as without:
        without.setitem(globals(), "held", lambda values, samples: values)
        assert np.max(np.abs(bias_in_errors(command, 100))) > 0.3


def test_lost_samples_gaps_and_uneven_stamps() -> None:
    """A block with few samples is left out, one with few responses is lost, a standing command stays exact."""
    time = 0.1 * np.arange(40)
    columns = np.column_stack([np.full(40, 0.1), np.arange(40.0)])
    columns[8:11, 1] = np.nan  # three of the four of block 2
    columns[13, 1] = np.nan
    here = (time < 1.65) | (time > 1.95)  # block 4 has one sample
    blocks = BlockMeans(0.4, 0.1, 2)
    first = blocks.add(time[here], columns[here])
    last = blocks.end()
    stamps = np.concatenate([first.time, last.time])
    means = np.concatenate([first.columns, last.columns])
    np.testing.assert_allclose(stamps, [0.15, 0.55, 0.95, 1.35, 2.15, 2.55, 2.95, 3.35, 3.75])
    assert np.all(means[:, 0] == 0.1)
    np.testing.assert_allclose(means[:, 1], [1.5, 5.5, np.nan, 13.666666666666666, 21.5, 25.5, 29.5, 33.5, 37.5])
    out = as_drawn(stamps, means[:, 1] ** 2, 0.4)
    bent = np.flatnonzero(out != means[:, 1] ** 2)
    assert bent.tolist() == [2, 5, 6, 7]  # NaN differs from itself; beside it and beside the gap nothing is changed
    np.testing.assert_allclose(out[5:8] - means[5:8, 1] ** 2, 32.0 / 12.0)  # the second difference of (4 k)^2 is 32
