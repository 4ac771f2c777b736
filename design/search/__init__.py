"""The search over zeros and loop gain: coarse grid, polish, and the check on every plausible plant."""
