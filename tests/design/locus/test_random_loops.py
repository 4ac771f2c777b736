"""Root counts of random loops by three ways: critical gains, certified roots, and an independent Nyquist winding."""

import importlib.util
import sys
from pathlib import Path

import numpy as np
import pytest
from gainwright.design.locus.crossings import axis_crossings
from gainwright.design.locus.roots import closed_loop_roots
from gainwright.design.locus.stability import stable_gain_intervals, unstable_roots

_SPEC = importlib.util.spec_from_file_location("random_loops", Path(__file__).with_name("random_loops.py"))
assert _SPEC is not None
assert _SPEC.loader is not None
random_loops = importlib.util.module_from_spec(_SPEC)
sys.modules["random_loops"] = random_loops
_SPEC.loader.exec_module(random_loops)


@pytest.mark.parametrize("seed", range(6))
def test_every_count_of_unstable_roots_is_right(seed: int) -> None:
    """25 random loops a seed, open-loop unstable and conditionally stable ones among them, each at a gain near one of
    its first critical gains: the map of crossings, the certified roots and the winding agree exactly."""
    rng = np.random.default_rng(seed)
    for _ in range(25):
        loop = random_loops.random_loop(rng)
        gains = [c.loop_gain for c in axis_crossings(loop) if 1e-6 < c.loop_gain < 1e4]
        gain = float((rng.choice(gains[:4]) if gains else 1.0) * rng.choice([0.6, 0.97, 1.05, 1.8]))
        counted = random_loops.unstable_count(loop, gain)
        assert abs(counted - round(counted)) < 1e-6, (loop, gain)
        assert unstable_roots(loop, gain) == round(counted), (loop, gain)
        assert closed_loop_roots(loop, gain, 0.0).size == round(counted), (loop, gain)


def test_stable_sets_of_random_loops_are_stable_inside_and_unstable_beside() -> None:
    """Within every interval the winding counts no unstable root, and just beyond each finite end at least one."""
    rng = np.random.default_rng(77)
    checked = 0
    for _ in range(60):
        loop = random_loops.random_loop(rng)
        for low, high in stable_gain_intervals(loop):
            if (low < 1e-6 and low != 0.0) or (high is not None and high > 1e4):
                continue
            inside = np.sqrt(low * high) if high is not None and low > 0.0 else 0.5 * (low + (high or 4.0 * low + 1.0))
            assert round(random_loops.unstable_count(loop, float(inside))) == 0, (loop, low, high)
            beyond = ([] if high is None else [high * 1.01]) + ([] if low == 0.0 else [low * 0.99])
            for gain in beyond:
                assert round(random_loops.unstable_count(loop, gain)) > 0, (loop, low, high)
            checked += 1
    assert checked >= 15
