"""Lost samples and spikes of the response: what to take out, and what to say about it."""

from dataclasses import dataclass

import numpy as np

from ..run import FloatArray
from .noise_level import noise_level, quantum
from .seen import BoolArray, Seen, stretches

REACH = 5  # neighbours on either side that a spike is held against
SPIKE_DEVIATIONS = 8.0
SPIKE_RANGES = 2.0  # times the neighbours' range
MOST_SPIKES = 0.02  # share of the samples; more are a property of the rig
FEWEST_DROPOUTS = 3
MUCH_LOST = 0.2
TOO_MUCH_LOST = 0.5


@dataclass(frozen=True, eq=False)
class Lost:
    """Samples to take out of a response.

    Attributes
    ----------
    mask : (n,) array of bool
    seen : tuple of Seen
    """

    mask: BoolArray
    seen: tuple[Seen, ...]


def see_spikes(time: FloatArray, command: FloatArray, response: FloatArray, unit: str) -> Lost:
    """Single samples far from their neighbours on both sides, and zeros of the logger among them.

    A spike is off the median of its neighbours by more than eight deviations of the noise and twice the range of the
    neighbours, while the command does not spike itself. Three or more of them that read exactly 0 are dropouts of the
    logger; then every other lone exact 0 goes with them.

    Parameters
    ----------
    time : (n,) array, s
    command : (n,) array
    response : (n,) array, in `unit`
    """
    spikes = _spikes(response) & ~_command_spikes(command)
    zeros = spikes & (response == 0.0)
    dropouts = _lone_zeros(response) if np.count_nonzero(zeros) >= FEWEST_DROPOUTS else np.zeros_like(spikes)
    others = spikes & ~dropouts
    seen: list[Seen] = []
    if np.count_nonzero(others) > MOST_SPIKES * len(response):
        size = f"{np.count_nonzero(others)} samples"
        seen.append(Seen("many spikes", _span(time, others), size, "left in: too many to be chance; check the sensor"))
        others = np.zeros_like(others)
    if others.any():
        seen.append(
            Seen(
                "spikes",
                _span(time, others),
                f"{np.count_nonzero(others)} samples, {_height(response, others):.3g} {unit} at most",
                "left out as lost",
            )
        )
    if dropouts.any():
        seen.append(
            Seen(
                "dropouts",
                _span(time, dropouts),
                f"{np.count_nonzero(dropouts)} samples of exactly 0",
                "left out as lost; say lost_as = [0.0] in the rig file if that is right",
            )
        )
    return Lost(others | dropouts, tuple(seen))


def see_loss(time: FloatArray, response: FloatArray) -> tuple[Seen, ...]:
    """How much of the response is lost.

    Parameters
    ----------
    time : (n,) array, s
    response : (n,) array
        NaN where a sample is lost.
    """
    lost = ~np.isfinite(response)
    if not lost.any():
        return ()
    share = float(np.mean(lost))
    longest = max(end - start for start, end in stretches(lost))
    size = f"{np.count_nonzero(lost)} samples ({100 * share:.3g} %), {longest} in a row at most"
    if share > TOO_MUCH_LOST:
        return (Seen("lost samples", _span(time, lost), size, "repeat the run: most of it is lost", "stops"),)
    if share > MUCH_LOST:
        return (Seen("lost samples", _span(time, lost), size, "repeat the run: too much of it is lost", "holds"),)
    return (Seen("lost samples", _span(time, lost), size, "left out"),)


def _spikes(response: FloatArray) -> BoolArray:
    """(n,) mask of single samples far from their neighbours; the record's ends are not judged."""
    count = len(response)
    mask = np.zeros(count, dtype=bool)
    if count < 2 * REACH + 1:
        return mask
    windows = np.lib.stride_tricks.sliding_window_view(response, 2 * REACH + 1)
    noise = noise_level(response)
    step = np.fmax(np.abs(windows[:, REACH] - windows[:, REACH - 1]), np.abs(windows[:, REACH] - windows[:, REACH + 1]))
    if not np.any(step > SPIKE_DEVIATIONS * noise):
        return mask
    level = max(noise, quantum(response))
    suspects = np.flatnonzero(step > SPIKE_DEVIATIONS * level)
    neighbours = np.delete(windows[suspects], REACH, axis=1)
    whole = np.isfinite(neighbours).sum(axis=1) >= REACH
    suspects, neighbours = suspects[whole], neighbours[whole]
    if len(suspects) == 0:
        return mask
    off = response[suspects + REACH] - np.nanmedian(neighbours, axis=1)
    needed = np.maximum(SPIKE_DEVIATIONS * level, SPIKE_RANGES * _spread(neighbours))
    beside = response[suspects + REACH][:, None] - neighbours[:, REACH - 1 : REACH + 1]
    alone = np.all(~(np.sign(off)[:, None] * beside <= needed[:, None]), axis=1)
    mask[suspects[(np.abs(off) > needed) & alone] + REACH] = True
    return mask


def _spread(neighbours: FloatArray) -> FloatArray:
    """Range of the neighbours without the highest and the lowest, so that one spike does not hide another."""
    inner = np.sort(neighbours, axis=1)
    count = np.isfinite(neighbours).sum(axis=1)
    return np.asarray(inner[np.arange(len(inner)), count - 2] - inner[:, 1])


def _command_spikes(command: FloatArray) -> BoolArray:
    """(n,) mask of the samples shortly after the command left its level for a sample or two and came back."""
    pulse = np.zeros(len(command), dtype=bool)
    for width in (1, 2):
        back = command[: -(width + 1)] == command[width + 1 :]
        pulse[1 : len(command) - width] |= back & (command[1 : len(command) - width] != command[: -(width + 1)])
    reach = np.convolve(pulse, np.ones(REACH + 1), mode="full")[: len(command)]
    return np.asarray(reach > 0)


def _lone_zeros(response: FloatArray) -> BoolArray:
    """(n,) mask of exact zeros whose neighbours are not zero."""
    zero = response == 0.0
    before = np.concatenate([[False], zero[:-1]])
    after = np.concatenate([zero[1:], [False]])
    return np.asarray(zero & ~before & ~after)


def _height(response: FloatArray, mask: BoolArray) -> float:
    return float(np.max(np.abs(response[mask] - np.nanmedian(response))))


def _span(time: FloatArray, mask: BoolArray) -> str:
    places = time[mask]
    return f"{places[0]:.6g} s" if len(places) == 1 else f"{places[0]:.6g} s to {places[-1]:.6g} s"
