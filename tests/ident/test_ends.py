"""Intervals at a bound, against the truncated normal law."""

import numpy as np
import pytest
from gainwright.ident.ends import interval_ends
from scipy.stats import norm, truncnorm


def interval(seen):
    """Of a quantity that can't be negative, measured as `seen` with a standard deviation of one."""
    draws = truncnorm.ppf((np.arange(2000) + 0.5) / 2000, -seen, np.inf, loc=seen)
    return interval_ends(draws, max(seen, 0.0), 0.0)


@pytest.mark.parametrize(
    ("truth", "least", "most"), [(0.0, 0.97, 1.0), (0.5, 0.96, 1.0), (2.0, 0.92, 0.97), (6.0, 0.945, 0.955)]
)
def test_a_quantity_bounded_below_is_held_as_often_as_said(truth, least, most):
    """Summed over what may be measured: never much under 95 %, at the bound itself over it.

    Between, the worst is 1 - 0.05 - 0.025: the end above misses as one-sided, the end below as two-sided.
    """
    seen = truth + np.linspace(-4, 4, 81)
    weight = norm.pdf(seen - truth) / norm.pdf(seen - truth).sum()
    ends = np.array([interval(float(x)) for x in seen])
    held = float(np.sum(weight[(ends[:, 0] <= truth) & (truth <= ends[:, 1])]))
    assert least <= held <= most


def test_far_from_the_bound_the_interval_is_the_middle_of_the_draws():
    """5 +- 1.96 to the 0.5 % that 2,000 points and the far bound leave."""
    assert interval(5.0) == pytest.approx((5 - 1.96, 5 + 1.96), abs=5e-3)


def test_at_the_bound_the_interval_is_as_short_as_one_sided():
    """Measured as nought: half a normal law, 95 % of it below 1.96; the middle 95 % would end at 2.24."""
    assert interval(0.0) == pytest.approx((0.0, 1.96), abs=5e-3)
