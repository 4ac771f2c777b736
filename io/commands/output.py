"""The output stream: its width, and whether it can show colour."""

import os
import shutil
import sys
from collections.abc import Callable


def print_coloured(text: Callable[[int, bool], str]) -> None:
    """Print `text(width, colour)`: in colour on a terminal only, and never where NO_COLOR is set."""
    colour = sys.stdout.isatty() and "NO_COLOR" not in os.environ
    print(text(shutil.get_terminal_size((100, 40)).columns, colour))
