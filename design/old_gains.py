"""Whether gains that were chosen before still do on a plant that has been measured anew."""

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from ..ident.fitted import Noise, Plausible
from ..ident.law import Law
from ..ident.plant import Plant
from .design import judged_rows
from .designed import Judged
from .gains import Gains
from .judge import judged_on
from .requirements import ControllerSetting, Limits, Requirements
from .search.drive import with_nominal
from .situation import situation_of

_JUDGED = 1000


@dataclass(frozen=True, eq=False)
class OldGains:
    """What earlier gains do on the new plant.

    Attributes
    ----------
    gains : Gains
    share_meeting : float
        Of the new plausible plants, those on which they meet everything together.
    all_stable, limits_kept : bool
        On every one of them.
    plants_checked : int
    judged : tuple of Judged
    verdict : {"keep", "replace"}
    why : str
    """

    gains: Gains
    share_meeting: float
    all_stable: bool
    limits_kept: bool
    plants_checked: int
    judged: tuple[Judged, ...]
    verdict: Literal["keep", "replace"]
    why: str


def judge_old_gains(
    gains: Gains,
    nominal: Plant,
    plausible: Plausible,
    *,
    operating_command: float,
    operating_response: float,
    noise: Noise | None,
    requirements: Requirements,
    limits: Limits,
    setting: ControllerSetting,
    law: Law | None = None,
) -> OldGains:
    """Hold the old gains against the requirements on plants that the new records leave plausible.

    Size decides, not significance: a plant may have changed beyond doubt and the gains still do, or not measurably and
    they don't.

    Parameters
    ----------
    law : Law, optional
        The difference equation as it was printed, where the update interval is still the same.
    """
    situation = situation_of(
        operating_command=operating_command,
        operating_response=operating_response,
        noise=noise,
        requirements=requirements,
        limits=limits,
        setting=setting,
    )
    count = len(plausible.plants)
    some = plausible.take(np.unique(np.linspace(0, count - 1, min(count, _JUDGED)).astype(int)).tolist())
    known = law if law is not None and abs(law.update_interval / setting.update_interval - 1.0) < 1e-9 else None
    verdicts = judged_on(gains, with_nominal(nominal, some, situation), situation, law=known)
    fitted, others = verdicts.take(slice(0, 1)), verdicts.take(slice(1, None))
    rows = judged_rows(fitted, others, situation)
    stable, kept = bool(others.stable.all()), bool(others.limits_kept.all())
    wanted = requirements.confidence
    enough = stable and kept and others.share_meeting >= wanted
    found = OldGains(gains, others.share_meeting, stable, kept, int(others.stable.size), rows, "keep", "")
    return replace(found, verdict="keep" if enough else "replace", why=_why(found, wanted))


def _why(found: OldGains, wanted: float) -> str:
    share = f"{100.0 * np.floor(1000.0 * found.share_meeting) / 1000.0:.1f} %"
    asked = f"{100 * wanted:g} % asked"
    text = f"the old gains meet everything on {share} of {found.plants_checked} plausible plants ({asked})"
    failing = [row.requirement.name.replace("_", " ") for row in found.judged if not row.met]
    if failing:
        text += f"; not met at that share: {', '.join(failing)}"
    if not found.all_stable:
        text += "; THEY ARE UNSTABLE ON AT LEAST ONE OF THEM"
    elif not found.limits_kept:
        text += "; A LIMIT OF THE RESPONSE IS PASSED ON AT LEAST ONE OF THEM"
    return text
