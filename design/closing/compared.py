"""What closing hands on: one held-out record against its prediction."""

from dataclasses import dataclass
from typing import Literal

from ...ident.run import FloatArray
from ...ident.tables import FittedTable
from .sight import StepSight


@dataclass(frozen=True, eq=False)
class Compared:
    """A held-out record, its prediction with band, and the verdict.

    Attributes
    ----------
    label : str
    time, command, response : (n,) arrays; s, command unit, response unit
    predicted, low, high : (n,) arrays, response unit
        Free run of the fitted plant; 95 % band from parameters and noise.
    misfit, noise_floor : float
        rms error / standard deviation of the response; the same of the noise alone.
    coverage_95 : float
        Share of the samples inside the band.
    verdict : {"agrees", "disagrees", "not comparable"}
    why : str
    share_meeting : float or None
        Of the plants that this record makes plausible, those on which the gains meet everything.
    sight : StepSight or None
        Overshoot, rise, settling and final value of its largest step, predicted and measured.
    table : FittedTable or None
        A held-out frequency table beside the fitted plant; the arrays over time are then empty.
    """

    label: str
    time: FloatArray
    command: FloatArray
    response: FloatArray
    predicted: FloatArray
    low: FloatArray
    high: FloatArray
    misfit: float
    noise_floor: float
    coverage_95: float
    verdict: Literal["agrees", "disagrees", "not comparable"]
    why: str
    share_meeting: float | None = None
    sight: StepSight | None = None
    table: FittedTable | None = None
