"""Orbit densities: counts, Lyapunov strip, periods and the tones they are shown in."""
