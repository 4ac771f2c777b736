"""The palette is legible on both grounds and for colour-blind readers; labels keep apart."""

import itertools

import numpy as np
import pytest
from gainwright.io.figures.look import DASHES, PALETTE, apart, limits_around
from hypothesis import given
from hypothesis import strategies as st

# Machado, Oliveira, Fernandes (2009), "A physiologically-based model for simulation of color vision deficiency",
# severity 1.0, on linear RGB; from memory, and checked below to leave white white.
DEFICIENCY = {
    "none": np.eye(3),
    "deuteranopia": np.array(
        [[0.367322, 0.860646, -0.227968], [0.280085, 0.672501, 0.047413], [-0.011820, 0.042940, 0.968881]]
    ),
    "protanopia": np.array(
        [[0.152286, 1.052583, -0.204868], [0.114503, 0.786281, 0.099216], [-0.003882, -0.048116, 1.051998]]
    ),
}
TOGETHER = [
    ("response", "model", "setpoint", "limit", "ink"),  # over time
    ("command", "limit", "ink"),
    ("holds", "model", "ink"),  # ribbon
    ("command", "model", "limit", "ink"),  # headroom
    ("command", "holds", "ink", "model"),  # locus
]
PAIRS = sorted({tuple(sorted(pair)) for group in TOGETHER for pair in itertools.combinations(group, 2)})


def linear(colour: str) -> np.ndarray:
    """sRGB to linear RGB, IEC 61966-2-1 (formula from memory)."""
    part = np.array([int(colour[i : i + 2], 16) for i in (1, 3, 5)]) / 255
    return np.where(part <= 0.04045, part / 12.92, ((part + 0.055) / 1.055) ** 2.4)


def lab(rgb: np.ndarray) -> np.ndarray:
    """CIELAB (1976) of linear sRGB, D65 white."""
    to_xyz = np.array(
        [[0.4124564, 0.3575761, 0.1804375], [0.2126729, 0.7151522, 0.072175], [0.0193339, 0.119192, 0.9503041]]
    )
    ratio = to_xyz @ np.clip(rgb, 0, 1) / np.array([0.95047, 1.0, 1.08883])
    f = np.where(ratio > 216 / 24389, np.cbrt(ratio), (24389 / 27 * ratio + 16) / 116)
    return np.array([116 * f[1] - 16, 500 * (f[0] - f[1]), 200 * (f[1] - f[2])])


def contrast(one: str, other: str) -> float:
    """Contrast ratio of WCAG 2.1, (L1 + 0.05)/(L2 + 0.05)."""
    low, high = sorted(float(linear(each) @ [0.2126, 0.7152, 0.0722]) for each in (one, other))
    return (high + 0.05) / (low + 0.05)


@pytest.mark.parametrize("ground", ["light", "dark"])
@pytest.mark.parametrize("role", [role for role in PALETTE if role not in ("paper", "faint")])
def test_every_colour_that_text_may_have_is_legible_on_its_ground(role, ground):
    """WCAG 2.1 success criterion 1.4.3 asks for a contrast of 4.5 to 1 for small text."""
    assert contrast(PALETTE[role][ground], PALETTE["paper"][ground]) >= 4.5


@pytest.mark.parametrize("sight", DEFICIENCY)
def test_the_simulated_sight_leaves_white_white(sight):
    """Each row of the matrix sums to one, so that greys stay greys; a slip of a digit would show."""
    assert DEFICIENCY[sight].sum(axis=1) == pytest.approx(np.ones(3), abs=2e-6)


@pytest.mark.parametrize("sight", DEFICIENCY)
@pytest.mark.parametrize("ground", ["light", "dark"])
@pytest.mark.parametrize(("one", "other"), PAIRS)
def test_colours_that_meet_in_a_picture_stay_apart_for_colour_blind_readers(one, other, ground, sight):
    """A CIELAB distance of 10 is several times what is just noticeable side by side (2 to 3, common practice)."""
    places = [lab(DEFICIENCY[sight] @ linear(PALETTE[role][ground])) for role in (one, other)]
    assert np.linalg.norm(places[0] - places[1]) >= 10.0


def test_the_curves_that_share_a_strip_differ_in_dashes_or_stand_labelled():
    """Setpoint and limit are dashed, each in its own way, where response and model are full lines."""
    assert len({DASHES["model"], DASHES["setpoint"], DASHES["limit"]}) == 3


@given(st.lists(st.floats(0.0, 5.0), min_size=1, max_size=8), st.floats(0.05, 0.5))
def test_labels_stand_apart_inside_the_strip_in_their_order(wished, gap):
    """Neighbours end at least a gap apart, none leaves the strip, and none passes another."""
    high = 5.0
    places = apart(sorted(wished), gap, 0.0, high)
    assert all(later - earlier >= gap - 1e-9 for earlier, later in itertools.pairwise(places))
    assert max(places) <= high
    if len(wished) * gap < high:
        assert min(places) >= -1e-9


def test_an_axis_of_nothing_or_of_one_value_still_has_a_length():
    """No data, NaN alone and a constant give finite ends that differ."""
    for values in (np.array([]), np.array([np.nan]), np.array([3.0]), np.array([0.0])):
        low, high = limits_around(values)
        assert np.isfinite([low, high]).all()
        assert low < high
