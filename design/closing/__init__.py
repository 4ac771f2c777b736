"""Holding a prediction against a held-out record: prediction, verdict, gap."""
