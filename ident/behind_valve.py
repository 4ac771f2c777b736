"""The choice of a plant once more, behind a valve that sticks, where the records show one."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

from .choose import Fitted
from .play import Sticking
from .run import FloatArray, Run
from .sticking import chance_of, find_sticking, sized_behind
from .whiten import Colour


@dataclass(frozen=True, eq=False)
class Choice:
    """Structures fitted to the same commands, the chosen one first and finished.

    Attributes
    ----------
    fitted : list of Fitted
    weights : (m,) array
        Shares of the evidence.
    colour : Colour
    """

    fitted: list[Fitted]
    weights: FloatArray
    colour: Colour


Again = Callable[[Sequence[Run], bool], Choice]


def behind_valve(runs: Sequence[Run], plain: Choice, again: Again) -> tuple[Choice, Sticking | None]:
    """The choice behind the valve that the records show, and the valve; the plain choice where they show none for sure.

    Parameters
    ----------
    runs : sequence of Run
        As logged.
    plain : Choice
        Of the commands as logged.
    again : callable
        Chooses for other commands; told False, without the further structures. One of these may have taken up what a
        valve did, so where one was chosen the usual structures are asked too.
    """
    before = [plain.fitted[0]]
    if before[0].problem.structure.further and runs:
        before.insert(0, again(runs, False).fitted[0])
    for plant in before:
        sticking = find_sticking(plant)
        if sticking is None:
            continue
        through = again([sticking.valve.through(run) for run in runs], True)
        chance = chance_of(sticking, through.fitted[0], plain.fitted[0])
        if chance >= 1.0:
            break
        if plant is plain.fitted[0]:  # a plain plant that explains more than this one leaves no perhaps
            return plain, replace(sticking, chance=chance)
    else:
        return plain, None
    sticking = sized_behind(sticking, through.fitted[0], runs, through.colour)
    return again([sticking.valve.through(run) for run in runs], True), sticking
