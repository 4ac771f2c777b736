"""The structures a plant may have: one file each, with its formula, its parameters and their bounds."""

from .integrator import INTEGRATOR
from .integrator_with_lag import INTEGRATOR_WITH_LAG
from .lag import LAG
from .resonance import RESONANCE
from .structure import Named, Shape, Structure
from .two_lags import TWO_LAGS

CATALOGUE: tuple[Structure, ...] = (LAG, TWO_LAGS, RESONANCE, INTEGRATOR, INTEGRATOR_WITH_LAG)

__all__ = [
    "CATALOGUE",
    "INTEGRATOR",
    "INTEGRATOR_WITH_LAG",
    "LAG",
    "RESONANCE",
    "TWO_LAGS",
    "Named",
    "Shape",
    "Structure",
]
