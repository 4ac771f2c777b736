"""I alone vanishes exactly at half the sample rate: no edge of the stable gains is there, none is lost elsewhere."""

import numpy as np
import pytest
from gainwright.design.discretise import columns_of
from gainwright.design.gain_sets import fitted_sets
from gainwright.design.gains import Gains
from gainwright.design.requirements import ControllerSetting, Limits, Requirements
from gainwright.design.situation import situation_of
from gainwright.design.values import bench_of
from gainwright.ident.fitted import Plausible
from gainwright.ident.plant import Plant
from scipy.optimize import brentq
from scipy.signal import cont2discrete


@pytest.mark.parametrize("bottom", [(0.5, 1.5, 1.0), (1.0, 0.4, 1.0)])
@pytest.mark.parametrize(("interval", "late", "sign"), [(0.1, 0, 1.0), (0.2, 0, 1.0), (0.1, 1, -1.0), (0.2, 1, -1.0)])
def test_stable_gains_of_i_alone_end_where_the_largest_pole_leaves_the_unit_circle(bottom, interval, late, sign):
    """(z - 1) A(z) z^late + K T/2 (z + 1) B(z) from scipy's zero-order hold; a warning would fail the test too."""
    plant = Plant((2.0 * sign,), bottom, late * interval)
    situation = situation_of(
        operating_command=0.0, operating_response=0.0, noise=None, requirements=Requirements((), test_step=1.0),
        limits=Limits(), setting=ControllerSetting(interval),
    ).without_floors()  # fmt: skip
    bench = bench_of(Plausible((plant,), np.zeros(1), np.zeros(1)), situation, 300 * interval, points=20)
    found = fitted_sets(bench, columns_of([Gains("I", 0.0, 0.3 * sign)]), 0.3).together

    top, below, _ = cont2discrete(([2.0], bottom), interval, "zoh")
    below = np.concatenate([np.polymul([1.0, -1.0], below), np.zeros(late)])

    def beyond(gain: float) -> float:
        closed = np.polyadd(below, 0.5 * gain * interval * np.polymul([1.0, 1.0], top[0]))
        return float(np.max(np.abs(np.roots(closed)))) - 1.0

    edge = brentq(beyond, 1e-2, 20.0, xtol=1e-12)
    assert len(found) == 1
    assert found[0][0] == 0.0
    assert found[0][1] == pytest.approx(edge, rel=1e-8)
