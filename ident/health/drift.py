"""A response that does not come back to its reading at the same command."""

import numpy as np

from ..run import FloatArray
from .noise_level import quantum
from .rests import Rest, rests
from .seen import Seen

LARGE = 0.08  # of the response's span
DEVIATIONS = 5.0
FLAT = 0.02  # of the span
SHORTEST = 30  # samples
SETTLED = 5.0  # times what it still moves


def see_drift(time: FloatArray, command: FloatArray, response: FloatArray, unit: str) -> tuple[Seen, ...]:
    """Settled readings at one command that differ by more than noise.

    Only a plant that settles can be judged: one whose response stands still at two commands far apart.

    Parameters
    ----------
    time : (n,) array, s
    command : (n,) array
    response : (n,) array, in `unit`
        NaN where lost.
    """
    good = response[np.isfinite(response)]
    span = float(np.ptp(good)) if len(good) else 0.0
    long = [rest for rest in rests(command, response) if rest.last - rest.first >= SHORTEST]
    settled = [rest for rest in long if len(rest.end) >= 5 and rest.is_flat(FLAT * span)]
    commands = [rest.command for rest in settled]
    if span == 0.0 or len(set(commands)) < 2 or np.ptp(commands) < 0.5 * np.ptp(command):
        return ()
    worst = max(
        ((a, b) for i, a in enumerate(settled) for b in settled[i + 1 :] if a.command == b.command),
        key=lambda pair: abs(_off(*pair)),
        default=None,
    )
    if worst is None:
        return ()
    noise = float(np.hypot(np.std(worst[0].end), np.std(worst[1].end))) + quantum(response)
    off = _off(*worst)
    moving = max(rest.still_moves for rest in worst)
    if abs(off) < max(LARGE * span, DEVIATIONS * noise, SETTLED * moving):
        return ()
    return (
        Seen(
            "drift",
            f"{time[worst[0].last - 1]:.6g} s to {time[worst[1].last - 1]:.6g} s",
            f"{off:.3g} {unit} off at the same command, {100 * abs(off) / span:.2g} % of the response's span",
            "let the rig warm up, or look for play and sticking of the actuator; the fit can't explain it",
        ),
    )


def _off(first: Rest, second: Rest) -> float:
    return float(np.median(second.end) - np.median(first.end))
