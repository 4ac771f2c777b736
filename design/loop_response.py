"""The open loop over frequency, on the fitted plant and as a band over the plausible ones, with its margins marked."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from ..ident.fitted import Plausible
from ..ident.plant import ComplexArray, Plant
from ..ident.run import FloatArray
from .discretise import columns_of, law_columns
from .gains import Gains
from .requirements import ControllerSetting
from .sampled.bank import Bank, build_bank
from .sampled.frequency import margins_of, spectra_of
from .sampled.pulse import law_response
from .sweep import Band
from .sweep_gains import inner

_PLANTS = 80
_EVEN = 240  # frequencies beside those that resolve resonances and dead time
_LEAST, _MOST = 0.02, 50.0  # sizes of the loop between which it is shown


@dataclass(frozen=True)
class Mark:
    """Where a margin is read off.

    Attributes
    ----------
    frequency : float, rad/s
    value : float
        dB or deg; of the sensitivity a ratio.
    """

    frequency: float
    value: float


@dataclass(frozen=True, eq=False)
class LoopResponse:
    """L = K G_L of the sampled loop, f frequencies up to half the sample rate.

    Attributes
    ----------
    frequency : (f,) array, rad/s
    size, turn, sensitivity : (f,) arrays
        |L|; angle of L above -180 deg, in deg, not wrapped; |1/(1 + L)|.
    sizes, turns, sensitivities : Band of (f,) arrays
        The same for 95 % of the plausible plants at each frequency.
    gain_margin, phase_margin : Mark or None
        The least one, of the fitted plant; None where nothing is crossed.
    peak : Mark
        Largest sensitivity.
    """

    frequency: FloatArray
    size: FloatArray
    turn: FloatArray
    sensitivity: FloatArray
    sizes: Band
    turns: Band
    sensitivities: Band
    gain_margin: Mark | None
    phase_margin: Mark | None
    peak: Mark


def loop_response(gains: Gains, nominal: Plant, plausible: Plausible, setting: ControllerSetting) -> LoopResponse:
    """Evaluate the exact sampled loop from where it is large to where it is small.

    Examples
    --------
    An integrator under P = 1/s, slow against its update interval, turns by -90 deg and crosses at 1 rad/s.

    >>> plant = Plant((1.0,), (1.0, 0.0))
    >>> alone = Plausible((plant,), np.zeros(1), np.zeros(1))
    >>> found = loop_response(Gains("P", 1.0), plant, alone, ControllerSetting(1e-3))
    >>> round(found.phase_margin.frequency, 3), round(found.phase_margin.value, 1)
    (1.0, 90.0)
    """
    total = len(plausible.plants)
    some = plausible.take(np.linspace(0, total - 1, min(total, _PLANTS)).astype(int).tolist()) if total else plausible
    frequency, loops = _loops(gains, (nominal, *some.plants), setting)
    size, turn = np.abs(loops), _turns(loops)
    sensitivity = 1.0 / np.abs(1.0 + loops)
    shown = _shown(size[:, 0])
    many = slice(1, None) if total else slice(0, 1)
    sizes, turns, sensitivities = (Band(*inner(values[shown, many])) for values in (size, turn, sensitivity))
    gain, phase, peak = _marks(gains, nominal, setting, frequency, loops[:, 0])
    return LoopResponse(
        frequency[shown], size[shown, 0], turn[shown, 0], sensitivity[shown, 0], sizes, turns, sensitivities, gain,
        phase, peak,
    )  # fmt: skip


def _loops(gains: Gains, plants: Sequence[Plant], setting: ControllerSetting) -> tuple[FloatArray, ComplexArray]:
    """Frequencies of the fitted plant's grid and L of every plant there."""
    bank = _bank(plants, setting)
    spectra = spectra_of(bank, 300)
    grid = spectra.frequency[:, 0]
    frequency = np.unique(np.concatenate([grid, np.geomspace(grid[0], grid[-1], _EVEN)]))
    angle = np.repeat(frequency[:, None] * bank.interval, len(plants), axis=1)
    z = np.asarray(np.exp(1j * angle), dtype=np.complex128)
    law = law_columns(columns_of([gains]), bank.interval).take(np.zeros(len(plants), dtype=int))
    with np.errstate(all="ignore"):
        loops = spectra.pulse.at(z, np.arange(len(plants))) * law_response(law, z)
    return frequency[:-1], np.asarray(loops[:-1])


def _bank(plants: Sequence[Plant], setting: ControllerSetting) -> Bank:
    return build_bank(
        plants,
        setting.update_interval,
        computation_delay=setting.computation_delay,
        filter_time=setting.response_filter_time,
        points=1,
    )


def _turns(loops: ComplexArray) -> FloatArray:
    """Angle above -180 deg, followed from the lowest frequency on, where it is taken nearest to -180 deg below zero."""
    angle = np.unwrap(np.angle(loops), axis=0)
    first = angle[0]
    angle = angle - 2.0 * np.pi * np.ceil(first / (2.0 * np.pi) - 1e-9)
    return np.asarray(np.degrees(angle) + 180.0)


def _shown(size: FloatArray) -> slice:
    """From the last frequency at which the loop is still very large to where it stays very small."""
    large, small = np.flatnonzero(size > _MOST), np.flatnonzero(size > _LEAST)
    begin = int(large[-1]) if large.size else 0
    begin = begin if begin < size.size // 2 or not small.size else 0
    end = int(small[-1]) + 2 if small.size else size.size
    return slice(min(begin, size.size - 3), max(end, begin + 3))


def _marks(
    gains: Gains, nominal: Plant, setting: ControllerSetting, frequency: FloatArray, loop: ComplexArray
) -> tuple[Mark | None, Mark | None, Mark]:
    """The exact margins, at the frequency of the crossing that gives them."""
    bank = _bank((nominal,), setting)
    law = law_columns(columns_of([gains]), bank.interval)
    exact = margins_of(spectra_of(bank, 300), np.zeros(1, dtype=int), law)
    size, sensitivity = np.log(np.abs(loop)), 1.0 / np.abs(1.0 + loop)
    gain = _crossing(frequency, loop.imag, lambda i: _gain_cost(loop, i))
    phase = _crossing(frequency, size, lambda i: float(abs(np.angle(-loop[i]))))
    return (
        None if gain is None or not np.isfinite(exact.gain[0]) else Mark(gain, float(exact.gain[0])),
        None if phase is None else Mark(phase, float(exact.phase[0])),
        Mark(float(frequency[sensitivity.argmax()]), float(exact.sensitivity[0])),
    )


def _gain_cost(loop: ComplexArray, i: int) -> float:
    """How far in gain the crossing of the real axis is from -1; none on the right of zero."""
    return float(abs(np.log(abs(loop.real[i])))) if loop.real[i] < 0.0 else np.inf


def _crossing(frequency: FloatArray, values: FloatArray, cost: Callable[[int], float]) -> float | None:
    """Frequency, between grid points, of the sign change of least cost."""
    places = np.flatnonzero(values[1:] * values[:-1] < 0.0)
    if not places.size:
        return None
    best = min(places.tolist(), key=cost)
    if not np.isfinite(cost(best)):
        return None
    share = values[best] / (values[best] - values[best + 1])
    return float(frequency[best] * (frequency[best + 1] / frequency[best]) ** share)
