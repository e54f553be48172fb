"""Small systems of equations that several tests share."""

from __future__ import annotations

from tinemark.systems.system import System
from tinemark.systems.system_file import read_system_text

PENDULUM = """
title = "Driven damped pendulum"
kind = "driven"
[states.phi]
start = "0"
range = ["-4", "4"]
[states.v]
start = "0"
range = ["-20", "20"]
[parameters.g]
value = "1.07"
range = ["1.06", "1.09"]
[rate]
phi = "v"
v = "-0.75*pi*2*v - (3*pi)**2*sin(phi) + g*(3*pi)**2*cos(2*pi*t)"
[sample]
every = "1"
[diagram]
parameter = "g"
observe = "phi"
"""

DUFFING = """
title = "Two-well oscillator"
kind = "driven"
[states.x]
start = "1"
range = ["0", "2"]
[states.v]
start = "0"
range = ["-1", "1"]
[parameters.w]
value = "1.2"
range = ["1.1", "1.3"]
[parameters.F]
value = "0.27"
range = ["0.26", "0.3"]
[rate]
x = "v"
v = "-0.3*v + x - x**3 + F*cos(w*t)"
[sample]
every = "2*pi/w"
[diagram]
parameter = "w"
observe = "x"
"""

ROESSLER = """
title = "Roessler's equations"
kind = "flow"
[states.x]
start = "-3"
range = ["-6", "6"]
[states.y]
start = "0"
range = ["-6", "6"]
[states.z]
start = "0.1"
range = ["0", "6"]
[parameters.c]
value = "3"
range = ["2.5", "4.3"]
[rate]
x = "-y - z"
y = "x + 0.2*y"
z = "0.2 + z*(x - c)"
[sample]
crosses = "y"
direction = "falling"
[diagram]
parameter = "c"
observe = "x"
"""

LORENZ = """
title = "Lorenz's equations, a bent section that moves with the parameter"
kind = "flow"
[states.x]
start = "1"
[states.y]
start = "1.2"
[states.z]
start = "20"
[parameters.r]
value = "28"
range = ["25", "30"]
[rate]
x = "10*(y - x)"
y = "x*(r - z) - y"
z = "x*y - 8*z/3"
[sample]
crosses = "z - r + 1 + 0.01*x**2"
direction = "falling"
[diagram]
parameter = "r"
observe = "x"
"""

LINEAR = """
title = "Damped linear oscillator, driven"
kind = "driven"
[states.x]
start = "1"
[states.v]
start = "0"
[parameters.k]
value = "2"
range = ["1", "3"]
[rate]
x = "v"
v = "-k*x - 0.2*v + cos(t)"
[sample]
every = "2*pi"
[diagram]
parameter = "k"
observe = "x"
"""


def made(text: str, **replaced: str) -> System:
    """The system of a text, parts of the text replaced first."""
    for old, new in replaced.items():
        assert old in text
        text = text.replace(old, new)
    return read_system_text(text)
