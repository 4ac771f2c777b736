"""The chosen point of the locus: a closed-loop pole, and K from the magnitude condition there."""

from dataclasses import dataclass

import numpy as np

from ..ident.plant import Plant
from .compensator import loop_gain, loop_gain_unit, open_loop
from .designed import GainInterval, Selection
from .discretise import columns_of, law_columns
from .gain_sets import fitted_sets
from .gains import Gains
from .locus.condition import LocusError, angle_residual_deg, loop_gain_at, point_on_locus
from .locus.roots import closed_loop_roots
from .requirements import ControllerSetting
from .sampled.poles import poles_of, starting_poles
from .sets.plausible import plausible_sets
from .values import Bench

_AGREE = 1e-6  # K of the gains and K of the magnitude condition agree to this share


class SelectionError(LocusError):
    """No pole of the exact locus belongs to these gains."""


def sampled_poles(gains: Gains, bench: Bench) -> list[complex]:
    """Sampled poles of plant 0, ln z / T, 1/s: first the slowest that shows in the response, then all by pace."""
    zero = np.zeros(1, dtype=int)
    law = law_columns(columns_of([gains]), bench.exact.interval)
    starts = starting_poles(bench.coarse, zero, law_columns(columns_of([gains]), bench.coarse.interval))
    poles = poles_of(bench.spectra, zero, law, starts, bench.exact.delay[:1])
    known = poles.s[:, 0][np.isfinite(poles.s[:, 0])]
    if not known.size:
        return []
    others = known[np.argsort(-known.real)]
    return [poles.dominant(0), *(complex(s.real, abs(s.imag)) for s in others)]


def point_at(gains: Gains, plant: Plant, setting: ControllerSetting, near: complex) -> tuple[complex, float, float]:
    """The point of the continuous locus beside `near`: pole, K = 1/|G_L(pole)|, angle residual in deg.

    Raises
    ------
    SelectionError
        The K of the magnitude condition there is not that of the gains.
    """
    loop = open_loop(gains, plant, setting)
    wanted = abs(loop_gain(gains))
    pole = complex(point_on_locus(loop, wanted, near))
    found = float(loop_gain_at(loop, pole))
    if abs(found / wanted - 1.0) > _AGREE:
        raise SelectionError(
            "the gain of the magnitude condition is not that of the gains",
            where=f"locus at {pole:.6g} 1/s",
            found=f"K = {found:.9g}",
            expected=f"K = {wanted:.9g}",
            advice="report this with the rig file: the pole search went astray",
        )
    return pole, found, abs(float(angle_residual_deg(loop, pole)))


def _first_on_locus(gains: Gains, plant: Plant, bench: Bench) -> tuple[complex, tuple[complex, float, float]]:
    """The first sampled pole that has its counterpart on the continuous locus, and that point."""
    setting = bench.situation.setting
    sampled = sampled_poles(gains, bench)
    for near in sampled:
        try:
            return near, point_at(gains, plant, setting, near)
        except LocusError:
            continue
    # where sampling moves every pole far, the two pictures share no neighbourhood: the nearest of all roots then
    roots = closed_loop_roots(open_loop(gains, plant, setting), abs(loop_gain(gains)))
    upper = roots[roots.imag >= 0.0]
    if not upper.size:
        raise SelectionError(
            "no pole of the continuous locus was reached",
            where="locus",
            found=f"gains {gains}",
            advice="report this with the rig file: the pole search went astray",
        )
    near = sampled[0] if sampled else complex(upper[0])
    return near, point_at(gains, plant, setting, complex(upper[np.argmin(np.abs(upper - near))]))


def select(gains: Gains, plant: Plant, exact: Bench, units: tuple[str, str]) -> Selection:
    """The point of the locus; its intervals are those of `intervals_of_gain`, and empty here.

    Parameters
    ----------
    exact : Bench
        Plant 0 is the fitted one; run with the very law.
    units : (command unit, response unit)
    """
    sampled, (pole, chosen, residual) = _first_on_locus(gains, plant, exact)
    sampled = pole if exact.situation.setting.continuous else sampled
    return Selection(chosen, loop_gain_unit(gains.structure, *units), pole, residual, sampled, (), (), ())


@dataclass(frozen=True)
class Intervals:
    """The gains that hold, as `Selection` has them.

    Attributes
    ----------
    together, plausible : tuple of GainInterval
    rows : tuple of (name, intervals)
    """

    together: tuple[GainInterval, ...]
    plausible: tuple[GainInterval, ...]
    rows: tuple[tuple[str, tuple[GainInterval, ...]], ...]


def intervals_of_gain(gains: Gains, plant: Plant, exact: Bench, quick: Bench) -> Intervals:
    """Every loop gain that holds, zeros fixed; by far the dearest part of a selection.

    Parameters
    ----------
    exact : Bench
        As above.
    quick : Bench
        Plausible plants for the intervals of the share.
    """
    _, (_, chosen, _) = _first_on_locus(gains, plant, exact)
    columns = columns_of([gains])
    setting = exact.situation.setting
    loop = open_loop(gains, plant, setting) if setting.continuous else None
    fitted = fitted_sets(exact, columns, chosen, loop)
    wide = plausible_sets(quick, columns, chosen, fitted.together, 100) if fitted.together else ()
    return Intervals(fitted.together, wide, fitted.rows)
