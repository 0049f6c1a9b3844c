"""Whether a fit can be believed: predictive checks, hold-outs, information, calibration."""
