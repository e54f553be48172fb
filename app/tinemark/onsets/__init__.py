"""Cycles, branches, onsets with their proofs, ladders and their scaling."""
