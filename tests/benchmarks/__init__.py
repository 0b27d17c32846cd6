"""Measured ratios of one run: `python3 -m tests.benchmarks`."""
