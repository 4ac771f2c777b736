"""Puts the true rig and the proof kit on the path; neither belongs to the package."""

import os
import sys
from pathlib import Path

HERE = Path(__file__).resolve().parent
for folder in (HERE, HERE.parents[1] / "sample_runs"):
    if str(folder) not in sys.path:
        sys.path.insert(0, str(folder))
for name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS"):
    os.environ.setdefault(name, "1")
