"""Benchmarks: each figure against a plainly written baseline, in one run."""
