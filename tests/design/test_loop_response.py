"""The loop over frequency against closed forms of an integrator with dead time."""

import numpy as np
import pytest
from gainwright.design.gains import Gains
from gainwright.design.loop_response import loop_response
from gainwright.design.requirements import ControllerSetting
from gainwright.ident.fitted import Plausible
from gainwright.ident.plant import Plant

GAIN, DEAD, T, DELAY = 2.0, 0.10, 1e-3, 0.004  # 1/s with P = 1; s; s; s
WHOLE = DEAD + DELAY + T / 2  # the hold delays by half an interval; its size errs by (w T)^2/24 < 1e-5 here


@pytest.fixture(scope="module")
def found():
    """P = 1 on K/s exp(-s L), and 41 plants whose gains spread evenly from 0.8 K to 1.2 K."""
    plants = tuple(Plant((GAIN * share,), (1.0, 0.0), DEAD) for share in np.linspace(0.8, 1.2, 41))
    many = Plausible(plants, np.zeros(41), np.zeros(41))
    return loop_response(Gains("P", 1.0), Plant((GAIN,), (1.0, 0.0), DEAD), many, ControllerSetting(T, DELAY))


def test_size_and_angle_are_those_of_the_integrator(found):
    """|L| = K/w and angle above -180 deg = 90 deg - w (L + delay + T/2); exact for the sampled loop to (w T)^2/24."""
    slow = found.frequency < 60.0
    w = found.frequency[slow]
    assert w.size > 100
    assert found.size[slow] == pytest.approx(GAIN / w, rel=2e-4)
    assert found.turn[slow] == pytest.approx(90.0 - np.degrees(w * WHOLE), abs=0.05)


def test_the_margins_stand_where_the_closed_form_has_them(found):
    """Phase margin at w = K, gain margin at w = pi/2/(L + delay + T/2): 20 log10(w/K)."""
    turning = np.pi / 2 / WHOLE
    assert found.phase_margin.frequency == pytest.approx(GAIN, rel=1e-3)
    assert found.phase_margin.value == pytest.approx(90.0 - np.degrees(GAIN * WHOLE), abs=0.01)
    assert found.gain_margin.frequency == pytest.approx(turning, rel=1e-3)
    assert found.gain_margin.value == pytest.approx(20.0 * np.log10(turning / GAIN), abs=0.01)


def test_the_peak_is_the_largest_of_one_over_one_plus_l(found):
    """max |1/(1 + K/(j w) exp(-j w L))| on a fine grid of its own."""
    w = np.linspace(1.0, 60.0, 200_001)
    peak = np.abs(1.0 / (1.0 + GAIN / (1j * w) * np.exp(-1j * w * WHOLE)))
    assert found.peak.value == pytest.approx(peak.max(), rel=1e-4)
    assert found.peak.frequency == pytest.approx(w[peak.argmax()], rel=0.03)


def test_the_band_holds_the_inner_plants(found):
    """Of 41 gains spread evenly from 0.8 to 1.2 the second lowest and the second highest bound 95 %: 0.81 and 1.19."""
    assert found.sizes.low == pytest.approx(0.81 * found.size, rel=1e-9)
    assert found.sizes.high == pytest.approx(1.19 * found.size, rel=1e-9)
    assert found.turns.high == pytest.approx(found.turn, abs=1e-6)
