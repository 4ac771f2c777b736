"""The benchmarks' cheap parts run and give finite ratios. Nothing here is timed."""

import math
import sys
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).resolve().parent))

import run
from measure import slope

CHEAP = ("starts", "spectra", "reading", "locus", "sets", "ensemble", "start-up")


@pytest.mark.parametrize("name", CHEAP)
def test_each_cheap_part_gives_finite_ratios(name):
    """At the quick sizes."""
    lines = list(run.GROUPS[name](True))
    assert lines
    for line in lines:
        assert line.seconds >= 0
        assert all(math.isfinite(ratio) and ratio > 0 for _, ratio in line.beside)


def test_the_slope_of_a_square_law_is_two():
    """Cost 3 n^2."""
    assert slope([10, 100, 1000], [300.0, 30_000.0, 3_000_000.0]) == pytest.approx(2.0)
