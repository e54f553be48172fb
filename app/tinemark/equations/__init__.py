"""Equations of motion turned into return maps: integrators in doubles, in high precision and in balls."""
