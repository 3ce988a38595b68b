"""Regressions with two noisy axes, medians and their intervals."""
