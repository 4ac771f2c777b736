"""Every loop gain that meets a requirement: exact in frequency, closed in on continuous measures in time."""
