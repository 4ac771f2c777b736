"""Branches of the locus: complete at every gain, smooth, and never swapped."""

import numpy as np
import pytest
from gainwright.design.locus.branches import locus_branches
from gainwright.design.locus.condition import LocusError
from gainwright.design.locus.loop import OpenLoop
from gainwright.design.locus.roots import closed_loop_roots

LOOPS = {
    "three lags": (OpenLoop((1.0,), (1.0, 3.0, 2.0, 0.0)), None),
    "complex breakaway points": (OpenLoop((1.0,), (1.0, 8.0, 29.0, 52.0, 0.0)), None),
    "triple breakaway": (OpenLoop((1.0, 1.0), (1.0, 9.0, 0.0, 0.0)), None),
    "lag with dead time": (OpenLoop((1.0,), (1.0, 1.0), 1.0), -4.0),
    "mode with hold": (OpenLoop((100.0,), (1.0, 0.04, 100.0), 0.05, 0.01), -40.0),
    "servo with dead time": (OpenLoop((3.0, 6.0), (1.0, 5.0, 9.0, 5.0, 0.0), 0.2, 0.05), -15.0),
}


@pytest.mark.parametrize("name", LOOPS)
def test_the_branches_hold_every_root_at_every_gain_checked(name: str) -> None:
    """At 12 of 300 gains the branches are the closed-loop roots, each once, to 1e-9 of the picture."""
    loop, left = LOOPS[name]
    gains = np.geomspace(0.01, 20.0, 300)
    branches = locus_branches(loop, gains, left)
    for column in range(0, 300, 27):
        expected = closed_loop_roots(loop, float(gains[column]), left)
        found = np.array([b[column] for b in branches if not np.isnan(b[column])])
        assert found.size == expected.size
        distance = np.abs(found[:, None] - expected[None, :])
        assert sorted(distance.argmin(axis=1)) == list(range(expected.size))
        assert distance.min(axis=1).max() < 1e-9 * np.abs(expected).max()


@pytest.mark.parametrize("name", ["three lags", "lag with dead time", "servo with dead time"])
def test_no_branch_is_swapped(name: str) -> None:
    """Along a branch the step to the next gain is what ds/dlnK predicts; a swap would be a jump. Steps within 5 % of
    a breakaway gain, where ds/dlnK is unbounded, are left out."""
    loop, left = LOOPS[name]
    gains = np.geomspace(0.01, 20.0, 600)
    span = np.log(gains[1] / gains[0])
    for branch in locus_branches(loop, gains, left):
        ok = ~np.isnan(branch[1:]) & ~np.isnan(branch[:-1])
        slope = -1.0 / loop.log_derivative(branch[:-1][ok])
        step = (branch[1:] - branch[:-1])[ok]
        steady = np.abs(slope) * span < 0.05 * np.abs(branch[:-1][ok])
        assert np.all(np.abs(step - slope * span)[steady] < 0.5 * np.abs(step)[steady] + 1e-9)


def test_conjugate_branches_mirror_each_other() -> None:
    """For every branch of a loop with real coefficients its mirror image is there too."""
    loop, left = LOOPS["lag with dead time"]
    branches = [b[-1] for b in locus_branches(loop, np.geomspace(0.01, 20.0, 100), left)]
    for root in branches:
        if not np.isnan(root):
            assert min(abs(root.conjugate() - other) for other in branches) < 1e-9


def test_gains_that_do_not_rise_are_refused() -> None:
    """Continuation needs an order."""
    with pytest.raises(LocusError, match="positive and rising"):
        locus_branches(LOOPS["three lags"][0], np.array([1.0, 0.5]))
