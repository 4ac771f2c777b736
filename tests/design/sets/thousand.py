"""A thousand random requirement sets against the dense look: `python -P tests/design/sets/thousand.py --sets 1000`."""

import argparse
import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parent))

from random_sets import look


def main() -> None:
    """Print what disagrees, then the counts."""
    ask = argparse.ArgumentParser(description=__doc__)
    ask.add_argument("--sets", type=int, default=1000)
    ask.add_argument("--first", type=int, default=0)
    given = ask.parse_args()
    done = several = bad = 0
    seed = given.first
    while done < given.sets:
        found = look(seed)
        seed += 1
        if found is None:
            continue
        done += 1
        several += found.several
        if found.wrong:
            bad += 1
            print(seed - 1, found.wrong[:4], flush=True)
    print(f"{done} sets, {several} with several intervals, {bad} with a gain that is wrong")


if __name__ == "__main__":
    main()
