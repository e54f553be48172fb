"""The probe of a driven system: its samples, one a drive period."""

from __future__ import annotations

import math
from fractions import Fraction

import numpy as np
import pytest
from low_pass import LOW_PASS

from tinemark.document.first_view import first_view
from tinemark.systems.system_file import read_system_text
from tinemark.work.probe import request_probe


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
