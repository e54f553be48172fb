"""A good system file, to be spoiled one line at a time."""

OWN = """title = "Own"
kind = "map"

[states.x]
start = "0.4"

[parameters.r]
value = "3.2"
range = ["2.8", "4"]

[next]
x = "r*x*(1 - x)"

[diagram]
parameter = "r"
observe = "x"
"""

DRIVEN = """title = "Low pass"
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
