"""Fixtures that several layers share."""
