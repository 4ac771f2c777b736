"""Makes the proof kit importable for the tests beside it."""

import sys
from pathlib import Path

HERE = Path(__file__).resolve().parent
for folder in (HERE, HERE.parents[1] / "sample_runs"):
    if str(folder) not in sys.path:
        sys.path.insert(0, str(folder))
