"""The stand-in for a job is imported by its name, here and in workers that are started anew."""

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parent))
