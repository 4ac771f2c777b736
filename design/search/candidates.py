"""Candidate laws as points of a small space: logarithms of gain and zeros, and the setpoint weight."""

from dataclasses import dataclass

import numpy as np

from ...ident.run import FloatArray
from ..discretise import LEAD_LAG, GainColumns

FILTER_SHARE = 8.0  # Td/Tf; 8 to 20: common practice, no source
MOST_SPREAD = 20.0  # pole over zero of a lead, zero over pole of a lag; common practice, no source
_WEIGHTED = ("PI", "PID")


@dataclass(frozen=True)
class Space:
    """How points become gains for one structure.

    A point is [ln gain, ln zeros ..., setpoint weight]: P [P]; I [I]; PI [P, I/P]; PD [P, Td]; PID [P, I/P, Td];
    lead, lag [P, z, p/z or z/p]; lead-lag [P, z, p/z, z', z'/p'], the lag second. The weight is there when `weighted`.

    Attributes
    ----------
    structure : StructureName
    sign : float
        Of the plant's gain.
    interval : float, s
        Update interval.
    quick : float, s
        The derivative filter is not slower than this (nor faster than half an update interval).
    weighted : bool
    """

    structure: str
    sign: float
    interval: float
    quick: float
    weighted: bool = False

    @property
    def zeros(self) -> int:
        """How many logarithms follow the gain."""
        return {"P": 0, "I": 0, "PI": 1, "PD": 1, "PID": 2, "lead": 2, "lag": 2, "lead-lag": 4}[self.structure]

    @property
    def size(self) -> int:
        """Length of a point."""
        return 1 + self.zeros + int(self.weighted)

    def gains(self, points: FloatArray) -> GainColumns:
        """(c, size) points as c laws."""
        main = self.sign * np.exp(points[:, 0])
        none = np.zeros(points.shape[0])
        weight = np.clip(points[:, -1], 0.0, 1.0) if self.weighted else none + 1.0
        rest = np.exp(points[:, 1 : 1 + self.zeros]).T
        if self.structure == "I":
            return GainColumns("I", none, main, none, none, weight, none, none)
        integral = main * rest[0] if self.structure in _WEIGHTED else none
        time = rest[-1] if self.structure in ("PD", "PID") else none
        lag = np.where(time > 0.0, self.filter_time(time), 0.0)
        network = self._network(rest) if self.structure in LEAD_LAG else (none, none)
        return GainColumns(self.structure, main, integral, main * time, lag, weight, *network)

    def filter_time(self, derivative_time: FloatArray) -> FloatArray:
        """Td/8; not above `quick`, where Td is long because P is small, and not under half an update interval."""
        return np.maximum(np.minimum(derivative_time / FILTER_SHARE, self.quick), 0.5 * self.interval)

    def _network(self, rest: FloatArray) -> tuple[FloatArray, ...]:
        """Zero and pole, and those of a second section; not more than 20 apart."""
        spread = np.clip(rest[1], 1.05, MOST_SPREAD)
        if self.structure == "lag":
            return rest[0], rest[0] / spread
        second = (rest[2], rest[2] / np.clip(rest[3], 1.05, MOST_SPREAD)) if self.structure == "lead-lag" else ()
        return rest[0], rest[0] * spread, *second


def can_weight(structure: str) -> bool:
    """Whether a setpoint weight below one leaves the steady state alone."""
    return structure in _WEIGHTED
