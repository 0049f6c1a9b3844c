"""Whether results can be trusted: calibration by simulated data."""
