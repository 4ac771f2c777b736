"""Lead, lag and lead-lag: their law, their locus, their form, and a search that is allowed nothing else."""

import numpy as np
import pytest
from gainwright.design.compensator import loop_gain, shape_of
from gainwright.design.design import design_gains
from gainwright.design.discretise import law_from_gains
from gainwright.design.forms import forms_of
from gainwright.design.gains import Gains
from gainwright.design.requirements import ControllerSetting, Limits, Requirement, Requirements
from gainwright.ident.given import GivenPlant, fit_of_given
from gainwright.ident.plant import Plant

DOUBLE = Gains("lead-lag", 6.26, zero=0.5, pole=5.02, second_zero=0.2, second_pole=0.0125)


def response(law, w):
    """From error to command at angular frequencies w, rad/s."""
    back = np.exp(-1j * w * law.update_interval)
    return np.polyval(law.response[::-1], back) / np.polyval(law.command[::-1], back)


def test_the_sampled_lead_lag_is_the_one_of_s_at_the_frequencies_of_its_own_map():
    """Bilinear: H(z) = C(s) at s = (2/T)(z-1)/(z+1), exactly; network of Ogata, ex. 6-8 (from memory)."""
    law = law_from_gains(DOUBLE, 0.05)
    w = np.array([0.01, 0.3, 2.0, 30.0])
    z = np.exp(1j * w * 0.05)
    s = 2.0 / 0.05 * (z - 1.0) / (z + 1.0)
    wanted = 6.26 * (s + 0.5) * (s + 0.2) / ((s + 5.02) * (s + 0.0125))
    assert response(law, w) == pytest.approx(wanted, rel=1e-10)


def test_the_published_lead_lag_raises_the_velocity_constant_to_eighty():
    """Ogata, ex. 6-8 (set-up public, numbers from memory): Kv = 8 * 6.26 * 0.5/5.02 * 0.2/0.0125 = 79.8, poles near
    -2.5 +- 4.33j: 4/(s(s+0.5)) with the lead's zero on the plant's pole.
    """
    shape, plant = shape_of(DOUBLE), ((4.0,), (1.0, 0.5, 0.0))
    assert loop_gain(DOUBLE) == 6.26
    top, bottom = np.polymul(shape.numerator, plant[0]), np.polymul(shape.denominator, plant[1])
    assert 6.26 * top[-1] / bottom[-2] == pytest.approx(79.8, rel=1e-3)
    roots = np.roots(np.polyadd(bottom, 6.26 * top))
    assert np.abs(roots - (-2.5 + 4.33j)).min() < 0.15


def test_the_zero_pole_form_names_both_sections():
    """Lead-lag has two zeros and two poles; a lead has one of each; the other forms do not exist for them."""
    forms = forms_of(DOUBLE, "V", "mm")
    assert [forms[name] for name in ("parallel", "standard", "series")] == [None, None, None]
    assert {name: part.value for name, part in forms["zero-pole"].items()} == {
        "gain": 6.26, "zero": 0.5, "pole": 5.02, "second_zero": 0.2, "second_pole": 0.0125,
    }  # fmt: skip
    assert set(forms_of(Gains("lead", 2.0, zero=1.0, pole=3.0), "V", "mm")["zero-pole"]) == {"gain", "zero", "pole"}


@pytest.mark.parametrize("structure", ["lead", "lag", "lead-lag"])
def test_a_structure_allowed_by_name_is_searched(structure):
    """4/(s(s+2)) within 5 %: each network meets a moderate settling time; K is that of its pole on the locus."""
    from gainwright.ident.given import Tolerance

    fit = fit_of_given(
        GivenPlant(Plant((4.0,), (1.0, 2.0, 0.0)), Tolerance(0.05, 0.0, 0.05)),
        operating_command=0.0, operating_response=0.0,
    )  # fmt: skip
    asked = (
        Requirement("settling_time", 6.0, "at_most", "s", band=0.02),
        Requirement("overshoot", 0.2, "at_most", "%", 100.0),
    )
    design = design_gains(
        fit.plant, fit.plausible, operating_command=0.0, operating_response=0.0, noise=None,
        requirements=Requirements(asked, 1.0), limits=Limits(),
        setting=ControllerSetting(0.05, structures=(structure,)), command_unit="V", response_unit="mm",
    )  # fmt: skip
    gains, s = design.gains, design.selection.pole
    assert gains.structure == structure
    assert design.reasons == ()
    assert (gains.pole > gains.zero) is (structure != "lag")
    network = (s + gains.zero) / (s + gains.pole)
    if structure == "lead-lag":
        assert gains.second_pole < gains.second_zero
        network *= (s + gains.second_zero) / (s + gains.second_pole)
    loop = network * 4.0 / (s * (s + 2.0)) * (1.0 - np.exp(-s * 0.05)) / (s * 0.05)
    assert np.degrees(np.angle(-loop)) == pytest.approx(0.0, abs=0.01)
    assert 1.0 / abs(loop) == pytest.approx(gains.proportional, rel=1e-9)
