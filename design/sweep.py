"""What a loop does over a list of loop gains, zeros fixed: the values behind the moving gain sheet."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ..ident.plant import ComplexArray
from ..ident.run import FloatArray
from .values import Bench


@dataclass(frozen=True, eq=False)
class Band:
    """Between which values 95 % of the plausible plants lie, a column for each gain.

    Attributes
    ----------
    low, high : (g,) or (t, g) arrays
        inf: never; NaN where a plant is unstable or nothing was predicted.
    """

    low: FloatArray
    high: FloatArray


@dataclass(frozen=True, eq=False)
class GainSweep:
    """g rising loop gains, the chosen one and every end of an interval among them.

    Attributes
    ----------
    gains : (g,) array
        K > 0.
    chosen : int
        Index of the chosen K.
    poles : tuple of (g,) complex arrays, 1/s
        Branches of the locus; NaN where a branch is left of what was looked at.
    fitted : Bench
        The fitted plant, made ready for the very law.
    values : dict of requirement name to (g,) array, base units
        On the fitted plant; inf: never.
    stable : (g,) array of bool
        Whether the fitted plant is stable.
    bands : dict of requirement name to Band
    worst : dict of limit name to (g,) array, absolute readings; rates as magnitudes
        Of the plausible plants, over the steps that the requirements and limits are judged on; NaN: nothing predicted.
    share_stable, share_meeting : (g,) arrays
        Of the plausible plants: those that are stable, and those that meet everything stated together.
    plants : int
        How many plausible plants were run.
    band_interval : float, s
        Update interval that their steps were run with.
    capped : bool
        Whether gains were left out above which the stand-in of a continuous controller is not believed.
    time : (t,) array, s
        Empty without a test step.
    response, command : Band of (t, g) arrays, absolute readings
        During the test step.
    """

    gains: FloatArray
    chosen: int
    poles: tuple[ComplexArray, ...]
    fitted: Bench
    values: dict[str, FloatArray]
    stable: NDArray[np.bool_]
    bands: dict[str, Band]
    worst: dict[str, FloatArray]
    share_stable: FloatArray
    share_meeting: FloatArray
    plants: int
    band_interval: float
    capped: bool
    time: FloatArray
    response: Band
    command: Band
