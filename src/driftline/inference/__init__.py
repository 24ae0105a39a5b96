"""Sampling, evidence and credible intervals; knows densities, nothing of curves."""
