"""Benches: ratios of one run, printed, never timed tests."""
