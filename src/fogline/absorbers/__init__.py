"""Absorbers as single points: survey paths, measurement errors, sufficient statistics."""
