"""How far the loop hunts about its setpoint on plants whose valve sticks."""

from dataclasses import dataclass, replace

import numpy as np

from ..ident.fitted import Plausible
from ..ident.plant import Plant
from ..ident.run import FloatArray
from .discretise import columns_of
from .gains import Gains
from .horizon import first_horizon
from .judge import judged_on
from .sampled.bank import IndexArray
from .sampled.loop import History
from .situation import Situation
from .steady import Rest
from .step_metrics import late
from .values import bench_of, values_of

_PLANTS = 80


@dataclass(frozen=True)
class Hunting:
    """Over the plausible plants, in the second half of the test step as it is watched.

    Attributes
    ----------
    band : (middle, largest) float, command unit
        Half width of the stretch within which the command moves nothing; largest: on 95 % of the plants.
    away : (middle, largest) float, response unit
        Farthest from the setpoint; largest: on 95 % of the plants.
    share : float
        Of the plants that would meet everything if nothing stuck.
    """

    band: tuple[float, float]
    away: tuple[float, float]
    share: float

    def caution(self, units: tuple[str, str], integral: bool) -> str:
        """One sentence with the numbers."""
        band, most = self.band
        text = f"the actuator sticks: within about {band:.2g} {units[0]} either way (up to {most:.2g}) nothing follows"
        if not integral:
            return f"{text}; the response rests anywhere within that, and the requirements are judged with it"
        middle, largest = self.away
        return (
            f"{text}; under integral action the response hunts about the setpoint, by about {middle:.2g} "
            f"{units[1]} (up to {largest:.2g}), and the requirements are judged with that"
        )

    def reason(self, units: tuple[str, str], integral: bool) -> str:
        """The same for gains that are held, and what would help."""
        middle, largest = self.away
        band, most = self.band
        hunts = "would hunt about the setpoint" if integral else "would rest away from the setpoint"
        return (
            f"the actuator sticks: within about {band:.2g} {units[0]} either way (up to {most:.2g}) nothing follows, "
            f"and with the best gains found the response {hunts}, by about {middle:.2g} {units[1]} (up to "
            f"{largest:.2g}); if nothing stuck, {100 * self.share:.0f} % of the plausible plants would meet "
            "everything. Free the actuator or ask for less; if it sticks less than that, a run with small moves of the "
            "command to and fro shows it"
        )


def hunting(gains: Gains, nominal: Plant, plausible: Plausible, situation: Situation) -> Hunting | None:
    """What the very law does on some of the plausible plants; None where no valve sticks or nothing is stepped."""
    if plausible.valves is None or situation.step == 0.0 or not plausible.valves.any():
        return None
    index = np.unique(np.linspace(0, len(plausible.plants) - 1, _PLANTS).astype(int))
    some = plausible.take(index.tolist())
    found: list[FloatArray] = []

    def watch(_chosen: IndexArray, before: Rest, history: History) -> None:
        goal = situation.start + situation.step - before.response
        found.append(np.abs(late(history.response, 0.5) - goal).max(axis=0))

    free = judged_on(gains, replace(some, valves=None), situation)
    bench = bench_of(some, replace(situation, floors=()), first_horizon(nominal, situation), most=8_000, points=1)
    which = np.arange(index.size)
    values_of(bench, which, columns_of([gains]).take(np.zeros(which.size, dtype=int)), refine=False, watch=watch)
    away = found[0] if found and found[0].size else np.full(1, np.nan)
    bands = plausible.valves[plausible.valves[:, 0] > 0.0, 0]
    return Hunting(
        (float(np.median(bands)), float(np.quantile(bands, 0.95))),
        (float(np.median(away)), float(np.quantile(away, 0.95))),
        free.share_meeting,
    )
