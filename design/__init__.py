"""Design: from plausible plants to gains that hold. Computes on values, opens no file."""
