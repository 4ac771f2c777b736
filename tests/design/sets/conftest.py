"""Puts this folder's helpers where its tests find them."""

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parent))
