"""A child that never answers, for a test of the bound."""

import time


def main() -> None:
    time.sleep(3600.0)
