"""The kit of pairs: a change is what it says, and the bounds of the table are those of the exact law."""

import numpy as np
import pytest
from pair_table import at_most, summary
from pairing import Pair, RigPairs
from proof.changes import CHANGES, draw_change
from proof.families import FAMILIES, draw
from true_rig import open_loop
from true_rig.linear_stages import Gain, Resonance
from true_rig.rough_stages import FrictionDrive


def stage(rig, kind):
    """The first stage of a kind."""
    return next(each for each in rig.stages if isinstance(each, kind))


@pytest.mark.parametrize("kind", CHANGES)
def test_every_change_moves_the_response_of_some_rig_and_leaves_the_drawn_one_alone(kind):
    """The same command, the same start: another response; None where a rig has nothing of the kind."""
    seen = 0
    for family in FAMILIES:
        drawn = draw(family, np.random.default_rng(3))
        found = CHANGES[kind](drawn, 0.02 * drawn.base, np.random.default_rng(4))
        if found is None:
            continue
        rig, words = found
        rest = drawn.rig.command_rest
        profile, length = [(0.5 * drawn.dwell, rest + drawn.amplitude)], 1.5 * drawn.dwell
        old, new = (
            open_loop(each, profile, length, length / 100.0, np.random.default_rng(0)) for each in (drawn.rig, rig)
        )
        assert words
        assert rig is not drawn.rig
        seen += not np.allclose(old.reading, new.reading, rtol=0.0, atol=1e-9 * drawn.swing)
    assert seen >= 1


def test_sizes_are_told_as_they_are():
    """Per cent of what stood before."""
    drawn = draw("resonance", np.random.default_rng(5))
    rig, words = CHANGES["gain"](drawn, 0.01, np.random.default_rng(6))
    assert words == f"gain {100 * (stage(rig, Gain).gain / stage(drawn.rig, Gain).gain - 1):+.1f} %"
    rig, words = CHANGES["frequency"](drawn, 0.01, np.random.default_rng(6))
    ratio = stage(rig, Resonance).frequency / stage(drawn.rig, Resonance).frequency
    assert words == f"frequency {100 * (ratio - 1):+.1f} %"
    rig, words = CHANGES["one sample"](drawn, 0.01, np.random.default_rng(6))
    assert words == f"dead time +{round((rig.dead_time - drawn.rig.dead_time) / 0.01)} samples"
    servo = draw("servo with friction", np.random.default_rng(5))
    rig, words = CHANGES["friction"](servo, 0.01, np.random.default_rng(6))
    ratio = stage(rig, FrictionDrive).coulomb / stage(servo.rig, FrictionDrive).coulomb
    assert words == f"friction {100 * (ratio - 1):+.1f} %"


def test_another_operating_point_is_the_same_bent_gain_read_elsewhere():
    """g(d + x) - g(d) of the old law is the new law at x."""
    drawn = next(d for d in (draw("two lags", np.random.default_rng(s)) for s in range(30)) if stage(d.rig, Gain).bend)
    rig, _ = CHANGES["operating point"](drawn, 0.01, np.random.default_rng(7))
    old, new = stage(drawn.rig, Gain), stage(rig, Gain)
    load = rig.command_rest - drawn.rig.command_rest
    x = np.linspace(-1.0, 1.0, 5) * drawn.amplitude
    there = [old.rest(drawn.rig.command_rest + load + v) - old.rest(drawn.rig.command_rest + load) for v in x]
    assert [new.rest(rig.command_rest + v) for v in x] == pytest.approx(there)


def test_a_change_depends_on_its_generator_only():
    """The same seed draws the same."""
    drawn = draw("integrating level", np.random.default_rng(1))
    first, second = (draw_change(drawn, 0.01, np.random.default_rng(2)) for _ in range(2))
    assert (first[0], first[2]) == (second[0], second[2])


def test_the_bound_is_clopper_and_pearsons():
    """None of n: 1 - 0.05^(1/n); one of n: the p at which (1 - p)^n + n p (1 - p)^(n - 1) is 5 % (binomial law)."""
    assert at_most(0, 149) == pytest.approx(1.0 - 0.05 ** (1.0 / 149.0))
    p = at_most(1, 236)
    assert (1 - p) ** 236 + 236 * p * (1 - p) ** 235 == pytest.approx(0.05, abs=1e-9)
    assert at_most(3, 3) == 1.0


def test_pairs_are_sorted_by_the_truth_and_counted_once():
    """One alarm, one miss, one that was broken already: three lines of the table."""
    broken = {"overshoot": 0.3}

    def pair(kind, verdict, before=(), after=()):
        return Pair(1, 0, "lag", kind, "", verdict, "", None, dict(before), dict(after))

    rig = RigPairs(1, 0, "lag", [
        pair("none", "agrees"), pair("none", "disagrees"), pair("gain", "agrees", after=broken),
        pair("gain", "disagrees", after=broken), pair("lag", "agrees"), pair("none", "agrees", broken, broken),
    ], "", 1.0)  # fmt: skip
    assert [each.sort for each in rig.pairs] == [
        "unchanged", "unchanged", "harmful", "harmful", "harmless", "already broken",
    ]  # fmt: skip
    told = summary([rig])
    assert "false disagrees, of powered unchanged  1 of 2 = 50.0 %" in told
    assert "missed, of powered harmful             1 of 2 = 50.0 %" in told
