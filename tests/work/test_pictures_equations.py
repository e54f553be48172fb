"""The picture desk on equations: what it waits for, what it measured, and the accuracy that was asked for."""

from __future__ import annotations

import math
import queue
from dataclasses import replace
from fractions import Fraction

import numpy as np
from low_pass import LOW_PASS

from tinemark.density.field import Field
from tinemark.density.request import PictureRequest, View
from tinemark.equations.accuracy import Accuracy
from tinemark.systems.system_file import read_system_text
from tinemark.work.pictures import TUNING, PictureDesk, PictureDone, PictureMeasured, PictureWaits

PATIENCE = 120


def test_a_picture_of_equations_says_what_it_waits_for_and_how_accurate_it_is() -> None:
    system = read_system_text(LOW_PASS)
    view = View(Fraction(1, 2), Fraction(2), Fraction(0), Fraction(1))
    request = PictureRequest(system, "a", "x", view, 48, 40, transient_steps=32)
    heard: queue.Queue[object] = queue.Queue()
    desk = PictureDesk(lambda _, field: heard.put(field), heard.put)

    def until_done(asked: PictureRequest) -> list[object]:
        desk.request(asked, 64)
        seen = [heard.get(timeout=PATIENCE)]
        while not isinstance(seen[-1], PictureDone):
            seen.append(heard.get(timeout=PATIENCE))
        return seen

    try:
        first = until_done(request)
        finer = until_done(replace(request, accuracy=Accuracy.REFERENCE))
    finally:
        desk.close()
    words = [event.words for event in first if isinstance(event, PictureWaits)]
    assert words[-1] == TUNING
    # Kernels are compiled once for all accuracies.
    assert not [event for event in finer if isinstance(event, PictureWaits)]
    errors = [event.error for event in first + finer if isinstance(event, PictureMeasured)]
    assert len(errors) == 2
    assert errors[0] <= Accuracy.PICTURE.error
    assert errors[1] <= Accuracy.REFERENCE.error
    assert errors[1] < errors[0]
    for seen in (first, finer):
        field = next(thing for thing in reversed(seen) if isinstance(thing, Field))
        assert (field.period == 1).all()
        # The exponent of a sample is minus the time between samples.
        assert np.allclose(field.lyapunov, -2 * math.pi, rtol=1e-4)
