"""Checking proofs again with a second implementation.

Nothing here is shared with the first: the TOML is read by the standard library, formulas by a parser of
this room, numbers are mpmath's intervals (within an integration, intervals of whole units) instead of
python-flint's balls, derivatives come from arithmetic on truncated power series instead of sympy. The room
imports nothing else of Tinemark.
"""
