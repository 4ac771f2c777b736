"""From plausible plants to gains: search, round, check as printed, and say what they do."""

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from ..ident.fitted import Noise, Plausible
from ..ident.plant import Plant
from ..ident.run import FloatArray
from . import trajectories
from .aside import HERE, Aside, Pending
from .continuous import standing_in
from .designed import Design, Judged, Trajectory
from .discretise import gains_of, law_from_gains
from .gains import Gains
from .horizon import SEARCHED, first_horizon
from .hunting import hunting
from .judge import PlantVerdicts, judged_on
from .limits import judged_limits, limit_cautions
from .reasons import impossible, reasons_of
from .requirements import ControllerSetting, Limits, Requirements
from .search.candidates import Space
from .search.drive import Search, again, item_slacks, search, with_nominal
from .search.polish import Found
from .search.structures import plan_for
from .selection import Intervals, intervals_of_gain, select
from .situation import Situation, situation_of
from .slow_controller import slow_controller
from .values import Bench, bench_of

_CHECKED = 1000
_DIGITS = 5
_FINE = 12_000  # samples up to which the gain sets are found with the very law
_REPAIRS = 2
_MOST_POINTS = 64  # between two samples
SETS = "the set of gains that hold"  # the stage in words
_SHARP = 6_000  # points over the horizon between which the fitted plant's response is read for its gain sets


@dataclass(frozen=True, eq=False)
class Begun:
    """Gains that are chosen and checked, while the gain sets may still be worked out.

    Attributes
    ----------
    design : Design
        Whole but for the intervals of its selection.
    sets : Pending of Intervals
    """

    design: Design
    sets: Pending[Intervals]

    def finished(self) -> Design:
        """The whole design."""
        found = self.sets.result()
        selection = replace(
            self.design.selection,
            intervals=found.together,
            intervals_plausible=found.plausible,
            rows=found.rows,
        )
        return replace(self.design, selection=selection)


def design_gains(
    nominal: Plant,
    plausible: Plausible,
    *,
    operating_command: float,
    operating_response: float,
    noise: Noise | None,
    requirements: Requirements,
    limits: Limits,
    setting: ControllerSetting,
    command_unit: str,
    response_unit: str,
    progress: Callable[[str, float], None] | None = None,
) -> Design:
    """Find gains that meet the requirements on the share `confidence` of the plausible plants, inside every limit.

    Parameters
    ----------
    nominal : Plant
        The fitted one.
    plausible : Plausible
        The search runs on 200 of them, the check as printed on those it did not use where there are 1,000 of these.
    operating_command, operating_response : float
        Absolute readings from which the law's deviations start.
    noise : Noise or None
        Of the response; needed for `command_noise`.
    command_unit, response_unit : str
        Labels.
    progress : callable, optional
        Told what is being done and the share of it.

    Returns
    -------
    Design
        With `reasons` where something does not hold; then the gains are the best found.

    Raises
    ------
    RequestError
        Only structures are allowed that are not searched yet.
    """
    begun = begin_design(
        nominal,
        plausible,
        operating_command=operating_command,
        operating_response=operating_response,
        noise=noise,
        requirements=requirements,
        limits=limits,
        setting=setting,
        command_unit=command_unit,
        response_unit=response_unit,
        progress=progress,
    )
    (progress or _silent)(SETS, 0.9)
    return begun.finished()


def begin_design(
    nominal: Plant,
    plausible: Plausible,
    *,
    operating_command: float,
    operating_response: float,
    noise: Noise | None,
    requirements: Requirements,
    limits: Limits,
    setting: ControllerSetting,
    command_unit: str,
    response_unit: str,
    progress: Callable[[str, float], None] | None = None,
    aside: Aside = HERE,
) -> Begun:
    """The same, with the gain sets left to `aside`: the gains are known before, and may be used meanwhile.

    Parameters
    ----------
    aside : Aside
        Takes a part of the search, too.
    """
    situation = situation_of(
        operating_command=operating_command,
        operating_response=operating_response,
        noise=noise,
        requirements=requirements,
        limits=limits,
        setting=setting,
    )
    situation = standing_in(situation, nominal)
    unknown = _unknown_noise(situation)
    if unknown:
        situation = situation.without("command_noise")
    say = progress or _silent
    found = search(nominal, plausible, situation, plan_for(nominal, situation), say, aside)
    say("checking the printed gains on plants that the search has not seen", 0.8)
    exact, quick = _benches(found, nominal, plausible, situation)
    gains = rounded(found.found.space, found.found.point)  # more often than not the check lets them stand
    sets = aside.start(intervals_of_gain, gains, nominal, exact, quick)
    checked = _check_and_mend(found, nominal, plausible, situation)
    if checked.gains != gains:
        sets = aside.start(intervals_of_gain, checked.gains, nominal, exact, quick)
    design = _report(checked, found, nominal, plausible, situation, exact, (command_unit, response_unit))
    return Begun(replace(design, reasons=(*unknown, *design.reasons)) if unknown else design, sets)


def _unknown_noise(situation: Situation) -> tuple[str, ...]:
    """What is asked of the noise, when nobody knows it, can't be judged; the search goes on without it."""
    if situation.noise is not None or situation.requirements.find("command_noise") is None:
        return ()
    return ("command noise is asked for, and no record tells the noise of the response: add a held-out run",)


def _silent(_what: str, _share: float) -> None:
    """Nobody listens."""


@dataclass(frozen=True, eq=False)
class _Checked:
    """Rounded gains with their verdicts: on the fitted plant and on the plausible ones."""

    gains: Gains
    found: Found
    slacks: dict[str, float]
    fitted: PlantVerdicts
    verdicts: PlantVerdicts

    @property
    def good(self) -> bool:
        return bool(self.verdicts.stable.all() and self.verdicts.limits_kept.all())

    def rank(self, confidence: float) -> tuple[bool, float]:
        """Safe ones first, then the share that meets everything."""
        return (self.good, min(self.verdicts.share_meeting, confidence))


def _check_and_mend(found: Search, nominal: Plant, plausible: Plausible, situation: Situation) -> _Checked:
    """Check as printed; where that fails, polish again with the failing plants and keep the better."""
    confidence = situation.requirements.confidence
    index = _fresh(found, plausible)
    best = _check(found.found, item_slacks(found.found.scores, found.bench), nominal, plausible, index, situation)
    current = found
    for repair in range(_REPAIRS):
        if best.rank(confidence) >= (True, confidence) or found.found.slack < -0.25:
            break
        failing = index[~(best.verdicts.meets_all & best.verdicts.limits_kept)]
        point, bench = again(current, nominal, plausible, situation, failing, seed=70 + repair)
        current = replace(current, found=point)
        mended = _check(point, item_slacks(point.scores, bench), nominal, plausible, index, situation)
        if mended.rank(confidence) > best.rank(confidence):
            best = mended
        else:
            break
    return best


def _fresh(found: Search, plausible: Plausible) -> FloatArray:
    every = np.arange(len(plausible.plants))
    unseen = np.setdiff1d(every, found.used)
    chosen = unseen if unseen.size >= _CHECKED else every
    return np.asarray(chosen[np.unique(np.linspace(0, chosen.size - 1, min(chosen.size, _CHECKED)).astype(int))])


def _check(
    found: Found,
    slacks: dict[str, float],
    nominal: Plant,
    plausible: Plausible,
    index: FloatArray,
    situation: Situation,
) -> _Checked:
    gains = rounded(found.space, found.point)
    some = with_nominal(nominal, plausible.take(index.tolist()), situation)
    verdicts = judged_on(gains, some, situation)
    return _Checked(gains, found, slacks, verdicts.take(slice(0, 1)), verdicts.take(slice(1, None)))


def rounded(space: Space, point: FloatArray) -> Gains:
    """The gains as they are printed: five significant digits, the setpoint weight two decimals."""
    raw = gains_of(space.gains(point[None]), 0)

    def cut(value: float) -> float:
        return float(f"{value:.{_DIGITS}g}")

    return replace(
        raw,
        proportional=cut(raw.proportional),
        integral=cut(raw.integral),
        derivative=cut(raw.derivative),
        filter_time=cut(raw.filter_time),
        setpoint_weight=round(raw.setpoint_weight, 2),
        zero=None if raw.zero is None else cut(raw.zero),
        pole=None if raw.pole is None else cut(raw.pole),
        second_zero=None if raw.second_zero is None else cut(raw.second_zero),
        second_pole=None if raw.second_pole is None else cut(raw.second_pole),
    )


def _report(
    checked: _Checked,
    found: Search,
    nominal: Plant,
    plausible: Plausible,
    situation: Situation,
    exact: Bench,
    units: tuple[str, str],
) -> Design:
    verdicts = checked.verdicts
    judged = judged_rows(checked.fitted, verdicts, situation)
    limits = judged_limits(verdicts, situation, *units)
    reasons = reasons_of(verdicts, judged, limits, checked.slacks, situation)
    hopeless = impossible(nominal, situation, units) if reasons else []
    clamped = verdicts.clamped > 0.0
    hunts = hunting(checked.gains, nominal, plausible, situation)
    if hunts is not None and reasons:
        reasons = [hunts.reason(units, bool(checked.gains.integral)), *reasons]
    return Design(
        checked.gains,
        law_from_gains(checked.gains, situation.setting.update_interval, situation.clamp),
        select(checked.gains, nominal, exact, units),
        judged,
        limits,
        verdicts.share_meeting,
        int(verdicts.stable.size),
        bool(verdicts.stable.all()),
        bool(verdicts.limits_kept.all()),
        float(np.mean(clamped)),
        float(verdicts.clamped.max(initial=0.0)),
        _trajectory(checked, nominal, plausible, situation),
        found.tried,
        tuple(hopeless + reasons),
        (
            *_cautions(verdicts, nominal, plausible, checked.gains, situation),
            *([] if hunts is None or reasons else [hunts.caution(units, bool(checked.gains.integral))]),
        ),
        continuous=situation.setting.continuous,
    )


def judged_rows(fitted: PlantVerdicts, verdicts: PlantVerdicts, situation: Situation) -> tuple[Judged, ...]:
    """Each requirement: on the fitted plant, within 95 % of the plausible ones, and whether the share meets it."""
    rows = []
    for i, item in enumerate(verdicts.items):
        value = fitted.values.get(item.name, np.array([np.nan]))[0]
        every = verdicts.values.get(item.name, np.array([np.nan]))
        every = np.where(np.isnan(every), np.inf, every)
        order = np.sort(every)
        low, high = order[int(0.025 * (order.size - 1))], order[int(np.ceil(0.975 * (order.size - 1)))]
        met = float(np.mean(verdicts.met(item))) >= situation.requirements.confidence
        rows.append(Judged(item, _known(value), _known(low), _known(high), met, floor=i >= verdicts.stated))
    return tuple(rows)


def _known(value: float) -> float | None:
    return float(value) if np.isfinite(value) else None


def _benches(found: Search, nominal: Plant, plausible: Plausible, situation: Situation) -> tuple[Bench, Bench]:
    """The fitted plant under the very law, and the plausible ones as the search has them; floors are not asked.

    Friction holds both: the fitted plant has the median of it.
    """
    asked = situation.without_floors()
    horizon = first_horizon(nominal, situation)
    alone = with_nominal(nominal, plausible, situation).take([0])
    fine = horizon <= _FINE * situation.setting.update_interval
    samples = horizon / situation.setting.update_interval
    smooth = not np.any(plausible.stiction > 0.0)
    points = int(np.clip(_SHARP / samples, 2, _MOST_POINTS)) if fine and smooth else 0
    exact = bench_of(alone, asked, horizon, stand_in=not fine, points=points)
    if smooth:
        return exact, replace(found.bench, situation=asked)
    some, searched = found.bench.plausible, first_horizon(nominal, situation, SEARCHED)
    return exact, replace(bench_of(some, asked, searched, stand_in=True, grid=90), cautious=True)


def _trajectory(checked: _Checked, nominal: Plant, plausible: Plausible, situation: Situation) -> Trajectory | None:
    if situation.step == 0.0:
        return None
    horizon = 0.5 * min(checked.verdicts.horizon, 2.0 * first_horizon(nominal, situation))
    return trajectories.trajectory(checked.gains, nominal, plausible, situation, horizon)


def _cautions(
    verdicts: PlantVerdicts, nominal: Plant, plausible: Plausible, gains: Gains, situation: Situation
) -> tuple[str, ...]:
    said = [*limit_cautions(situation), *slow_controller(gains, nominal, situation.setting)]
    wanted = first_horizon(nominal, situation)
    if situation.step and verdicts.horizon < 0.99 * wanted:
        said.append(
            f"the update interval is so short that only {verdicts.horizon:.3g} s of each step were watched, "
            f"not the {wanted:.3g} s of five settling times"
        )
    clamped = float(np.mean(verdicts.clamped > 0.0))
    if clamped > 0.0:
        said.append(
            f"the command is limited during the test step on {100 * clamped:.0f} % of the plausible plants, "
            f"for up to {verdicts.clamped.max():.3g} s; the requirements are judged with that"
        )
    if gains.integral and np.median(plausible.stiction) > 0.0:
        said.append("integral action against friction can hunt slowly round the setpoint; watch for it at rest")
    return tuple(said)
