"""The simplest driven system there is, with its exact answer."""

# x' = -x + a cos t has the steady answer a (cos t + sin t)/2, which is a/2 at each strobe.
LOW_PASS = """\
title = "Low pass"
kind = "driven"
[states.x]
start = "0"
[parameters.a]
value = "1"
range = ["0.5", "2"]
[rate]
x = "-x + a*cos(t)"
[sample]
every = "2*pi"
"""
