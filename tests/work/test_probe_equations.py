"""The probe of a driven system: its samples, one a drive period."""

from __future__ import annotations

import math
import threading
from fractions import Fraction

import numpy as np
import pytest
from low_pass import LOW_PASS

from tinemark.document.first_view import first_view
from tinemark.systems.system_file import read_system_text
from tinemark.work.probe import request_probe
from tinemark.work.waveform import waveform


def test_the_probe_shows_samples_of_a_driven_system() -> None:
    orbit = request_probe(read_system_text(LOW_PASS), "a", Fraction(3, 2), 30)
    assert orbit.states.shape == (30, 1)
    first = 0.75 * (1 - math.exp(-2 * math.pi))
    assert orbit.states[0, 0] == pytest.approx(first, abs=1e-7)
    assert orbit.observed[-1] == pytest.approx(0.75, abs=1e-7)
    assert orbit.map_curve is None


def test_an_escaping_driven_orbit_is_said_to_escape() -> None:
    text = LOW_PASS.replace("-x + a*cos(t)", "x*x + a + cos(t)")
    assert request_probe(read_system_text(text), "a", Fraction(1), 30).escaped


def test_without_a_range_the_first_view_holds_what_the_orbit_does() -> None:
    view = first_view(read_system_text(LOW_PASS))
    # The amplitude at a = 1.25, in the middle of the sweep, is 1.25/sqrt(2).
    assert -1.2 < float(view.bottom) < -0.8 < 0.8 < float(view.top) < 1.2
    assert np.isclose(float(view.left), 0.5)


def test_the_waveform_goes_through_the_samples_of_a_driven_system() -> None:
    orbit = request_probe(read_system_text(LOW_PASS), "a", Fraction(3, 2), 30)
    wave = orbit.wave
    assert orbit.times is not None and wave is not None
    assert orbit.times == pytest.approx(2 * np.pi * np.arange(1, 31))
    assert wave.sample_times == pytest.approx(orbit.times[wave.first :])
    exact = 0.75 * (np.cos(wave.times) + np.sin(wave.times))
    assert np.abs(wave.observed - exact).max() < 1e-4


# A circle run through at unit speed, sampled where y passes zero upwards: once every 2 pi.
CIRCLE = """\
title = "Circle"
kind = "flow"
[states.x]
start = "1"
[states.y]
start = "0.5"
[parameters.w]
value = "1"
range = ["0.5", "2"]
[rate]
x = "-w*y + x*(1 - x*x - y*y)"
y = "w*x + y*(1 - x*x - y*y)"
[sample]
crosses = "y"
direction = "rising"
[diagram]
parameter = "w"
observe = "x"
"""


def test_the_waveform_of_a_flow_takes_its_times_from_the_section() -> None:
    orbit = request_probe(read_system_text(CIRCLE), "w", Fraction(2), 40)
    assert orbit.times is not None and orbit.wave is not None
    assert np.diff(orbit.times) == pytest.approx(np.pi, abs=1e-6)
    assert orbit.observed[-1] == pytest.approx(1.0, abs=1e-6)
    turned = orbit.wave.times - orbit.times[-1]
    assert np.abs(orbit.wave.observed - np.cos(2 * turned)).max() < 1e-4


def test_a_way_that_cannot_be_followed_is_left_out() -> None:
    system = read_system_text(LOW_PASS)
    states, times = np.array([[0.5], [0.9]]), np.array([0.0, 2 * np.pi])
    # The second sample is not where the orbit goes.
    assert waveform(system, [1.0], states, times, 0) is None
    assert waveform(system, [1.0], states[:1], times[:1], 0) is None
    stop = threading.Event()
    stop.set()
    assert waveform(system, [1.0], states, times, 0, stop) is None
