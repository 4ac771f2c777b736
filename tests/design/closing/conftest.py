"""Lets the tests of closing import the closed-form truth of identification's tests."""

import sys
from pathlib import Path

TRUTH = Path(__file__).resolve().parents[2] / "ident"
if str(TRUTH) not in sys.path:
    sys.path.insert(0, str(TRUTH))
