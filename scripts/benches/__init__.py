"""Benches: one module a subject, each with ``figures()``; run by scripts/bench.py."""
