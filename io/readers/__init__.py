"""Readers of record files, behind one door."""
