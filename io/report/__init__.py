"""The one-file report."""
