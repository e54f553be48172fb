"""Measured sweeps beside the model."""
