"""Driven and free-running systems of the library: their orbits stay in the view that their file states."""

from __future__ import annotations

import numpy as np
import pytest

from tinemark.equations.returns import return_map
from tinemark.systems.library import DEMOS, builtin_names, builtin_system

NAMES = [name for name in (*builtin_names(), *DEMOS) if not builtin_system(name).is_map]
COLUMNS = 24


@pytest.mark.parametrize("name", NAMES)
def test_samples_over_the_sweep_stay_in_view(name: str) -> None:
    system = builtin_system(name)
    swept = system.parameter(system.diagram_parameter)
    assert swept.range is not None
    values = np.linspace(float(swept.range[0]), float(swept.range[1]), COLUMNS)
    states = np.repeat([[float(state.start)] for state in system.states], COLUMNS, axis=1)
    sampled = return_map(system, swept.name, 1e-6)
    place = system.state_names.index(system.observe)
    low, high = (float(end) for end in system.states[place].range or (0, 0))
    inside, seen = 0, 0
    for number in range(400):
        states = sampled.step(states, values)
        assert np.isfinite(states).all(), sampled.reasons()
        if number >= 200:
            inside += int(((states[place] >= low) & (states[place] <= high)).sum())
            seen += COLUMNS
    # Beyond its cascade an orbit may leave for another well or turn over.
    assert inside >= 0.9 * seen
