"""Simulator text to checked, gridded sweeps."""
