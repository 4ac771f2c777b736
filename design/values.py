"""What gains do on plants: every requirement's value and every extreme, a column for each pair of plant and law."""

from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from ..ident.fitted import Plausible
from ..ident.run import FloatArray
from .continuous import half_held
from .discretise import GainColumns, LawColumns, law_columns
from .sampled.bank import Bank, IndexArray, build_bank
from .sampled.frequency import Spectra, command_noise, margins_of, spectra_of
from .sampled.poles import poles_of, starting_poles
from .sampled.pulse import law_response, setpoint_response
from .situation import Situation
from .stepped import Stepped, Watch

_MOST_ROOM = 2e7  # numbers of one response table; larger jobs are done in pieces
_STAND_IN = 300  # samples of the stand-in over the search's horizon
_ROTATION = 0.35  # rad; turn of a resonance in one sample of the stand-in, at most
_RAMP = 1e-3  # of the lowest grid frequency: where the limit z -> 1 of the ramp error is taken


@dataclass(frozen=True, eq=False)
class Bench:
    """Plants made ready: the exact loop for stability and margins, and the one that is run in time.

    Attributes
    ----------
    plausible : Plausible
    situation : Situation
    exact : Bank
    spectra : Spectra
    running : Bank
        The exact bank, or a stand-in of longer interval and the same total delay for the search.
    samples : int
        Of `running`, over the horizon.
    coarse : Bank
        Few enough samples in the dead time that eigenvalues can start the search for poles.
    cautious : bool
        Settling is judged away from the cliff where one more swing just leaves the band.
    graded : bool
        Whether settling, rise and recovery are graded too, see `Values.graded`; then nobody asks about limits, and no
        extremes are read.
    """

    plausible: Plausible
    situation: Situation
    exact: Bank
    spectra: Spectra
    running: Bank
    samples: int
    coarse: Bank
    cautious: bool = False
    graded: bool = False


@dataclass(frozen=True, eq=False)
class Values:
    """(c,) arrays of one evaluation.

    Attributes
    ----------
    stable : array of bool
    of : dict of requirement name to array, base units; inf: never
    extremes : dict of limit name to array, absolute readings; rates as magnitudes
    clamped : array, s
        How long the clamp acted during the test step.
    settled : array, s
        Settling time into 2 %, whether asked for or not; inf: not within the horizon; NaN without a step.
    upper : array
        Least factor above one on the gain that makes the loop unstable.
    graded : dict of requirement name to array
        For times, which jump as the gain changes: how far beyond its band the response is when time is up, a share of
        the band or step; at most 0 where the requirement holds, and without jumps.
    """

    stable: NDArray[np.bool_]
    of: dict[str, FloatArray]
    extremes: dict[str, FloatArray]
    clamped: FloatArray
    settled: FloatArray
    upper: FloatArray
    graded: dict[str, FloatArray] = field(default_factory=dict)


def bench_of(
    plausible: Plausible,
    situation: Situation,
    horizon: float,
    *,
    stand_in: bool = False,
    smooth: bool = False,
    most: int = 20_000,
    grid: int = 160,
    points: int = 0,
) -> Bench:
    """Discretise the plants for a horizon in s.

    For the search only, `stand_in` allows a coarser interval and `smooth` runs drives as if nothing held them (their
    steady error still counts). `points` looked at in each sample; 0: as many as the horizon bears.
    """
    setting = situation.setting
    if not points and np.any(plausible.stiction > 0.0):
        points = 2  # with the parabola at the peak enough, and friction is the dearest thing to run
    exact = _bank(plausible, situation, setting.update_interval, points or _points(horizon / setting.update_interval))
    least = float(exact.delay.min())
    running = exact
    if stand_in and horizon > 1.2 * _STAND_IN * setting.update_interval:
        longest = horizon if setting.continuous else setting.update_interval + 2.0 * least + 0.002 * horizon
        longest = max(min(longest, _ROTATION / _swing(exact)), setting.update_interval)
        running = _bank(plausible, situation, min(horizon / _STAND_IN, longest), points or 4)
    if smooth:
        running = replace(running, drives=None, valves=None)
    samples = int(min(np.ceil(horizon / running.interval) + 1, most))
    coarse = _coarse(plausible, situation, exact)
    slow = 0.2 / horizon if setting.continuous else np.inf
    return Bench(plausible, situation, exact, spectra_of(exact, grid, slow), running, samples, coarse)


def _bank(plausible: Plausible, situation: Situation, interval: float, points: int) -> Bank:
    """Sampling at another interval keeps the sum of computation delay and half the hold."""
    setting = situation.setting
    return build_bank(
        plausible.plants,
        interval,
        computation_delay=half_held(setting, interval),
        filter_time=setting.response_filter_time,
        points=points,
        stiction=plausible.stiction,
        valves=plausible.valves,
        curves=plausible.curves,
        predict=setting.continuous,
    )


def _swing(bank: Bank) -> float:
    """Largest natural frequency among lightly damped pole pairs, rad/s; next to nothing where there is none."""
    light = (bank.poles.imag > 0.0) & (np.abs(bank.poles.real) < 0.4 * np.abs(bank.poles))
    return float(np.abs(np.where(light, bank.poles, 0.0)).max(initial=1e-300))


def _points(samples: float) -> int:
    return 8 if samples < 300 else 4 if samples < 3000 else 2


def _coarse(plausible: Plausible, situation: Situation, exact: Bank) -> Bank:
    if exact.lag.max() <= 8:
        return exact
    return _bank(plausible, situation, float(exact.delay.max()) / 6, 1)


def values_of(
    bench: Bench,
    which: IndexArray,
    gains: GainColumns,
    *,
    refine: bool = True,
    law: LawColumns | None = None,
    watch: Watch | None = None,
) -> Values:
    """Judge gains[i] on plant which[i].

    Parameters
    ----------
    refine : bool
        Refine margins on the exact loop; else interpolate on the grid.
    law : LawColumns, optional
        Coefficients to use instead of those made from the gains (a law given from outside).
    watch : callable, optional
        Given the stable columns' indices, their rest before the test step and their history; only for jobs so small
        that they are done in one piece.
    """
    pieces = int(np.ceil(which.size * bench.samples * bench.running.points / _MOST_ROOM))
    if pieces > 1:
        parts = np.array_split(np.arange(which.size), pieces)
        given = [None if law is None else law.take(part) for part in parts]
        rows = [
            values_of(bench, which[part], gains.take(part), refine=refine, law=one)
            for part, one in zip(parts, given, strict=True)
        ]
        return _joined(rows)
    exact = law_columns(gains, bench.exact.interval) if law is None else law
    running = exact if bench.running is bench.exact else law_columns(gains, bench.running.interval)
    margins = margins_of(bench.spectra, which, exact, exact=refine)
    of: dict[str, FloatArray] = {
        "gain_margin": margins.gain,
        "phase_margin": margins.phase,
        "peak_sensitivity": margins.sensitivity,
    }
    of |= _linear_values(bench, which, exact, margins.stable)
    stepped = Stepped(bench, which, running, margins.stable, watch)
    of |= stepped.values
    return Values(margins.stable, of, stepped.extremes, stepped.clamped, stepped.settled, margins.upper, stepped.graded)


def _joined(parts: list[Values]) -> Values:
    """Columns side by side again."""

    def beside(name: str) -> FloatArray:
        return np.concatenate([getattr(part, name) for part in parts])

    def beside_by_name(name: str) -> dict[str, FloatArray]:
        return {key: np.concatenate([getattr(p, name)[key] for p in parts]) for key in getattr(parts[0], name)}

    stable = np.concatenate([part.stable for part in parts])
    return Values(
        stable,
        beside_by_name("of"),
        beside_by_name("extremes"),
        beside("clamped"),
        beside("settled"),
        beside("upper"),
        beside_by_name("graded"),
    )


def _linear_values(
    bench: Bench, which: IndexArray, law: LawColumns, stable: NDArray[np.bool_]
) -> dict[str, FloatArray]:
    """Command noise, damping ratio and ramp error: of the loop without its clamp."""
    situation, found = bench.situation, {}
    if situation.asks(("command_noise",)) and situation.noise is not None:
        filter_time = situation.setting.response_filter_time
        found["command_noise"] = command_noise(bench.spectra, which, law, situation.noise, filter_time)
    if situation.asks(("damping_ratio",)):
        found["damping_ratio"] = _damping(bench, which, law, stable)
    ramp = situation.requirements.find("ramp_error")
    if ramp is not None:
        found["ramp_error"] = abs(ramp.ramp or 0.0) * following_time(bench.spectra, which, law)
    return found


def _damping(bench: Bench, which: IndexArray, law: LawColumns, stable: NDArray[np.bool_]) -> FloatArray:
    ratio = np.full(which.size, -1.0)
    chosen = np.flatnonzero(stable)
    if chosen.size:
        part = law.take(chosen)
        starts = starting_poles(bench.coarse, which[chosen], part)
        delay = bench.exact.delay[which[chosen]]
        ratio[chosen] = poles_of(bench.spectra, which[chosen], part, starts, delay).damping
    return ratio


def following_time(spectra: Spectra, which: IndexArray, law: LawColumns) -> FloatArray:
    """(c,) steady lag behind a ramp, s: limit of (1 - y/r) T/(z - 1) as z -> 1; inf without an integral."""
    lags = []
    for share in (_RAMP, 0.5 * _RAMP):
        near = 1.0 + share * spectra.slow[which] * spectra.interval
        z = near.astype(np.complex128)
        plant = spectra.pulse.at(z, which)
        tracked = setpoint_response(law, z) * plant / (1.0 + law_response(law, z) * plant)
        lags.append((1.0 - tracked.real) * spectra.interval / (near - 1.0))
    first, second = lags
    steady = np.abs(2.0 * second - first)
    growing = np.abs(second) > 1.7 * np.abs(first)
    return np.where(growing & (steady > 1e3 * spectra.interval), np.inf, steady)
