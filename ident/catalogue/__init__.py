"""The structures a plant may have: one file each, with its formula, its parameters and their bounds."""

from .drive_with_friction import DRIVE_WITH_FRICTION
from .integrator import INTEGRATOR
from .integrator_with_lag import INTEGRATOR_WITH_LAG
from .lag import LAG
from .resonance import RESONANCE
from .structure import Named, Shape, Structure
from .two_lags import TWO_LAGS

CATALOGUE: tuple[Structure, ...] = (LAG, TWO_LAGS, RESONANCE, INTEGRATOR, INTEGRATOR_WITH_LAG, DRIVE_WITH_FRICTION)

__all__ = [
    "CATALOGUE",
    "DRIVE_WITH_FRICTION",
    "INTEGRATOR",
    "INTEGRATOR_WITH_LAG",
    "LAG",
    "RESONANCE",
    "TWO_LAGS",
    "Named",
    "Shape",
    "Structure",
]
