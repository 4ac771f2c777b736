"""The structures a plant may have: one file each, with its formula, its parameters and their bounds."""

from .double_integrator import DOUBLE_INTEGRATOR
from .double_integrator_with_lag import DOUBLE_INTEGRATOR_WITH_LAG
from .drive_with_friction import DRIVE_WITH_FRICTION
from .gain import GAIN
from .integrator import INTEGRATOR
from .integrator_with_lag import INTEGRATOR_WITH_LAG
from .lag import LAG
from .lag_with_zero import LAG_WITH_ZERO
from .resonance import RESONANCE
from .resonance_behind_lag import RESONANCE_BEHIND_LAG
from .resonance_with_zero import RESONANCE_WITH_ZERO
from .structure import Named, Shape, Structure
from .two_lags import TWO_LAGS
from .two_lags_with_zero import TWO_LAGS_WITH_ZERO
from .two_resonances import TWO_OPPOSED_RESONANCES, TWO_RESONANCES

CATALOGUE: tuple[Structure, ...] = (
    GAIN,
    LAG,
    TWO_LAGS,
    RESONANCE,
    INTEGRATOR,
    INTEGRATOR_WITH_LAG,
    DRIVE_WITH_FRICTION,
    LAG_WITH_ZERO,
    TWO_LAGS_WITH_ZERO,
    RESONANCE_WITH_ZERO,
    RESONANCE_BEHIND_LAG,
    TWO_RESONANCES,
    TWO_OPPOSED_RESONANCES,
    DOUBLE_INTEGRATOR,
    DOUBLE_INTEGRATOR_WITH_LAG,
)

__all__ = [
    "CATALOGUE",
    "DOUBLE_INTEGRATOR",
    "DOUBLE_INTEGRATOR_WITH_LAG",
    "DRIVE_WITH_FRICTION",
    "GAIN",
    "INTEGRATOR",
    "INTEGRATOR_WITH_LAG",
    "LAG",
    "LAG_WITH_ZERO",
    "RESONANCE",
    "RESONANCE_BEHIND_LAG",
    "RESONANCE_WITH_ZERO",
    "TWO_LAGS",
    "TWO_LAGS_WITH_ZERO",
    "TWO_OPPOSED_RESONANCES",
    "TWO_RESONANCES",
    "Named",
    "Shape",
    "Structure",
]
