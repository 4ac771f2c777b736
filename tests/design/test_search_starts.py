"""The search raises more than its best start: the best start may lie below a lower top."""

import numpy as np
from gainwright.design.design import design_gains
from gainwright.design.requirements import ControllerSetting, Limits, Requirement, Requirements
from gainwright.design.search import polish
from gainwright.ident.fitted import Plausible
from gainwright.ident.plant import Plant

ITEMS = (
    Requirement("overshoot", 0.188, "at_most", "%", 100.0),
    Requirement("settling_time", 3.47, "at_most", "s", band=0.02),
    Requirement("peak_sensitivity", 2.12, "at_most"),
)

GAIN, DEAD, SLOW, QUICK = 2.092, 0.5805, 0.9104, 0.6687  # mm/V and s


def lags(gain, dead_time, slow, quick):
    return Plant((gain,), tuple(np.polymul([slow, 1.0], [quick, 1.0])), dead_time)


def designed():
    """Two lags with dead time, as a fit leaves them: dead time and quick lag uncertain, their sum far less so."""
    rng = np.random.default_rng(2)
    moved = 0.02 * rng.standard_normal(200)
    plants = tuple(lags(GAIN, DEAD * (1.0 + m), SLOW, QUICK - DEAD * m) for m in moved)
    return design_gains(
        lags(GAIN, DEAD, SLOW, QUICK), Plausible(plants, np.zeros(200), np.zeros(200)), operating_command=0.0,
        operating_response=0.0, noise=None, requirements=Requirements(ITEMS, 1.0),
        limits=Limits(-np.inf, np.inf, np.inf, -np.inf, np.inf, np.inf),
        setting=ControllerSetting(0.079, structures=("PID",)), command_unit="V", response_unit="mm",
    )  # fmt: skip


def test_a_second_top_is_found_where_the_best_start_leads_to_a_lower_one(monkeypatch):
    """The gains of a judge's own tuning meet the set with a fifth to spare; from the best start alone it is missed."""
    found = designed()
    assert found.reasons == ()
    assert found.gains.derivative > 0.1
    monkeypatch.setattr(polish, "_SHORT", -100.0)
    assert designed().reasons != ()
