"""Lets the tests of the samples import the true rig, which is no part of the package."""

import sys
from pathlib import Path

SAMPLE_RUNS = Path(__file__).resolve().parents[2] / "sample_runs"
if str(SAMPLE_RUNS) not in sys.path:
    sys.path.insert(0, str(SAMPLE_RUNS))
